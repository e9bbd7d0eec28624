"""Gains that were left in a controller otherwise than approved, as the pages of a loop show them."""

from __future__ import annotations

from dataclasses import dataclass

from service.pages.visits import Visit
from service.records import left_otherwise
from service.records.content import InstallationContent
from service.sheets.as_left import ToldAsLeft, told_as_left


@dataclass(frozen=True, slots=True)
class LeftOtherwise:
    """The installation by which they were left, and what the loop was computed to do with them."""

    done: InstallationContent
    told: ToldAsLeft


def of_loop(visit: Visit, loop_id: str) -> LeftOtherwise | None:
    """Read those that nothing on record has put right since; None where there are none. Raises NotFound."""
    found = left_otherwise.of_loop(visit.session, visit.actor, loop_id)
    if found is None:
        return None
    return LeftOtherwise(found.installation, told_as_left(found.installation.as_left_recomputed))
