"""Limits are met, not met, or not assessed, by the interface's rules (section 4)."""

from __future__ import annotations

import math
from dataclasses import fields, replace
from typing import Any

import pytest

from service.analysis.results import Interval, Quantity, Recomputation, WorstCase
from service.judgement.criteria import (
    HARD_FLOORS,
    SERVICE_FLOORS,
    Criteria,
    CriterionFinding,
    judge,
    past_hard_floors,
    service_floors,
)
from service.judgement.quantities import QUANTITIES
from tests.judgement.loops import LAG, ideal, recomputed, with_part

ALL = [field.name for field in fields(Criteria)]
OVER_THE_BOX = [name for name in ALL if name.startswith(("worst_case", "tolerated"))]
OF_A_MARGIN = {
    "gain_margin_min": "gain_margin",
    "phase_margin_deg_min": "phase_margin_deg",
    "delay_margin_s_min": "delay_margin_s",
    "gain_reduction_margin_max": "gain_reduction_margin",
    "max_sensitivity_max": "max_sensitivity",
}


def only(recomputation: Recomputation, criterion: str, limit: float) -> CriterionFinding:
    (found,) = judge(recomputation, Criteria(**{criterion: limit}))
    return found


def worst_case(**values: Any) -> WorstCase:
    told: dict[str, Any] = {
        "analysis": "continuous",
        "stable_for_all": True,
        "counterexample": None,
        "max_sensitivity": Interval(at_least=1.7, at_most=1.8),
        "gain_margin": 2.5,
        "phase_margin_deg": 40.0,
        "delay_margin_s": 3.0,
        "tolerated_error_scale": Interval(at_least=1.4, at_most=1.5),
    }
    return WorstCase(**{**told, **values})


@pytest.mark.parametrize("criterion", [name for name in ALL if name not in OVER_THE_BOX])
def test_every_criterion_limits_a_quantity(criterion: str) -> None:
    assert criterion.rsplit("_", 1)[0] in QUANTITIES


def test_limits_that_are_not_set_find_nothing() -> None:
    assert judge(recomputed(), Criteria()) == ()


def test_a_finding_has_limit_value_and_analysis() -> None:
    margins = recomputed().continuous.margins
    assert margins is not None
    assert only(recomputed(), "gain_margin_min", 2.0) == CriterionFinding(
        criterion="gain_margin_min",
        limit=2.0,
        value=margins.gain_margin,
        outcome="met",
        analysis="continuous",
    )


@pytest.mark.parametrize(("criterion", "field"), OF_A_MARGIN.items())
@pytest.mark.parametrize("value", [0.25, 1.5, 50.0])
def test_a_value_on_its_limit_meets_it_and_past_it_does_not(criterion: str, field: str, value: float) -> None:
    loop = with_part(recomputed(), "margins", **{field: value})
    past = math.nextafter(value, math.inf if criterion.endswith("_min") else -math.inf)
    assert only(loop, criterion, value).outcome == "met"
    assert only(loop, criterion, past).outcome == "not_met"


@pytest.mark.parametrize(
    ("criterion", "outcome"),
    [
        ("gain_margin_min", "met"),
        ("phase_margin_deg_min", "met"),
        ("delay_margin_s_min", "met"),
        ("gain_reduction_margin_max", "met"),
        ("max_sensitivity_max", "not_met"),
    ],
)
def test_unbounded_meets_every_minimum_and_the_reduction_margin_only(criterion: str, outcome: str) -> None:
    loop = with_part(recomputed(), "margins", **{OF_A_MARGIN[criterion]: "unbounded"})
    assert only(loop, criterion, 1.0).outcome == outcome


@pytest.mark.parametrize("criterion", list(OF_A_MARGIN))
def test_a_value_without_meaning_is_not_assessed(criterion: str) -> None:
    loop = with_part(recomputed(), "margins", **{OF_A_MARGIN[criterion]: None})
    assert only(loop, criterion, 1.0).outcome == "not_assessed"


@pytest.mark.parametrize("criterion", list(OF_A_MARGIN))
def test_an_unstable_loop_has_no_margins_to_assess(criterion: str) -> None:
    unstable = recomputed(LAG, ideal(action="direct"))
    assert (only(unstable, criterion, 1.0).value, only(unstable, criterion, 1.0).outcome) == (
        None,
        "not_assessed",
    )


def test_a_signed_quantity_is_limited_in_magnitude() -> None:
    loop = with_part(recomputed(), "load_step", peak_deviation=-0.4)
    assert only(loop, "peak_deviation_max", 0.3).outcome == "not_met"
    assert only(loop, "peak_deviation_max", 0.4).outcome == "met"


def test_where_the_sampled_loop_was_not_computed_nothing_is_assessed() -> None:
    loop = replace(recomputed(), judged_on="sampled", sampled=None)
    found = only(loop, "gain_margin_min", 1.1)
    assert (found.outcome, found.analysis) == ("not_assessed", "sampled")


def test_a_scanned_loop_is_judged_as_it_is_scanned() -> None:
    continuous = recomputed().continuous
    sampled = with_part(recomputed(), "margins", gain_margin=1.4).continuous
    loop = replace(recomputed(), judged_on="sampled", sampled=sampled, continuous=continuous)
    assert only(loop, "gain_margin_min", 2.0).value == 1.4


@pytest.mark.parametrize("criterion", OVER_THE_BOX)
def test_without_a_worst_case_nothing_over_the_box_is_assessed(criterion: str) -> None:
    assert only(recomputed(), criterion, 1.0).outcome == "not_assessed"


@pytest.mark.parametrize(
    ("limit", "value", "outcome"), [(1.9, 1.8, "met"), (1.75, 1.8, "not_assessed"), (1.6, 1.7, "not_met")]
)
def test_a_proven_bracket_meets_a_limit_only_where_all_of_it_does(
    limit: float, value: Quantity, outcome: str
) -> None:
    found = only(replace(recomputed(), worst_case=worst_case()), "worst_case_max_sensitivity_max", limit)
    assert (found.value, found.outcome) == (value, outcome)


@pytest.mark.parametrize(
    ("limit", "value", "outcome"), [(1.3, 1.4, "met"), (1.45, 1.4, "not_assessed"), (1.6, 1.5, "not_met")]
)
def test_a_bracket_meets_a_minimum_only_where_all_of_it_does(
    limit: float, value: Quantity, outcome: str
) -> None:
    found = only(replace(recomputed(), worst_case=worst_case()), "tolerated_error_scale_min", limit)
    assert (found.value, found.outcome) == (value, outcome)


@pytest.mark.parametrize("criterion", [name for name in OVER_THE_BOX if name.startswith("worst_case")])
def test_a_box_with_an_unstable_member_meets_no_limit(criterion: str) -> None:
    nothing = dict.fromkeys(("max_sensitivity", "gain_margin", "phase_margin_deg", "delay_margin_s"))
    loop = replace(recomputed(), worst_case=worst_case(stable_for_all=False, **nothing))
    assert only(loop, criterion, 1.0).outcome == "not_met"


def test_a_margin_over_the_box_counts_only_where_stability_is_proven() -> None:
    loop = replace(recomputed(), worst_case=worst_case(stable_for_all=None))
    assert only(loop, "worst_case_gain_margin_min", 1.1).outcome == "not_assessed"


@pytest.mark.parametrize(("limit", "outcome"), [(0.5, "met"), (1.0, "not_met")])
def test_how_much_error_is_tolerated_is_known_of_a_box_with_an_unstable_member_too(
    limit: float, outcome: str
) -> None:
    scale = Interval(at_least=0.7, at_most=0.71)
    loop = replace(recomputed(), worst_case=worst_case(stable_for_all=False, tolerated_error_scale=scale))
    assert only(loop, "tolerated_error_scale_min", limit).outcome == outcome


def test_a_tolerated_error_that_was_not_found_is_not_assessed() -> None:
    loop = replace(recomputed(), worst_case=worst_case(tolerated_error_scale=None))
    assert only(loop, "tolerated_error_scale_min", 1.0).outcome == "not_assessed"


def test_what_holds_over_the_box_names_the_analysis_that_showed_it() -> None:
    scanned = replace(recomputed(), judged_on="sampled", worst_case=worst_case(analysis="continuous"))
    assert only(scanned, "worst_case_gain_margin_min", 1.0).analysis == "continuous"


def test_the_services_own_floors_are_those_of_the_interface() -> None:
    # interface, section 5
    assert (
        Criteria(
            gain_margin_min=2.0,
            gain_reduction_margin_max=0.5,
            phase_margin_deg_min=30.0,
            max_sensitivity_max=2.0,
        )
        == SERVICE_FLOORS
    )
    assert Criteria(gain_margin_min=1.3, max_sensitivity_max=4.0) == HARD_FLOORS


@pytest.mark.parametrize(("scan_s", "floor_s"), [(None, 1.25), (0.5, 1.25), (2.0, 2.0)])
def test_the_floor_of_the_delay_margin_is_a_quarter_of_the_dead_time_and_the_scan(
    scan_s: float | None, floor_s: float
) -> None:
    assert service_floors(recomputed(), scan_s).delay_margin_s_min == floor_s


def test_the_floor_of_the_delay_margin_of_a_fast_loop_is_a_short_time() -> None:
    loop = recomputed(replace(LAG, dead_time_s=0.2))
    assert service_floors(loop, None).delay_margin_s_min == pytest.approx(0.05, rel=1e-12)


def test_without_dead_time_and_scan_the_delay_margin_has_no_floor() -> None:
    loop = recomputed(replace(LAG, dead_time_s=0.0))
    assert service_floors(loop, None) == SERVICE_FLOORS


def test_a_sound_loop_is_within_the_hard_floors() -> None:
    assert past_hard_floors(recomputed()) == ()


@pytest.mark.parametrize(("field", "value"), [("gain_margin", 1.29), ("max_sensitivity", 4.1)])
def test_a_loop_past_a_hard_floor_is_named(field: str, value: float) -> None:
    found = past_hard_floors(with_part(recomputed(), "margins", **{field: value}))
    assert [entry.criterion.rsplit("_", 1)[0] for entry in found] == [field]
