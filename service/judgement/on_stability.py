"""Findings on whether the loop is stable at all."""

from __future__ import annotations

from service.analysis.results import Stability
from service.judgement.finding import Case, Finding

_NUMBERS = {1: "one", 2: "two", 3: "three", 4: "four", 5: "five", 6: "six"}


def unstable(case: Case) -> Finding | None:
    """The loop does not come to rest."""
    found = next((a.stability for a in case.analyses if a.stability.verdict == "unstable"), None)
    if found is None:
        return None
    return Finding(
        finding="unstable",
        weight="stop",
        sentence=f"The loop is unstable: {_unstable_roots(found)}. In automatic PV and output swing up or "
        "run away. Do not enter these gains.",
    )


def _unstable_roots(stability: Stability) -> str:
    count = stability.unstable_roots
    if count is None:
        return "not all of its characteristic roots die out"
    if isinstance(count, str):
        return "infinitely many of its characteristic roots grow in place of dying out"
    number = _NUMBERS.get(count, str(count))
    return f"{number} of its characteristic roots {'grows' if count == 1 else 'grow'} in place of dying out"


def wrong_action(case: Case) -> Finding | None:
    """Unstable as entered and stable with the other action."""
    if case.facts.stable_with_other_action is not True:
        return None
    return Finding(
        finding="wrong_action",
        weight="stop",
        sentence="As entered the loop is unstable, with the other action it is stable: the action is very "
        "likely the wrong way round. Check on the controller whether its output falls or rises when PV "
        "rises, and in the model the sign of the gain.",
    )


def undecided(case: Case) -> Finding | None:
    """The verdict could not be reached by every route."""
    found = next((a.stability for a in case.analyses if a.stability.verdict == "undecided"), None)
    if found is None:
        return None
    reasons = [found.reason, *(route.reason for route in found.routes)]
    reason = next((text for text in reasons if text), "the methods gave no answer")
    return Finding(
        finding="undecided",
        weight="stop",
        sentence=f"It could not be decided whether the loop is stable: {reason}. Treat it as not stable.",
    )


def hidden_roots(case: Case) -> Finding | None:
    """Factors of the controller that the plant cancels: they do not show in PV and are there all the same."""
    hidden = case.facts.hidden_roots
    if not hidden:
        return None
    undamped = [root for root in hidden if (root[0] if isinstance(root, tuple) else root) >= 0]
    if undamped:
        return Finding(
            finding="hidden_roots_unstable",
            weight="stop",
            sentence="A term of the controller cancels one of the process that does not die out by itself. "
            "PV does not show it, but inside the loop it grows or stays: it counts as it is.",
        )
    return Finding(
        finding="hidden_roots_stable",
        weight="note",
        sentence="A term of the controller cancels one of the process. It dies out by itself, but no "
        "set-point test shows it; after a load change it does show.",
    )
