"""The keys that signed checkpoints, one after another, as the history tells of them.

A key is taken up by an entry that it signed itself; another one follows by an entry that both signed. What
they sign names the place: the size and the root of the history before the entry. A key that the one before
did not confirm (it was lost) is no fault, and said.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from service.verification import signatures
from service.verification.report import Broken

KINDS = ("signing_key_taken_up", "signing_key_changed")
PURPOSE = "signing key"


class Keys:
    """The keys of a history as far as it has been read."""

    def __init__(self) -> None:
        self._since: list[tuple[int, str]] = []
        self._unconfirmed: set[str] = set()
        self.notes: list[str] = []

    def add(self, entry: dict[str, Any], *, number: int, origin: str, root: str) -> None:
        """Take in one entry; `root` is that of the entries before it. Raises Broken."""
        if entry.get("kind") not in KINDS:
            return
        content = entry.get("content")
        if not isinstance(content, dict):
            raise Broken("it tells of no key", entry=number)
        present = self._since[-1][1] if self._since else None
        if content.get("previous_key") != present:
            raise Broken("the key that it follows on is not the one before it", entry=number)
        signed = {
            "purpose": PURPOSE,
            "origin": origin,
            "size": number - 1,
            "digest": root,
            "previous_key": present,
            "public_key": content.get("public_key"),
        }
        key = content.get("public_key")
        if not signatures.holds(key, content.get("signature"), signed):
            raise Broken("the new key did not sign it", entry=number)
        if present is not None:
            self._check_confirmed(content, signed, present, number)
        self._since.append((number, str(key)))

    def _check_confirmed(
        self, content: dict[str, Any], signed: dict[str, object], present: str, number: int
    ) -> None:
        signature = content.get("previous_signature")
        if signature is None:
            self._unconfirmed.add(str(content["public_key"]))
            self.notes.append(
                f"entry {number} takes up the key {content['public_key']}, which the key before it did not"
                " confirm: compare it with one that was given out on another way"
            )
        elif not signatures.holds(present, signature, signed):
            raise Broken("the key before did not sign it", entry=number)

    def sentences(self) -> Iterator[str]:
        """Say of each key how it came in, and who signed that."""
        for place, (number, key) in enumerate(self._since):
            told = f"Entry {number} takes up the key {key}, which signed it"
            if place == 0:
                yield told
            elif key in self._unconfirmed:
                yield f"{told}; the key before it did not"
            else:
                yield f"{told}, as did the key before it"

    def at(self, size: int) -> str | None:
        """Return the key in force after so many entries; None where the history knows none."""
        earlier = [key for number, key in self._since if number <= size]
        return earlier[-1] if earlier else None

    def check_held(self, held: str) -> None:
        """Raise Broken unless the key that somebody holds is of this history, and all later ones follow."""
        keys = [key for _, key in self._since]
        if held not in keys:
            raise Broken("the history does not know the key that was given")
        later = keys[keys.index(held) + 1 :]
        strange = [key for key in later if key in self._unconfirmed]
        if strange:
            raise Broken(f"the key {strange[0]} does not follow by confirmation on the one that was given")
