"""The environment as frozen settings. Nothing else reads the environment."""

from __future__ import annotations

import os
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Literal, TypeVar, get_args

ChoiceT = TypeVar("ChoiceT")

LogLevel = Literal["debug", "info", "warning", "error"]
LogFormat = Literal["json", "text"]

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
    log_level: LogLevel = "info"
    """The least weight of what is logged; the line of a request has the weight info."""
    log_format: LogFormat = "json"

    @classmethod
    def from_environment(cls, environment: Mapping[str, str] | None = None) -> Settings:
        """Read the `GAIN_SIGNOFF_...` variables; an empty one counts as absent. Raises SettingsError."""
        variables = os.environ if environment is None else environment
        key_file = variables.get("GAIN_SIGNOFF_SIGNING_KEY_FILE")
        return cls(
            database_url=_told_or_kept(variables, "GAIN_SIGNOFF_DATABASE_URL") or DEFAULT_DATABASE_URL,
            secret_key=_told_or_kept(variables, "GAIN_SIGNOFF_SECRET_KEY"),
            signing_key_file=Path(key_file) if key_file else None,
            log_level=_one_of(variables, "GAIN_SIGNOFF_LOG_LEVEL", get_args(LogLevel), "info"),
            log_format=_one_of(variables, "GAIN_SIGNOFF_LOG_FORMAT", get_args(LogFormat), "json"),
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


def _told_or_kept(variables: Mapping[str, str], name: str) -> str | None:
    """Return the variable, or the content of the file that the variable of the same name with _FILE names."""
    told, file = variables.get(name) or None, variables.get(f"{name}_FILE")
    if not file:
        return told
    if told is not None:
        raise SettingsError(f"{name} and {name}_FILE are both set: which of them counts?")
    try:
        return Path(file).read_text("utf-8").strip() or None
    except (OSError, UnicodeDecodeError) as failed:
        reason = failed.strerror if isinstance(failed, OSError) else "it is no text in UTF-8"
        raise SettingsError(f"{name}_FILE names {file}, which cannot be read: {reason}") from None


def _one_of(
    variables: Mapping[str, str], name: str, choices: tuple[ChoiceT, ...], otherwise: ChoiceT
) -> ChoiceT:
    value = variables.get(name) or otherwise
    for choice in choices:
        if choice == value:
            return choice
    raise SettingsError(f"{name} is {value!r}; it is one of {', '.join(map(str, choices))}")
