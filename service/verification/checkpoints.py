"""A checkpoint as somebody outside the store has kept it, and what it says of a history."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass, field

from service.verification import signatures
from service.verification.report import Broken


@dataclass(frozen=True, kw_only=True, slots=True)
class Checkpoint:
    """How far a history reached and what its root was. A part that is None is not compared."""

    size: int
    root: str
    origin: str | None = None
    """Digest of the first entry."""
    head: str | None = None
    """Digest of the last entry that is covered."""
    public_key: str | None = None
    document: Mapping[str, object] = field(default_factory=dict, repr=False)
    """All of it, as it was read; its `signature` covers the rest."""

    @staticmethod
    def read(raw: bytes) -> Checkpoint:
        """Read a checkpoint as the service gives it out. Raises ValueError where it is none."""
        try:
            document = json.loads(raw)
            size, root = document["size"], document["digest"]
        except (KeyError, TypeError, ValueError) as error:
            raise ValueError("this is no checkpoint: it has a size and a digest") from error
        if type(size) is not int or size < 0 or not isinstance(root, str):
            raise ValueError("this is no checkpoint: its size is a whole number and its digest a text")
        parts = {name: _text(document, name) for name in ("origin", "head", "public_key")}
        return Checkpoint(size=size, root=root, document=document, **parts)

    @property
    def is_signed(self) -> bool:
        """True where it has a signature, right or wrong."""
        return self.document.get("signature") is not None

    def check_signature(self) -> None:
        """Raise Broken where it has a signature that its key did not make of it."""
        signed = {name: value for name, value in self.document.items() if name != "signature"}
        if self.is_signed and not signatures.holds(self.public_key, self.document["signature"], signed):
            raise Broken("the checkpoint's signature is not one that its key made of it")


def _text(document: Mapping[str, object], name: str) -> str | None:
    value = document.get(name)
    if value is not None and not isinstance(value, str):
        raise ValueError(f"this is no checkpoint: its {name} is a text")
    return value
