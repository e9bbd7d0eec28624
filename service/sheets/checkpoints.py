"""The checkpoints of the history that were made with a record's signatures, as they stand on its sheet.

That of each signature is told in words; that of the latest one, which covers them all, is a code besides. A
sheet shows no other: the history's present one would change the sheet though nothing of the record has.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from service.documents.canonical import canonical_bytes
from service.documents.writing import plain
from service.records.views import DecisionView

UNSIGNED = "UNSIGNED: the service had no signing key in force"


def about(decisions: Sequence[DecisionView]) -> Iterator[str]:
    """Tell the checkpoint of each signature whole, and what the latest one covers: no more than that."""
    if not decisions:
        yield "No checkpoint of the history: one is made with each signature, and nobody has signed this."
        return
    yield from (_told(decision) for decision in decisions)
    made = decisions[-1].checkpoint
    if made is not None:
        yield (
            f"It shows a later change to entries 1 to {made.size}, and none to what came after. "
            "The code is the same, for history verify --checkpoint."
        )
        if made.signature is None:
            yield "An unsigned checkpoint proves as much as the way on which you got this sheet."


def _told(decision: DecisionView) -> str:
    made = decision.checkpoint
    if made is None:
        return (
            f"No checkpoint of the history was kept with the signature of entry {decision.entry.number}: "
            "it is older than the version of this service that keeps them."
        )
    signed = f"signature {made.signature} by the key {made.public_key}" if made.signature else UNSIGNED
    # it is always: the checkpoint is made right after the signature's entry
    is_its_entry = made.head == decision.entry.digest
    return (
        f"Checkpoint made with the signature of entry {decision.entry.number}: size {made.size}, "
        f"time {plain(made.time)}, head {'the digest of that entry' if is_its_entry else made.head}, "
        f"root {made.digest}, origin {made.origin}; {signed}."
    )


def code(decisions: Sequence[DecisionView]) -> str:
    """Return the checkpoint of the latest signature as the verification reads it; empty: there is none."""
    made = decisions[-1].checkpoint if decisions else None
    return canonical_bytes(plain(made)).decode() if made else ""
