"""Verifying an export of the history: one entry a line, without the store that it came from.

A line is a JSON object with `number`, `digest` and `canonical`, the text whose UTF-8 bytes the digest is made
of. An export holds the entries only: what they say of other tables' rows cannot be held against those rows.
"""

from __future__ import annotations

import json
from collections.abc import Iterable
from dataclasses import dataclass, field

from service.verification.report import Fault, Report
from service.verification.tree import Tree, leaf_hash
from service.verification.verifier import BEFORE_THE_FIRST, Checkpoint

NOTE = "an export has the entries alone; rows of other tables are verified in the store"


class _Broken(Exception):
    """The entry does not hold, and why."""


@dataclass
class _Chain:
    """How far the reading has come."""

    entries: int = 0
    head: str = BEFORE_THE_FIRST
    tree: Tree = field(default_factory=Tree)
    meets_checkpoint: bool | None = None


def verify_export(lines: Iterable[bytes], *, checkpoint: Checkpoint | None = None) -> Report:
    """Verify that each entry has its digest and follows on the one before, and the root of them all."""
    chain, fault = _Chain(), None
    try:
        for line in lines:
            _add(chain, line)
            if checkpoint is not None and chain.entries == checkpoint.size:
                chain.meets_checkpoint = chain.tree.root.hex() == checkpoint.root
    except _Broken as broken:
        fault = Fault(entry=chain.entries + 1, table=None, row=None, what=str(broken))
    return _report(chain, checkpoint, fault or _missed(chain, checkpoint))


def _add(chain: _Chain, line: bytes) -> None:
    canonical, digest = _parts(line)
    leaf = leaf_hash(canonical)
    if leaf.hex() != digest:
        raise _Broken("the text does not have the digest that stands beside it")
    number, previous = _place(canonical)
    if number != chain.entries + 1:
        raise _Broken(f"it is missing; entry {number} stands in its place")
    if previous != chain.head:
        raise _Broken("it does not follow on the entry before it: the chain is broken")
    chain.tree.add(leaf)
    chain.entries, chain.head = chain.entries + 1, digest


def _parts(line: bytes) -> tuple[bytes, str]:
    try:
        document = json.loads(line)
        return document["canonical"].encode(), str(document["digest"])
    except (ValueError, TypeError, KeyError, AttributeError):
        raise _Broken("the line is no entry of an export") from None


def _place(canonical: bytes) -> tuple[object, object]:
    try:
        entry = json.loads(canonical)
        return entry["number"], entry["previous"]
    except (ValueError, TypeError, KeyError):
        raise _Broken("the text is not an entry") from None


def _missed(chain: _Chain, checkpoint: Checkpoint | None) -> Fault | None:
    if checkpoint is None or chain.meets_checkpoint:
        return None
    what = (
        f"the checkpoint covers {checkpoint.size} entries, and there are only {chain.entries}"
        if chain.entries < checkpoint.size
        else f"the first {checkpoint.size} entries are not those that the checkpoint was made of"
    )
    return Fault(entry=None, table=None, row=None, what=what)


def _report(chain: _Chain, checkpoint: Checkpoint | None, fault: Fault | None) -> Report:
    return Report(
        fault=fault,
        entries=chain.entries,
        rows=0,
        head=chain.head if chain.entries else None,
        root=chain.tree.root.hex(),
        checkpoint_size=checkpoint.size if checkpoint else None,
        covered=("history_events",),
        not_covered=(),
        notes=(NOTE,),
    )
