"""The chain of entries, held together one by one: digest, number, the entry before, time, keys, checkpoint.

The same for a store and for an export; where entries come from is no matter here.
"""

from __future__ import annotations

import json
from typing import Any

from service.verification import kept
from service.verification.checkpoints import Checkpoint
from service.verification.kept import KeptCheckpoints, State
from service.verification.keys import Keys
from service.verification.report import Broken
from service.verification.tree import Tree, leaf_hash

BEFORE_THE_FIRST = "0" * 64


class Chain:
    """How far the reading has come. Every method raises Broken at the first place that does not hold."""

    def __init__(self, checkpoint: Checkpoint | None, held_key: str | None) -> None:
        self.entries = 0
        self.head = BEFORE_THE_FIRST
        self.time = ""
        self.tree = Tree()
        self.keys = Keys()
        self.kept = KeptCheckpoints()
        self._origin = ""
        self._checkpoint = checkpoint
        self._held_key = held_key
        self._is_whole = False
        self._notes: list[str] = []

    @property
    def notes(self) -> tuple[str, ...]:
        """What is no fault and worth knowing."""
        return (*self._notes, *self.keys.notes, *self.kept.notes)

    def add(self, raw: bytes, digest: object) -> dict[str, Any]:
        """Hold one entry against its own bytes and the entry before; return what the bytes say."""
        number = self.entries + 1
        leaf = leaf_hash(raw)
        hexadecimal = leaf.hex()
        if hexadecimal != digest:
            raise Broken("the bytes do not have the digest that stands beside them", entry=number)
        entry = _parsed(raw, number)
        if entry.get("number") != number:
            raise Broken(f"it is missing; entry {entry.get('number')} stands in its place", entry=number)
        if entry.get("previous") != self.head:
            raise Broken("it does not follow on the entry before it: the chain is broken", entry=number)
        before = self._state() if kept.keeps_any(entry) else None
        self.kept.add(entry, before, self.keys.at(self.entries))
        self._note_time(number, str(entry.get("time")))
        self._origin = self._origin or hexadecimal
        if str(entry.get("kind")).startswith("signing_key"):
            self.keys.add(entry, number=number, origin=self._origin, root=self.tree.root.hex())
        self.tree.add(leaf)
        self.entries, self.head = number, hexadecimal
        if self._checkpoint is not None and self._checkpoint.size == number:
            self._meet(self._checkpoint)
        return entry

    def end(self) -> None:
        """Check what can be said only at the end."""
        if self._checkpoint is not None:
            self._check_against(self._checkpoint)
        if self._held_key is not None:
            self.keys.check_held(self._held_key)
        self._is_whole = True

    @property
    def signatures(self) -> tuple[str, ...]:
        """Sentences: which signatures were checked, by which keys, what none covers; empty after a fault."""
        if not self._is_whole:
            return ()
        given = (self._of_checkpoint(self._checkpoint),) if self._checkpoint is not None else ()
        return (*self.keys.sentences(), self.kept.sentence(), *given, self._of_held_key(), self._cover())

    def _of_checkpoint(self, given: Checkpoint) -> str:
        if not given.is_signed:
            return "The checkpoint that was given has no signature"
        return f"The signature of the checkpoint that was given holds, by the key {given.public_key}"

    def _of_held_key(self) -> str:
        if self._held_key is not None:
            return f"The key that was given, {self._held_key}, is the history's; all later ones follow on it"
        if self.keys.at(self.entries) is None:
            return "The history knows no key"
        return "No key was given: that the history's keys are the service's own was not checked"

    def _cover(self) -> str:
        given = self._checkpoint
        signed = max(self.kept.covered, given.size if given is not None and given.is_signed else 0)
        if signed == 0:
            return "No signed checkpoint covers any entry"
        return f"The last signed checkpoint covers entries 1 to {signed} of {self.entries}"

    def _state(self) -> State:
        return State(
            origin=self._origin,
            size=self.entries,
            digest=self.tree.root.hex(),
            head=self.head,
            time=self.time,
        )

    def _note_time(self, number: int, time: str) -> None:
        if time < self.time:
            self._notes.append(
                f"entry {number} has an earlier time than the one before it: the clock was set back"
            )
        self.time = time

    def _meet(self, checkpoint: Checkpoint) -> None:
        if self.tree.root.hex() != checkpoint.root or checkpoint.head not in (None, self.head):
            raise Broken(
                f"the first {checkpoint.size} entries are not those that the checkpoint was made of: the"
                " history was rewritten somewhere in them"
            )

    def _check_against(self, checkpoint: Checkpoint) -> None:
        checkpoint.check_signature()
        if checkpoint.size > self.entries:
            raise Broken(
                f"the checkpoint covers {checkpoint.size} entries, and there are only {self.entries}"
            )
        if checkpoint.origin not in (None, self._origin):
            raise Broken("the checkpoint was made of another store's history")
        if not checkpoint.is_signed:
            self._notes.append("the checkpoint is unsigned: it proves as much as the way on which you got it")
            return
        known = self.keys.at(checkpoint.size)
        if known is None:
            self._notes.append(
                "the history knows no signing key: compare the checkpoint's key with one that you hold"
            )
        elif known != checkpoint.public_key:
            raise Broken("the checkpoint is signed with another key than the history tells of at that place")


def _parsed(raw: bytes, number: int) -> dict[str, Any]:
    try:
        entry = json.loads(raw)
    except ValueError:
        entry = None
    if not isinstance(entry, dict) or not isinstance(entry.get("rows"), dict):
        raise Broken("the bytes are not an entry", entry=number)
    for table, rows in entry["rows"].items():
        if not isinstance(rows, list) or not all(isinstance(row, dict) for row in rows):
            raise Broken("what the entry recorded are no rows", entry=number, table=table)
    return entry
