"""The environment as frozen settings. Nothing else reads the environment."""

from __future__ import annotations

import os
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

DEFAULT_DATABASE_URL = "sqlite:///gain-signoff.db"
"""A SQLite file in the working folder."""

SECRET_KEY_BYTES_MIN = 32


class SettingsError(ValueError):
    """A setting that is missing or cannot be used, in a sentence for the person who starts the service."""


@dataclass(frozen=True, kw_only=True, slots=True)
class Settings:
    """Where the records are kept and with which keys."""

    database_url: str = field(default=DEFAULT_DATABASE_URL, repr=False)
    """Not shown: it may hold a password."""
    secret_key: str | None = field(default=None, repr=False)
    """Signs cursors and the sign-in of pages. It has no default: a published one would be no secret."""
    signing_key_file: Path | None = None
    """Ed25519 private key in PEM; without it checkpoints are unsigned and say so."""

    @classmethod
    def from_environment(cls, environment: Mapping[str, str] | None = None) -> Settings:
        """Read the `GAIN_SIGNOFF_...` variables; an empty one counts as absent."""
        variables = os.environ if environment is None else environment
        key_file = variables.get("GAIN_SIGNOFF_SIGNING_KEY_FILE")
        return cls(
            database_url=variables.get("GAIN_SIGNOFF_DATABASE_URL") or DEFAULT_DATABASE_URL,
            secret_key=variables.get("GAIN_SIGNOFF_SECRET_KEY") or None,
            signing_key_file=Path(key_file) if key_file else None,
        )

    def required_secret_key(self) -> str:
        """Return the secret key, or raise SettingsError where it is missing or too short to be one."""
        if self.secret_key is None or len(self.secret_key.encode()) < SECRET_KEY_BYTES_MIN:
            fault = "is not set" if self.secret_key is None else "is too short"
            raise SettingsError(
                f"GAIN_SIGNOFF_SECRET_KEY {fault}: it is a text of {SECRET_KEY_BYTES_MIN} bytes or more "
                "that nobody else knows"
            )
        return self.secret_key
