"""The worst case over a model's uncertainty in words: never more of a scanned loop than was computed."""

from __future__ import annotations

from collections.abc import Iterator

from service.analysis.results import Recomputation, WorstCase
from service.judgement import digits, wording
from service.judgement.quantities import leaves_scan_out, not_stable_at_scan
from service.sheets.controllers import Told

_THROUGHOUT = {True: "yes, proven", False: "NO", None: "not decided"}
_AT_SCAN = {
    "unstable": "NO, unstable at its scan",
    "undecided": "NOT SHOWN, undecided at its scan",
}


def without_scan(recomputation: Recomputation) -> str:
    """What stands behind a figure over the box of a loop whose scan it leaves out."""
    return ", without the scan" if leaves_scan_out(recomputation) else ""


def stable_throughout(recomputation: Recomputation, worst: WorstCase) -> str:
    """Whether the loop is stable for every model in the box; as it is scanned, where that takes it away."""
    at_scan = not_stable_at_scan(recomputation)
    if at_scan and worst.stable_for_all is not False:
        return _AT_SCAN[at_scan]
    return _THROUGHOUT[worst.stable_for_all] + without_scan(recomputation)


def figures(recomputation: Recomputation, worst: WorstCase) -> Iterator[Told]:
    """Everything that was computed over the box."""
    at_scan = not_stable_at_scan(recomputation)
    yield Told(
        name="Worst case computed for the analysis",
        value=f"{worst.analysis}; at its scan the loop is {at_scan}" if at_scan else worst.analysis,
    )
    behind = without_scan(recomputation)
    if worst.counterexample:
        yield Told(name="Not stable at", value=wording.box_member(worst.counterexample) + behind)
    for name in ("gain_margin", "phase_margin_deg", "delay_margin_s"):
        if getattr(worst, name) is not None:
            told = wording.told(name, getattr(worst, name))
            yield Told(name=f"Worst {wording.quantity_label(name)}", value=told + behind)
    for name, interval in (
        ("Worst maximum sensitivity", worst.max_sensitivity),
        ("Scale of model error that is tolerated", worst.tolerated_error_scale),
    ):
        if interval:
            ends = f"{digits.three_digits(interval.at_least)} to {digits.three_digits(interval.at_most)}"
            yield Told(name=name, value=ends + behind)
