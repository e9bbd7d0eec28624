"""Proofs for whoever holds a checkpoint and not the history (RFC 9162, sections 2.1.3 and 2.1.4).

An inclusion proof shows that an entry is among the entries of a checkpoint; a consistency proof shows that a
later checkpoint has everything of an earlier one, unchanged and in its place.
"""

from __future__ import annotations

from dataclasses import dataclass

from sqlalchemy.orm import Session

from service.documents.errors import FieldProblem
from service.records import history, history_queries, merkle
from service.records.errors import FieldErrors
from service.records.roles import Actor


@dataclass(frozen=True, kw_only=True, slots=True)
class InclusionProof:
    """Hashes are lower-case hex; entry number n is leaf n − 1 of the tree."""

    number: int
    size: int
    """Entries of the tree."""
    leaf: str
    """The entry's digest."""
    root: str
    path: tuple[str, ...]
    """From the leaf upwards."""


@dataclass(frozen=True, kw_only=True, slots=True)
class ConsistencyProof:
    """Hashes are lower-case hex."""

    first: int
    """Entries of the earlier tree."""
    second: int
    """Entries of the later tree."""
    first_root: str
    second_root: str
    path: tuple[str, ...]


def inclusion(session: Session, actor: Actor, number: int, size: int | None) -> InclusionProof:
    """Prove that an entry is among the first `size` ones, all where None. Raises NotFound, FieldErrors."""
    entry = history_queries.entry(session, actor, number)
    there = history.head(session).size
    size = there if size is None else size
    if not number <= size <= there:
        raise FieldErrors((FieldProblem("/size", f"a size from {number} to {there} is wanted"),))
    leaves = history.leaves(session, size)
    return InclusionProof(
        number=number,
        size=size,
        leaf=entry.digest,
        root=merkle.root_of(leaves).hex(),
        path=_hexadecimal(merkle.inclusion_path(leaves, number - 1)),
    )


def consistency(session: Session, first: int, second: int | None) -> ConsistencyProof:
    """Prove that the first `first` entries begin the first `second` ones (None: all of them).

    Raises FieldErrors.
    """
    there = history.head(session).size
    second = there if second is None else second
    if second > there:
        raise FieldErrors((FieldProblem("/second", f"there are {there} entries"),))
    if first > second:
        raise FieldErrors((FieldProblem("/first", f"a size from 1 to {second} is wanted"),))
    leaves = history.leaves(session, second)
    return ConsistencyProof(
        first=first,
        second=second,
        first_root=merkle.root_of(leaves[:first]).hex(),
        second_root=merkle.root_of(leaves).hex(),
        path=_hexadecimal(merkle.consistency_path(leaves, first)),
    )


def _hexadecimal(hashes: list[bytes]) -> tuple[str, ...]:
    return tuple(each.hex() for each in hashes)
