"""What is said of a loop whose model may be wrong: every box is really computed."""

from __future__ import annotations

from dataclasses import replace

import pytest

from service.analysis.controller import Scan
from service.analysis.plant import Uncertainty
from service.analysis.recomputation import recompute
from service.analysis.results import Recomputation, Verdict
from service.analysis.worst_case import NOTE_NOT_CONFIRMED, NOTE_NUMBERS, NOTE_TOO_MUCH_WORK
from service.judgement.criteria import Criteria, judge
from service.judgement.findings import Finding, find
from tests.analysis.entered import first_order, ideal

USUAL = Uncertainty(gain=(0.8, 1.25), time_constants=(0.8, 1.25), dead_time=(0.7, 1.4))
NEAR = Uncertainty(gain=(0.9, 1.1), time_constants=(0.9, 1.1), dead_time=(0.9, 1.1))
LONGER = Uncertainty(dead_time_extra_s=(0.0, 6.0))


def boxed(kc: float, box: Uncertainty = USUAL) -> Recomputation:
    return recompute(replace(first_order(2.0, 10.0, 3.0), uncertainty=box), ideal(kc, 10.0))


def found(recomputation: Recomputation) -> dict[str, Finding]:
    return {finding.finding: finding for finding in find(recomputation)}


def test_a_box_that_is_stable_throughout_adds_no_finding() -> None:
    with_box, without = boxed(0.6), recompute(first_order(2.0, 10.0, 3.0), ideal(0.6, 10.0))
    assert with_box.worst_case is not None
    assert with_box.worst_case.stable_for_all is True
    assert find(with_box) == find(without)


def test_a_member_that_is_unstable_stops_and_asks_for_a_deviation() -> None:
    recomputation = boxed(1.6)
    assert recomputation.verdict == "stable"
    finding = found(recomputation)["unstable_within_uncertainty"]
    assert (finding.weight, finding.needs_deviation) == ("stop", True)
    assert finding.sentence.endswith("with gain × 1.25, time constants × 0.800, dead time × 1.40.")


def test_extra_dead_time_is_told_in_seconds() -> None:
    sentence = found(boxed(1.6, LONGER))["unstable_within_uncertainty"].sentence
    assert sentence.endswith("dead time × 1.00, 6.00 s of dead time more.")


def test_an_unstable_loop_is_told_once() -> None:
    recomputation = boxed(9.0)
    assert recomputation.worst_case is not None
    assert recomputation.worst_case.stable_for_all is False
    assert "unstable" in found(recomputation)
    assert "unstable_within_uncertainty" not in found(recomputation)


@pytest.mark.parametrize(
    ("note", "words"),
    [
        (NOTE_TOO_MUCH_WORK, "more work than the service's bound allows"),
        (NOTE_NUMBERS, "numbers that cannot be computed with"),
        (NOTE_NOT_CONFIRMED, "on the very edge of stability"),
    ],
)
def test_an_undecided_box_asks_for_a_deviation_and_says_why(note: str, words: str) -> None:
    proven = boxed(0.6)
    assert proven.worst_case is not None
    undecided = replace(proven, worst_case=replace(proven.worst_case, stable_for_all=None, notes=(note,)))
    finding = found(undecided)["uncertainty_undecided"]
    assert (finding.weight, finding.needs_deviation) == ("caution", True)
    assert words in finding.sentence


def test_worst_margins_that_were_too_much_work_are_told() -> None:
    proven = boxed(0.6)
    assert proven.worst_case is not None
    partly = replace(proven.worst_case, gain_margin=None, notes=(NOTE_TOO_MUCH_WORK,))
    finding = found(replace(proven, worst_case=partly))["worst_margins_not_computed"]
    assert finding.weight == "caution"
    (criterion,) = judge(replace(proven, worst_case=partly), Criteria(worst_case_gain_margin_min=1.1))
    assert criterion.outcome == "not_assessed"


def test_a_scanned_loop_is_told_that_its_worst_case_leaves_the_scan_out() -> None:
    plant = replace(first_order(2.0, 10.0, 3.0), uncertainty=USUAL)
    scan = Scan(interval_s=1.0, method="backward_difference")
    scanned = recompute(plant, replace(ideal(0.6, 10.0), scan=scan))
    assert found(scanned)["worst_case_without_scan"].weight == "caution"
    assert "worst_case_without_scan" not in found(boxed(0.6))


@pytest.mark.parametrize(
    ("kc", "stable", "finding"),
    [
        (1.6, False, "unstable_within_uncertainty"),
        (0.6, None, "uncertainty_undecided"),
        (0.6, True, "worst_margins_not_computed"),
    ],
)
def test_what_is_said_of_the_box_of_a_scanned_loop_says_that_the_scan_is_left_out(
    kc: float, stable: bool | None, finding: str
) -> None:
    plant = replace(first_order(2.0, 10.0, 3.0), uncertainty=USUAL)
    scanned = recompute(plant, replace(ideal(kc, 10.0), scan=Scan(interval_s=0.1, method="trapezoidal")))
    for recomputation, words in ((scanned, True), (boxed(kc), False)):
        assert recomputation.worst_case is not None
        worst = replace(recomputation.worst_case, stable_for_all=stable, notes=(NOTE_TOO_MUCH_WORK,))
        sentence = found(replace(recomputation, worst_case=worst))[finding].sentence
        assert ("(as computed without the scan)" in sentence) is words


@pytest.mark.parametrize(("limit", "outcome"), [(2.2, "met"), (2.0, "not_met")])
def test_a_limit_on_the_worst_sensitivity_is_held_against_the_proven_bracket(
    limit: float, outcome: str
) -> None:
    recomputation = boxed(0.6)
    (criterion,) = judge(recomputation, Criteria(worst_case_max_sensitivity_max=limit))
    assert criterion.outcome == outcome
    assert recomputation.worst_case is not None
    bracket = recomputation.worst_case.max_sensitivity
    assert bracket is not None
    assert criterion.value == (bracket.at_most if outcome == "met" else bracket.at_least)


SLOW = Scan(interval_s=12.0, method="backward_difference")


def slowly_scanned(verdict: Verdict) -> Recomputation:
    """A loop whose box is proven without its scan, and which is unstable at it, or not decided there."""
    found = recompute(
        replace(first_order(2.0, 10.0, 3.0), uncertainty=NEAR), replace(ideal(1.0, 10.0), scan=SLOW)
    )
    assert found.worst_case is not None
    assert found.worst_case.stable_for_all is True
    assert found.sampled is not None
    assert found.sampled.stability.verdict == "unstable"
    if verdict == "unstable":
        return found
    stability = replace(found.sampled.stability, verdict=verdict)
    return replace(found, verdict=verdict, sampled=replace(found.sampled, stability=stability))


@pytest.mark.parametrize(
    ("verdict", "first"),
    [("unstable", "the loop is unstable"), ("undecided", "the loop was not shown to be stable")],
)
def test_a_box_that_is_stable_without_the_scan_never_speaks_for_a_loop_that_is_not_stable_at_it(
    verdict: Verdict, first: str
) -> None:
    told = found(slowly_scanned(verdict))["worst_case_without_scan"]
    assert told.weight == "stop"
    assert told.sentence.startswith(f"At its scan interval {first}, even with the model as entered.")
    assert told.sentence.endswith("It does not hold for this one.")


def test_figures_lacking_of_a_box_are_not_told_of_a_loop_that_is_unstable_at_its_scan() -> None:
    unstable = slowly_scanned("unstable")
    assert unstable.worst_case is not None
    worst = replace(unstable.worst_case, notes=(NOTE_TOO_MUCH_WORK,))
    sentences = [finding.sentence for finding in find(replace(unstable, worst_case=worst))]
    assert not [sentence for sentence in sentences if "is stable over the whole" in sentence]


@pytest.mark.parametrize(("verdict", "outcome"), [("unstable", "not_met"), ("undecided", "not_assessed")])
def test_no_limit_on_the_worst_case_is_met_by_a_loop_that_is_not_stable_at_its_scan(
    verdict: Verdict, outcome: str
) -> None:
    limits = Criteria(worst_case_gain_margin_min=1.1, worst_case_max_sensitivity_max=9.0)
    held = judge(slowly_scanned(verdict), limits)
    assert [(criterion.outcome, criterion.value) for criterion in held] == [(outcome, None)] * 2
    (scale,) = judge(slowly_scanned(verdict), Criteria(tolerated_error_scale_min=1.0))
    assert (scale.outcome, scale.value) == ("not_assessed", None)
