"""Findings on how wrong the model may be: whether the loop stays stable over the whole stated uncertainty."""

from __future__ import annotations

from service.analysis.results import WorstCase
from service.analysis.worst_case import NOTE_NOT_CONFIRMED, NOTE_NUMBERS, NOTE_TOO_MUCH_WORK
from service.judgement.finding import Case, Finding
from service.judgement.quantities import leaves_scan_out, not_stable_at_scan
from service.judgement.wording import box_member

_REASONS = {
    NOTE_TOO_MUCH_WORK: "that takes more work than the service's bound allows; narrower factors may help",
    NOTE_NUMBERS: "the factors lead to numbers that cannot be computed with",
    NOTE_NOT_CONFIRMED: "some model in it lies on the very edge of stability",
}
"""Codes of `WorstCase.notes` → why the box is undecided."""

_COMPUTED = (
    "The worst case over the model's uncertainty was computed for a controller that acts all the time."
)
_AT_SCAN = {
    "unstable": "At its scan interval the loop is unstable, even with the model as entered.",
    "undecided": "At its scan interval the loop was not shown to be stable, even with the model as entered.",
}


def worst_case_not_computed(case: Case) -> Finding | None:
    """Uncertainty was given for a kind of plant that has no box of models."""
    if "worst_case" not in case.recomputation.not_computed:
        return None
    return Finding(
        finding="worst_case_not_computed",
        weight="caution",
        sentence="How wrong the model may be was given, but the worst case was not computed. The figures "
        "here hold for the model exactly as entered.",
        needs_deviation=True,
    )


def unstable_in_the_box(case: Case) -> Finding | None:
    """A model within the stated uncertainty makes the loop unstable, and the one as entered does not."""
    worst = _of_stable(case)
    if worst is None or worst.stable_for_all is not False:
        return None
    found = f": with {box_member(worst.counterexample)}" if worst.counterexample else ""
    found += _without_scan(case)
    return Finding(
        finding="unstable_within_uncertainty",
        weight="stop",
        sentence=f"Within the stated uncertainty of the model the loop can be unstable{found}.",
        needs_deviation=True,
    )


def box_undecided(case: Case) -> Finding | None:
    """It is not proven either way that the loop is stable for every model in the box."""
    worst = _of_stable(case)
    if worst is None or worst.stable_for_all is not None:
        return None
    reason = next((f": {_REASONS[note]}" for note in worst.notes if note in _REASONS), "")
    return Finding(
        finding="uncertainty_undecided",
        weight="caution",
        sentence="It could not be decided whether the loop stays stable over the whole stated uncertainty of "
        f"the model{_without_scan(case)}{reason}. Treat it as not shown.",
        needs_deviation=True,
    )


def worst_margins_lacking(case: Case) -> Finding | None:
    """The box is proven stable, but not every figure of it was found within the bound on work."""
    worst = _of_stable(case)
    if worst is None or not worst.stable_for_all or NOTE_TOO_MUCH_WORK not in worst.notes:
        return None
    if not_stable_at_scan(case.recomputation):
        return None
    return Finding(
        finding="worst_margins_not_computed",
        weight="caution",
        sentence="The loop is stable over the whole stated uncertainty of the model"
        f"{_without_scan(case)}, but not every figure of the worst model was computed in full: that takes "
        "more work than the service's bound allows.",
    )


def worst_case_without_scan(case: Case) -> Finding | None:
    """The loop is scanned, and the worst case is that of a controller that acts all the time."""
    worst = _of_stable(case)
    if worst is None or not leaves_scan_out(case.recomputation):
        return None
    at_scan = not_stable_at_scan(case.recomputation)
    if at_scan:
        return Finding(
            finding="worst_case_without_scan",
            weight="stop",
            sentence=f"{_AT_SCAN[at_scan]} {_COMPUTED} It does not hold for this one.",
        )
    return Finding(
        finding="worst_case_without_scan",
        weight="caution",
        sentence=f"{_COMPUTED} The scan mostly takes some of that margin away.",
    )


def _without_scan(case: Case) -> str:
    return " (as computed without the scan)" if leaves_scan_out(case.recomputation) else ""


def _of_stable(case: Case) -> WorstCase | None:
    """The worst case of a loop that is stable as entered; of any other nothing more is to be said."""
    if case.recomputation.continuous.stability.verdict != "stable":
        return None
    return case.recomputation.worst_case
