"""What an approval has to answer, read off the signed content."""

from __future__ import annotations

from dataclasses import replace

import pytest

from service.analysis.results import Verdict
from service.judgement.criteria import CriterionFinding, Outcome
from service.records import approvability
from service.records.content import SignedContent
from service.records.views import LoopView
from tests.records.store import Store


def _with_floor(content: SignedContent, outcome: Outcome) -> SignedContent:
    """The content with one hard floor of its only recomputation as told."""
    floor = CriterionFinding(
        criterion="disk_margin_min", limit=0.5, value=None, outcome=outcome, analysis="continuous"
    )
    recomputation = replace(content.recomputations[0], hard_floors=(floor,))
    return replace(content, recomputations=(recomputation,))


@pytest.mark.parametrize(
    ("outcome", "needed", "hindrances"),
    [("met", (), 0), ("not_assessed", ("disk_margin_min",), 0), ("not_met", (), 1)],
)
def test_a_hard_floor_not_assessed_is_answered_and_one_not_met_cannot_be(
    store: Store, loop: LoopView, outcome: Outcome, needed: tuple[str, ...], hindrances: int
) -> None:
    content = _with_floor(store.submit().content, outcome)
    assert approvability.deviations_needed(content) == needed
    assert len(approvability.hindrances(content)) == hindrances


def _at(content: SignedContent, *findings: CriterionFinding) -> SignedContent:
    first = content.recomputations[0]
    recomputations = tuple(
        replace(first, operating_point=f"point {index}", answer=replace(first.answer, findings=(finding,)))
        for index, finding in enumerate(findings)
    )
    return replace(content, recomputations=recomputations)


def _finding(criterion: str, value: object, outcome: Outcome, limit: float = 2.0) -> CriterionFinding:
    return CriterionFinding(
        criterion=criterion,
        limit=limit,
        value=value,  # type: ignore[arg-type]  # the values below are quantities
        outcome=outcome,
        analysis="continuous",
    )


@pytest.mark.parametrize(
    ("findings", "worst"),
    [
        # a minimum: the smallest is the worst, whatever its place
        ([("gain_margin_min", 3.0, "met"), ("gain_margin_min", 2.5, "met")], 1),
        ([("gain_margin_min", 2.5, "met"), ("gain_margin_min", 3.0, "met")], 0),
        ([("gain_margin_min", "unbounded", "met"), ("gain_margin_min", 9.0, "met")], 1),
        # a maximum: the largest
        ([("max_sensitivity_max", 1.2, "met"), ("max_sensitivity_max", 1.9, "met")], 1),
        ([("settling_time_s_max", "unbounded", "not_met"), ("settling_time_s_max", 99.0, "not_met")], 0),
        ([("gain_reduction_margin_max", "unbounded", "met"), ("gain_reduction_margin_max", 0.1, "met")], 1),
        # what came of it weighs more than the value
        ([("gain_margin_min", None, "not_assessed"), ("gain_margin_min", 9.0, "met")], 0),
        ([("gain_margin_min", None, "not_assessed"), ("gain_margin_min", 1.9, "not_met")], 1),
        # not met and without a value, as where a loop of the box is unstable
        ([("disk_margin_min", 0.3, "not_met"), ("disk_margin_min", None, "not_met")], 1),
        # of two that are the same, the first
        ([("gain_margin_min", 2.5, "met"), ("gain_margin_min", 2.5, "met")], 0),
    ],
)
def test_the_worst_operating_point_is_the_one_that_is_shown(
    store: Store, loop: LoopView, findings: list[tuple[str, object, Outcome]], worst: int
) -> None:
    content = _at(store.submit().content, *(_finding(*finding) for finding in findings))
    (shown,) = approvability.worst_criteria(content.recomputations)
    assert shown.operating_point == f"point {worst}"


def test_limits_that_differ_between_operating_points_are_held_each_against_its_own(
    store: Store, loop: LoopView
) -> None:
    findings = (
        _finding("delay_margin_s_min", 4.0, "met", limit=1.0),
        _finding("delay_margin_s_min", 9.0, "met", limit=8.0),
    )
    (shown,) = approvability.worst_criteria(_at(store.submit().content, *findings).recomputations)
    assert shown.operating_point == "point 1"


def test_a_share_of_a_small_limit_and_of_none_at_all(store: Store, loop: LoopView) -> None:
    content = store.submit().content
    for limits, values, worst in (((0.5, 1.0), (0.9, 1.0), 0), ((0.0, 0.0), (1.0, 2.0), 1)):
        findings = [
            _finding("overshoot_percent_max", value, "not_met", limit=limit)
            for limit, value in zip(limits, values, strict=True)
        ]
        (shown,) = approvability.worst_criteria(_at(content, *findings).recomputations)
        assert shown.operating_point == f"point {worst}"


@pytest.mark.parametrize(("safety_related", "people"), [(False, 1), (True, 2)])
def test_two_people_approve_what_is_safety_related(store: Store, safety_related: bool, people: int) -> None:
    store.add_model(store.register(safety_related=safety_related))
    assert approvability.approvals_needed(store.submit().content) == people


def test_the_worst_verdict_of_all_operating_points_counts(store: Store, loop: LoopView) -> None:
    first = store.submit().content.recomputations[0]
    verdicts: dict[tuple[Verdict, ...], Verdict | None] = {
        (): None,
        ("stable", "stable"): "stable",
        ("stable", "undecided"): "undecided",
        ("undecided", "unstable", "stable"): "unstable",
    }
    for given, worst in verdicts.items():
        points = tuple(replace(first, answer=replace(first.answer, verdict=each)) for each in given)
        assert approvability.worst_verdict(points) == worst
