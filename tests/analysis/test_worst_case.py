"""The worst case over a box against a dense search, closed forms, and what it must be whatever the box.

The dense search (`tests.references.worst_case`) shares no code with the service: what it finds is attained by
a member, so a bracket that does not hold it is wrong. `WORST_CASE_BOXES` sets how many boxes are tried.
"""

from __future__ import annotations

import math
import os
from dataclasses import replace
from typing import Any

import pytest

from service.analysis import box_cells, box_search, box_sectors
from service.analysis.box import member_of, uncertain_loop
from service.analysis.controller import Controller, Scan
from service.analysis.loop import form_loop
from service.analysis.plant import FirstOrder, FrequencyResponse, PlantModel, Range, Ranges, Uncertainty
from service.analysis.recomputation import recompute
from service.analysis.results import Interval, WorstCase
from service.analysis.worst_case import NOTE_TOO_MUCH_WORK
from service.judgement.findings import find
from tests.analysis.entered import factors, first_order, ideal, integrating, lags, ratio, resonant, two_zeros
from tests.analysis.uncertain import invented_box, uncertain
from tests.references.worst_case import Box

BOXES = int(os.environ.get("WORST_CASE_BOXES", "32"))

WIDE: dict[str, Any] = {
    "gain": (0.8, 1.25),
    "time_constants": (0.8, 1.25),
    "dead_time": (0.7, 1.4),
}

MARGINS = ("gain_margin", "phase_margin_deg", "delay_margin_s")

LAG = (first_order(2.0, 10.0, 3.0), ideal(0.6, 10.0))


def worst_case(plant: PlantModel, controller: Controller, **more: Any) -> WorstCase:
    worst = recompute(plant, controller, **more).worst_case
    assert worst is not None
    return worst


def number(quantity: Any) -> float:
    assert quantity is not None
    return math.inf if quantity == "unbounded" else float(quantity)


def ends(interval: Interval | None) -> tuple[float, float]:
    assert interval is not None
    return interval.at_least, number(interval.at_most)


@pytest.mark.parametrize("seed", range(BOXES))
def test_no_bracket_misses_what_a_dense_search_finds(seed: int) -> None:
    plant, controller = invented_box(seed)
    found = recompute(plant, controller)
    worst, box = found.worst_case, Box(plant, controller)
    assert worst is not None
    assert worst.stable_for_all is not None
    if worst.stable_for_all:
        assert not any(box.unstable_roots(member) for member in box.members(12, seed))
        assert_holds_the_dense_search(worst, box)
    else:
        assert_unstable(worst, box, plant)
    if found.continuous.stability.verdict == "stable":
        at_least, at_most = ends(worst.tolerated_error_scale)
        assert at_most >= 1.0 if worst.stable_for_all else at_least <= 1.0
        assert math.isinf(at_most) or at_most <= 1.01 * at_least


def assert_holds_the_dense_search(worst: WorstCase, box: Box) -> None:
    dense = box.worst()
    at_least, at_most = ends(worst.max_sensitivity)
    assert at_most <= 1.01 * at_least
    assert at_least * (1.0 - 1e-3) <= dense.max_sensitivity <= at_most * (1.0 + 1e-9)
    for name in MARGINS:
        told, met = number(getattr(worst, name)), getattr(dense, name)
        # never above what a member has, and no further below it than the dense search is above the worst
        assert told <= met * (1.0 + 1e-7), name
        assert math.isinf(met) == math.isinf(told), name
        assert math.isinf(told) or met <= told * (1.0 + 3e-3), name


def assert_unstable(worst: WorstCase, box: Box, plant: PlantModel) -> None:
    member = worst.counterexample
    assert member is not None
    dead_time_s = plant.dead_time_s * member.dead_time + member.dead_time_extra_s
    logs = (math.log(member.gain), math.log(member.time_constants))
    for log, (low, high) in zip((*logs, dead_time_s), box.ranges, strict=True):
        assert low - 1e-9 * abs(low) - 1e-12 <= log <= high + 1e-9 * abs(high) + 1e-12
    assert box.unstable_roots((*logs, dead_time_s))


@pytest.mark.parametrize("seed", range(16))
def test_a_box_without_width_is_the_loop_itself(seed: int) -> None:
    plant, controller = invented_box(seed)
    found = recompute(uncertain(plant), controller)
    margins, worst = found.continuous.margins, found.worst_case
    if margins is None:
        return
    assert worst is not None
    assert worst.stable_for_all is True
    at_least, at_most = ends(worst.max_sensitivity)
    assert at_least * (1.0 - 1e-9) <= number(margins.max_sensitivity) <= at_most
    for name in MARGINS:
        assert number(getattr(worst, name)) == pytest.approx(number(getattr(margins, name)), rel=1e-6), name
    assert worst.tolerated_error_scale == Interval(at_least=10.0, at_most="unbounded")


@pytest.mark.parametrize("seed", range(12))
def test_a_wider_box_is_never_better(seed: int) -> None:
    plant, controller = invented_box(seed)
    box = plant.uncertainty
    assert box is not None
    narrow = replace(
        plant,
        uncertainty=replace(
            box,
            gain=(box.gain[0] ** 0.5, box.gain[1] ** 0.5),
            time_constants=(box.time_constants[0] ** 0.5, box.time_constants[1] ** 0.5),
            dead_time=(box.dead_time[0] ** 0.5, box.dead_time[1] ** 0.5),
            dead_time_extra_s=(0.0, 0.5 * box.dead_time_extra_s[1]),
        ),
    )
    inner, outer = worst_case(narrow, controller), worst_case(plant, controller)
    if not outer.stable_for_all:
        return
    assert inner.stable_for_all
    assert ends(outer.max_sensitivity)[1] >= ends(inner.max_sensitivity)[0]
    for name in MARGINS:
        assert number(getattr(outer, name)) <= number(getattr(inner, name)) * (1.0 + 1e-6), name
    # the narrow box is the wide one at half its scale
    inner_low, inner_high = ends(inner.tolerated_error_scale)
    outer_low, outer_high = ends(outer.tolerated_error_scale)
    assert inner_low <= 2.0 * outer_high * (1.0 + 1e-9)
    assert math.isinf(inner_high) or inner_high * (1.0 + 1e-9) >= 2.0 * outer_low


def test_a_box_whose_corners_are_all_stable_and_its_inside_not_is_refuted() -> None:
    # a light resonance that the time constants move; the dead time turns its peak onto -1 half way only
    plant = uncertain(resonant(1.0, math.pi / 10.0, 0.02, 10.0), time_constants=(1.0 / 3.0, 1.0))
    controller = ideal(None, 25.0)
    box = Box(plant, controller)
    assert [box.unstable_roots((0.0, log_time, 10.0)) for log_time in box.ranges[1]] == [0, 0]
    worst = worst_case(plant, controller)
    assert worst.stable_for_all is False
    assert worst.counterexample is not None
    assert 0.4 < worst.counterexample.time_constants < 0.9
    assert_unstable(worst, box, plant)


def test_a_counterexample_entered_as_a_plant_of_its_own_is_unstable() -> None:
    plant = uncertain(first_order(2.0, 10.0, 3.0), **{**WIDE, "gain": (0.5, 2.0)}, extra_s=1.0)
    worst = worst_case(plant, ideal(1.6, 10.0))
    assert worst.stable_for_all is False
    assert worst.counterexample is not None
    assert recompute(member_of(plant, worst.counterexample), ideal(1.6, 10.0)).verdict == "unstable"


def test_an_unstable_loop_is_its_own_counterexample() -> None:
    worst = worst_case(uncertain(first_order(1.0, 1.0, 1.0), **WIDE), ideal(9.0))
    assert worst.stable_for_all is False
    member = worst.counterexample
    assert member is not None
    assert (member.gain, member.time_constants, member.dead_time) == (1.0, 1.0, 1.0)
    assert (worst.max_sensitivity, worst.gain_margin, worst.tolerated_error_scale) == (None, None, None)


def test_a_static_gain_that_may_pass_minus_one_is_refuted_at_the_origin() -> None:
    # L(0) = -0.9·k: the root passes through 0
    worst = worst_case(uncertain(first_order(-1.0, 10.0, 1.0), gain=(1.0, 1.25)), ideal(0.9))
    assert worst.stable_for_all is False
    at_least, at_most = ends(worst.tolerated_error_scale)
    assert at_least <= math.log(1.0 / 0.9) / math.log(1.25) <= at_most


def test_a_phase_that_reaches_180_degrees_at_every_frequency_at_once_is_met() -> None:
    # integrator and lag under PI without dead time: the lag may not be longer than the integral time
    plant = factors(1.25, [], [-1.25, 0.0])
    worst = worst_case(uncertain(plant, gain=(0.5, 1.4), time_constants=(0.5, 2.1)), ideal(0.15, 1.16))
    assert worst.stable_for_all is False
    at_least, at_most = ends(worst.tolerated_error_scale)
    assert at_least <= math.log(1.16 * 1.25) / math.log(2.1) <= at_most <= 1.01 * at_least


@pytest.mark.parametrize(
    ("plant", "controller"),
    [
        # the plant passes a step at once: any dead time at all makes the loop neutral with abs L(∞) > 1
        (lags(1.2, [1.0], [0.5]), ideal(2.3, 3.0)),
        # an unfiltered derivative on such a plant: abs L grows without bound
        (lags(1.0, [10.0], [1.0]), ideal(2.0, 10.0, 1.0)),
    ],
)
def test_dead_time_that_brings_roots_from_infinity_is_refuted(
    plant: PlantModel, controller: Controller
) -> None:
    worst = worst_case(uncertain(plant, extra_s=0.01), controller)
    assert worst.stable_for_all is False
    assert worst.counterexample is not None
    assert worst.counterexample.dead_time_extra_s == pytest.approx(0.01)
    assert worst.tolerated_error_scale == Interval(at_least=0.0, at_most=0.0)
    assert worst_case(uncertain(plant, **WIDE), controller).stable_for_all is True


def test_a_pole_that_a_zero_cancels_only_as_entered_counts_where_it_is_not_cancelled() -> None:
    # two zeros on a light resonance: nothing is left of it as entered, all of it as soon as it moves
    pair = ((-0.01, 1.0), (-0.01, -1.0))
    plant = factors(1.0, [], [*pair, -1.0], 0.1)
    controller = two_zeros(0.5, pair, tf=0.1)
    found = recompute(uncertain(plant, time_constants=(0.8, 1.25)), controller)
    assert found.verdict == "stable"
    assert found.worst_case is not None
    assert found.worst_case.stable_for_all is False
    assert_unstable(found.worst_case, Box(uncertain(plant, **WIDE), controller), plant)


def test_static_gain_and_integrating_gain_stay_when_the_time_constants_move() -> None:
    # fⁿ·P(f·s): an integrator does not change at all
    plant = uncertain(integrating(0.1, 0.0, 2.0), time_constants=(0.25, 4.0))
    still = uncertain(integrating(0.1, 0.0, 2.0))
    moved, whole = worst_case(plant, ideal(2.0)), worst_case(still, ideal(2.0))
    for name in MARGINS:
        assert number(getattr(moved, name)) == pytest.approx(number(getattr(whole, name)), rel=1e-6)


@pytest.mark.parametrize("scale", [1e-3, 3600.0])
def test_the_worst_case_does_not_depend_on_the_unit_of_time(scale: float) -> None:
    told = worst_case(uncertain(first_order(2.0, 10.0, 3.0), **WIDE, extra_s=0.2), ideal(0.6, 10.0))
    plant = uncertain(first_order(2.0, 10.0 * scale, 3.0 * scale), **WIDE, extra_s=0.2 * scale)
    other = worst_case(plant, ideal(0.6, 10.0 * scale))
    assert ends(other.max_sensitivity) == pytest.approx(ends(told.max_sensitivity), rel=1e-6)
    assert number(other.gain_margin) == pytest.approx(number(told.gain_margin), rel=1e-6)
    assert number(other.delay_margin_s) == pytest.approx(scale * number(told.delay_margin_s), rel=1e-6)
    assert ends(other.tolerated_error_scale) == pytest.approx(ends(told.tolerated_error_scale), rel=1e-6)


def test_what_is_known_of_the_identification_is_not_uncertain() -> None:
    # 1.5 s with half of a scan of 1 s taken off: the factor falls on 1.5 s
    plant = FirstOrder(
        kind="first_order", gain=2.0, time_constant_s=10.0, dead_time_s=1.5, identified_at_scan_s=1.0
    )
    worst = worst_case(uncertain(plant, dead_time=(0.5, 2.0)), ideal(0.6, 10.0))
    same = uncertain(first_order(2.0, 10.0, 1.0), extra_s=1.5)
    for name in MARGINS:
        assert number(getattr(worst, name)) == pytest.approx(
            number(getattr(worst_case(same, ideal(0.6, 10.0)), name)), rel=1e-6
        )


def test_engineering_units_change_nothing() -> None:
    ranges = Ranges(pv=Range(low=0.0, high=400.0), output=Range(low=0.0, high=50.0))
    plant, controller = LAG
    plant = uncertain(plant, **{**WIDE, "gain": (0.5, 3.0)})
    told = replace(plant, gain=plant.gain * 400.0 / 50.0, gain_basis="engineering_units")
    worst, other = worst_case(plant, controller), worst_case(told, controller, ranges=ranges)
    assert worst.stable_for_all is other.stable_for_all is False
    assert other.counterexample is not None
    assert worst.counterexample is not None
    assert other.counterexample.gain == pytest.approx(worst.counterexample.gain)


@pytest.mark.parametrize("bound", ["MAX_FACTORS", "MAX_CELLS"])
@pytest.mark.parametrize("seed", [0, 2, 4])
def test_past_the_bound_on_work_nothing_is_claimed(
    seed: int, bound: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    plant, controller = invented_box(seed)
    assert worst_case(plant, controller).stable_for_all is True
    monkeypatch.setattr(box_search, bound, 1)
    worst = worst_case(plant, controller)
    assert worst.stable_for_all is None
    assert worst.notes == (NOTE_TOO_MUCH_WORK,)
    assert (worst.max_sensitivity, worst.gain_margin, worst.phase_margin_deg) == (None, None, None)


@pytest.mark.parametrize("seed", [0, 4, 24])
def test_in_blocks_the_same_is_found(seed: int, monkeypatch: pytest.MonkeyPatch) -> None:
    plant, controller = invented_box(seed)
    whole = worst_case(plant, controller)
    monkeypatch.setattr(box_cells, "BLOCK", 7)
    monkeypatch.setattr(box_sectors, "BLOCK", 7)
    assert worst_case(plant, controller) == whole


def test_factors_beyond_float64_are_answered_without_a_claim() -> None:
    plant = uncertain(
        first_order(1.0, 1.0, 1.0),
        gain=(1e-300, 1e300),
        time_constants=(1e-300, 1e300),
        dead_time=(1.0, 1e300),
    )
    assert worst_case(plant, ideal(0.1, 10.0)).stable_for_all is not True


def test_what_is_too_much_work_beyond_the_box_leaves_the_proof_of_the_box() -> None:
    # to the power 10 the time factor spans a hundred decades
    worst = worst_case(uncertain(first_order(1.0, 1.0, 1.0), time_constants=(1e-12, 1.0)), ideal(0.1, 10.0))
    assert worst.stable_for_all is True
    assert worst.tolerated_error_scale == Interval(at_least=1.0, at_most="unbounded")
    assert worst.notes == (NOTE_TOO_MUCH_WORK,)


@pytest.mark.parametrize(
    "plant",
    [
        lags(1.0, [0.5 + 0.125 * k for k in range(20)], (), 1.0),
        resonant(1e-4, 1.0, 1e-4, 50.0),
        first_order(1.0, 1.0, 500.0),
        factors(0.08, [(-0.01, 1.4), (-0.01, -1.4)], [(-0.006, 1.0), (-0.006, -1.0), -0.3], 20.0),
    ],
    ids=["order 20", "a damping of 1e-4", "dead time of 500 lags", "two resonances under dead time"],
)
def test_hard_boxes_are_proven_within_the_bound(plant: PlantModel) -> None:
    worst = worst_case(uncertain(plant, **WIDE), ideal(0.02, 400.0))
    assert worst.stable_for_all is True
    assert worst.notes == ()
    at_least, at_most = ends(worst.max_sensitivity)
    assert at_most <= 1.01 * at_least


def test_measured_points_have_no_box() -> None:
    plant = FrequencyResponse(
        kind="frequency_response",
        frequencies_rad_s=(0.1, 1.0),
        response=((1.0, 0.0), (0.5, -0.5)),
        unstable_poles=0,
    )
    known, controller = LAG
    parts = form_loop(known, controller, None)
    assert uncertain_loop(parts, plant, Uncertainty(gain=(0.8, 1.25))) is None


def test_a_scanned_loop_is_told_that_its_worst_case_is_the_continuous_one() -> None:
    plant, controller = LAG
    scan = Scan(interval_s=1.0, method="backward_difference")
    found = recompute(uncertain(plant, **WIDE), replace(controller, scan=scan))
    assert found.worst_case is not None
    assert found.worst_case.analysis == "continuous"
    assert "worst_case_without_scan" in [finding.finding for finding in find(found)]


def test_a_cubic_with_an_uncertain_coefficient() -> None:
    # s³ + 7s² + 12s + a0, a0 from 8 to 60: the governing edge of the interval cubic of Dorf and Bishop, H02
    # of the check values (from memory); by Routh's criterion the limit is 7·12 = 84
    plant = ratio([20.0], [1.0, 7.0, 12.0, 0.0])
    worst = worst_case(uncertain(plant, gain=(0.4, 3.0)), ideal(1.0))
    assert worst.stable_for_all is True
    assert worst.gain_margin == pytest.approx(84.0 / 60.0, rel=1e-6)
    at_least, at_most = ends(worst.tolerated_error_scale)
    assert at_least <= math.log(84.0 / 20.0) / math.log(3.0) <= at_most
    beyond = worst_case(uncertain(plant, gain=(0.4, 4.21)), ideal(1.0))
    assert beyond.stable_for_all is False
    assert worst_case(uncertain(plant, gain=(0.4, 4.19)), ideal(1.0)).stable_for_all is True
