"""What came of a recomputation in one line: verdict, uncertainty and limits. Never more than was computed."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

from service.documents.recomputations import RecomputationAnswer
from service.judgement.quantities import leaves_scan_out
from service.records.content import VerdictAsLeft, WorstCriterion


@dataclass(frozen=True, kw_only=True, slots=True)
class Summary:
    """The one line, and whether all is well."""

    good: bool
    sentence: str


def summary(
    verdict: VerdictAsLeft | None, answers: Sequence[RecomputationAnswer], criteria: Sequence[WorstCriterion]
) -> Summary:
    """Sum up answers, whose worst verdict is `verdict`, and what came of each limit at its worst point."""
    if not answers or verdict is None:
        return Summary(good=False, sentence=NOTHING_RECOMPUTED)
    uncertainty = _uncertainty(answers)
    told = {
        "unstable": "The recomputed loop is UNSTABLE.",
        "undecided": NOT_SHOWN,
        "not_assessed": "NOT ALL of the loop was recomputed.",
        "stable": f"The recomputed loop is stable{uncertainty.words}.",
    }[verdict]
    outcomes = [worst.finding.outcome for worst in criteria]
    counts = ((outcomes.count("not_met"), "NOT MET"), (outcomes.count("not_assessed"), "NOT ASSESSED"))
    failed = [f"{count} {words}" for count, words in counts if count]
    if failed:
        told += f" Limits: {' and '.join(failed)}, of {len(outcomes)}."
    else:
        told += f" Limits: all {len(outcomes)} met." if outcomes else " It was held against NO LIMIT."
    good = verdict == "stable" and uncertainty.well and bool(outcomes) and not failed
    return Summary(good=good, sentence=told)


NOT_SHOWN = "It could NOT BE SHOWN that the loop is stable."
NOTHING_RECOMPUTED = "Nothing was recomputed: there is no model of this process on record."


def recomputation_title(operating_point: str, condition: str | None) -> str:
    """What was recomputed; `condition` None where there is one set of gains."""
    set_of = f", gains for: {condition}" if condition is not None else ""
    return f"Operating point: {operating_point}{set_of}"


class _Uncertainty(NamedTuple):
    """Whether what is known of the models' uncertainty speaks for the loop, and the words behind "stable"."""

    well: bool
    words: str


def _uncertainty(answers: Sequence[RecomputationAnswer]) -> _Uncertainty:
    told = [each.recomputation for each in answers]
    boxes = [each.worst_case.stable_for_all for each in told if each.worst_case is not None]
    scan = " (computed without the scan)" if any(leaves_scan_out(each) for each in told) else ""
    if False in boxes:
        words = f" as modelled, but NOT for every model within the stated uncertainty{scan}"
        return _Uncertainty(False, words)
    if None in boxes or any("worst_case" in each.not_computed for each in told):
        return _Uncertainty(False, " as modelled; for its stated uncertainty that is NOT SHOWN")
    # where one operating point states none, nothing is said of all of them
    proven = len(boxes) == len(told) > 0
    return _Uncertainty(
        True, f", and so is every model within the stated uncertainty{scan}" if proven else ""
    )
