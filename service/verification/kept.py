"""The checkpoints that were kept with decisions: each is the history's own state right after its decision.

A decision's entry is followed by the entry that keeps its checkpoint. What stands in that entry is held here
against the entries before it; that the row in the table says the same is held against the entry elsewhere.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from service.verification import signatures
from service.verification.report import Broken

TABLE = "checkpoints"
DECISIONS = "decisions"
SIGNED = ("origin", "size", "digest", "head", "time", "public_key")


@dataclass(frozen=True, kw_only=True, slots=True)
class State:
    """The history before an entry, as the entries themselves make it."""

    origin: str
    size: int
    digest: str
    head: str
    time: str


class KeptCheckpoints:
    """The checkpoints of a history as far as it has been read. Every method raises Broken with the place."""

    def __init__(self) -> None:
        self.covered = 0
        """How many entries the last signed one covers."""
        self._signed: Counter[str] = Counter()
        self._unsigned = 0
        self._decisions = 0
        self._decisions_with_a_key = 0
        self._decided: frozenset[str] = frozenset()

    def add(self, entry: Mapping[str, Any], before: State | None, known_key: str | None) -> None:
        """Take in one entry.

        `before` is the history before it, needed only where the entry keeps a checkpoint; `known_key` the key
        that signs there, as the history tells.
        """
        if before is not None:
            for row in entry["rows"].get(TABLE, []):
                self._check(row, before, known_key)
        decided = entry["rows"].get(DECISIONS, [])
        self._decided = frozenset(str(row.get("id")) for row in decided)
        self._decisions += len(decided)
        self._decisions_with_a_key += len(decided) if known_key is not None else 0

    @property
    def notes(self) -> tuple[str, ...]:
        """Say where signatures are missing that a key could have made."""
        missing = self._decisions_with_a_key - self._signed.total()
        if not missing:
            return ()
        return (
            f"{missing} of the decisions made while the history had a key have no signed checkpoint: an "
            "older version of the service kept none, a process with another key signs none, and neither can "
            "whoever rewrites the history without the key",
        )

    def sentence(self) -> str:
        """Say what was found, in words."""
        if not self._decisions:
            return "There is no decision, and so no checkpoint that was kept with one"
        counts = [
            *((f"signed by the key {key}, verified", count) for key, count in self._signed.items()),
            ("without a signature", self._unsigned),
            ("none kept", self._decisions - self._unsigned - self._signed.total()),
        ]
        told = "; ".join(f"{words}: {count}" for words, count in counts if count)
        return (
            f"Checkpoints kept with the decisions, which are {self._decisions}. {told[:1].upper()}{told[1:]}"
        )

    def _check(self, row: Mapping[str, Any], before: State, known_key: str | None) -> None:
        fault = self._fault(row, before, known_key)
        if fault:
            name = f"decision_id {row.get('decision_id')}"
            raise Broken(fault, entry=before.size + 1, table=TABLE, row=name)
        if row.get("signature") is None:
            self._unsigned += 1
        else:
            self._signed[row["public_key"]] += 1
            self.covered = before.size

    def _fault(self, row: Mapping[str, Any], before: State, known_key: str | None) -> str | None:
        if str(row.get("decision_id")) not in self._decided:
            return "the checkpoint was not made with the decision of the entry before it"
        for name in State.__slots__:
            if row.get(name) != getattr(before, name):
                return f"the checkpoint's {name} is not that of the history at its place"
        key, signature = row.get("public_key"), row.get("signature")
        if signature is None:
            return None if key is None else "the checkpoint names a key that did not sign it"
        if not signatures.holds(key, signature, {name: row.get(name) for name in SIGNED}):
            return "the checkpoint's signature is not one that its key made of it"
        if key != known_key:
            return "the checkpoint is signed with another key than the history tells of at that place"
        return None
