"""The checkpoints that were kept with decisions: each is the history's own state right after its decision.

A decision's entry is followed by the entry that keeps its checkpoint. What stands in that entry is held here
against the entries before it; that the row in the table says the same is held against the entry elsewhere.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from service.verification import signatures
from service.verification.report import Broken


@dataclass(frozen=True, kw_only=True, slots=True)
class Decisions:
    """The table of what was decided, and the columns by which a checkpoint names its decision."""

    table: str
    key: str
    named_by: str


TABLES = {
    "checkpoints": Decisions(table="decisions", key="id", named_by="decision_id"),
    "change_checkpoints": Decisions(table="loop_change_decisions", key="change_id", named_by="change_id"),
}
"""Tables of checkpoints: on gains, and on changes of loops."""

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
        self._decided: frozenset[tuple[str, str]] = frozenset()
        """Table and key of what the entry before decides."""

    def add(self, entry: Mapping[str, Any], before: State | None, known_key: str | None) -> None:
        """Take in one entry.

        `before` is the history before it, needed only where the entry keeps a checkpoint; `known_key` the key
        that signs there, as the history tells.
        """
        if before is not None:
            for table, row in _of_tables(entry):
                self._check(table, row, before, known_key)
        decided = tuple(_decided(entry))
        self._decided = frozenset(decided)
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
            "Checkpoints kept with the decisions on gains and on changes of loops, which are "
            f"{self._decisions}. {told[:1].upper()}{told[1:]}"
        )

    def _check(self, table: str, row: Mapping[str, Any], before: State, known_key: str | None) -> None:
        fault = self._fault(table, row, before, known_key)
        if fault:
            named_by = TABLES[table].named_by
            name = f"{named_by} {row.get(named_by)}"
            raise Broken(fault, entry=before.size + 1, table=table, row=name)
        if row.get("signature") is None:
            self._unsigned += 1
        else:
            self._signed[row["public_key"]] += 1
            self.covered = before.size

    def _fault(self, table: str, row: Mapping[str, Any], before: State, known_key: str | None) -> str | None:
        decisions = TABLES[table]
        if (decisions.table, str(row.get(decisions.named_by))) not in self._decided:
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


def keeps_any(entry: Mapping[str, Any]) -> bool:
    """Say whether an entry keeps a checkpoint."""
    return not TABLES.keys().isdisjoint(entry["rows"])


def _of_tables(entry: Mapping[str, Any]) -> Iterator[tuple[str, Mapping[str, Any]]]:
    for table in TABLES:
        for row in entry["rows"].get(table, []):
            yield table, row


def _decided(entry: Mapping[str, Any]) -> Iterator[tuple[str, str]]:
    for decisions in TABLES.values():
        for row in entry["rows"].get(decisions.table, []):
            yield decisions.table, str(row.get(decisions.key))
