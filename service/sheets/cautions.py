"""What to mind at the panel. The sheet defers to site procedure, and says what the analysis cannot see."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from service.analysis.results import LoopFacts
from service.documents.loops import LoopReference


@dataclass(frozen=True, slots=True)
class Cautions:
    """Sentences under one heading."""

    heading: str
    sentences: tuple[str, ...]


BEFORE = (
    "Paper grows old: check in the service that the state of this record is still the one printed here.",
    "Check tag, form, units and action on the controller's own display against this sheet. "
    "If one differs, do not type: ask.",
    "Have the operator's agreement. Note output, mode and set point.",
    "Write down the gains as found: they are the way back.",
)
WHILE = (
    "Change one thing at a time. Read each number back before you confirm it.",
    "Set SP = PV before you return to automatic.",
)
AFTER = (
    "Watch PV and output for the first minutes. If they swing more and more or run away, "
    "go back to the gains as found.",
    "Save to the engineering database, or the next download brings the old gains back.",
    "Have as found and as left recorded.",
)
LIMITS = (
    "Not for safety instrumented functions.",
    "The analysis is linear: it does not see a sticking valve, limits, interaction with other loops "
    "or a failed sensor.",
    "Site procedure, local codes and licensed practice govern; this sheet does not replace them.",
)
HOLDS = (
    "Put the controller in manual while you type. By its model this process comes to rest by itself there; "
    "the operator still watches PV."
)
INTEGRATES = (
    "THIS PROCESS DOES NOT HOLD ITSELF IN MANUAL: it integrates, and PV drifts on. Type at a quiet time "
    "with PV far from its limits; the operator watches PV and corrects the output by hand; "
    "keep the time short."
)
UNSTABLE = (
    "THIS PROCESS DOES NOT HOLD ITSELF IN MANUAL: without control it is unstable and runs away. "
    "Do not put it in manual in order to type; how to change gains here is for site procedure to say."
)
DRIFTS = (
    "THIS PROCESS DOES NOT HOLD ITSELF IN MANUAL by its model. "
    "The operator watches PV and corrects the output by hand; keep the time short."
)
NOT_KNOWN = (
    "There is no model of this process: whether it holds itself in manual is not known. "
    "Take it as one that does not, and ask before you type."
)
CASCADE = "If this loop is part of a cascade, take the primary out of cascade first."


def cautions(facts: Sequence[LoopFacts], inner_loop: LoopReference | None) -> tuple[Cautions, ...]:
    """All cautions for a loop; of the facts, one for each model, the most careful decides how to hold it."""
    return (
        Cautions("Before you type", (*BEFORE, _cascade(inner_loop))),
        Cautions("While you type", (_holding(facts), *WHILE)),
        Cautions("Afterwards", AFTER),
        Cautions("What this sheet is not", LIMITS),
    )


def _holding(facts: Sequence[LoopFacts]) -> str:
    if not facts:
        return NOT_KNOWN
    if any(each.plant_unstable for each in facts):
        return UNSTABLE
    if any(each.plant_integrates for each in facts):
        return INTEGRATES
    return HOLDS if all(each.plant_holds_in_manual for each in facts) else DRIFTS


def _cascade(inner_loop: LoopReference | None) -> str:
    if inner_loop is None:
        return CASCADE
    return (
        f"This loop is the primary of a cascade, its secondary is {inner_loop.tag} ({inner_loop.site}). "
        f"Take it out of cascade first: the secondary holds a set point of its own."
    )
