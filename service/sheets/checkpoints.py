"""The checkpoint of the history that was made with a record's latest signature, as it stands on its sheet.

It covers the earlier signatures too, whose own checkpoints the record has in JSON. A sheet shows no other:
the history's present one would change the sheet though nothing of the record has.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from service.documents.canonical import canonical_bytes
from service.documents.writing import plain
from service.records.views import DecisionView

UNSIGNED = "UNSIGNED: the service had no signing key in force, so that it proves as much as its way to you"


def about(decisions: Sequence[DecisionView]) -> Iterator[str]:
    """Tell the checkpoint, and what it covers: no more than that; or why there is none."""
    if not decisions:
        yield "No checkpoint of the history: one is made with each signature, and nobody has signed this."
        return
    number, made = decisions[-1].entry.number, decisions[-1].checkpoint
    if made is None:
        yield (
            f"No checkpoint of the history was kept with the signature of entry {number}: "
            "it is older than the version of this service that keeps them."
        )
        return
    yield (
        f"Checkpoint of entries 1 to {made.size}, not of later ones: root {made.digest}, "
        f"origin {made.origin}, {f'signature {made.signature}' if made.signature else UNSIGNED}."
    )


def code(decisions: Sequence[DecisionView]) -> str:
    """Return the checkpoint whole, as a file for the verification; empty where there is none."""
    made = decisions[-1].checkpoint if decisions else None
    return canonical_bytes(plain(made)).decode() if made else ""
