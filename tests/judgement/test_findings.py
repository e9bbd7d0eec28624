"""Each finding is found where it holds, not where it does not, and says so in a plain sentence.

Loops are really recomputed. Where a part of the analysis is about something that the loop alone does not
bring (another library's opinion, a box of models), that part is put beside a real result.
"""

from __future__ import annotations

import re
from dataclasses import replace
from typing import Any

import pytest

from service.analysis import codes as analysis_codes
from service.analysis.controller import Controller, SetpointWeight
from service.analysis.plant import Integrating, PlantModel, SecondOrder, TransferFunction, Uncertainty
from service.analysis.results import BoxMember, Recomputation, Route, SecondOpinion, WorstCase
from service.judgement.claims import Claims, compare
from service.judgement.findings import FINDERS, Finding, find
from tests.judgement.loops import (
    INVERSE,
    LAG,
    TANK,
    UNSTABLE_LAG,
    WASHOUT,
    ideal,
    recomputed,
    with_part,
    zeros,
)

STATIC = TransferFunction(kind="transfer_function", numerator=(0.4,), denominator=(1.0,))
RESONANT = SecondOrder(
    kind="second_order", gain=1.0, natural_frequency_rad_s=1.0, damping_ratio=0.02, dead_time_s=4.7
)
LEAD = TransferFunction(
    kind="transfer_function", numerator=(0.5, 0.1), denominator=(1.0, 1.0), dead_time_s=2.0
)


def codes(recomputation: Recomputation) -> list[str]:
    return [finding.finding for finding in find(recomputation)]


def one(recomputation: Recomputation, code: str) -> Finding:
    (found,) = [finding for finding in find(recomputation) if finding.finding == code]
    return found


def loop(plant: PlantModel = LAG, controller: Controller | None = None) -> Recomputation:
    return recomputed(plant, ideal() if controller is None else controller)


def test_a_sound_loop_has_its_type_to_tell_and_nothing_else() -> None:
    assert codes(loop()) == ["loop_type"]


def test_an_unstable_loop_is_told_with_the_roots_that_grow() -> None:
    found = one(loop(controller=ideal(gain=12.0)), "unstable")
    assert found.weight == "stop"
    assert "two of its characteristic roots grow" in found.sentence


def test_infinitely_many_roots_that_grow_are_told() -> None:
    found = one(loop(replace(LAG, dead_time_s=1.0), ideal(derivative_s=40.0)), "unstable")
    assert "infinitely many" in found.sentence


def test_the_action_the_wrong_way_round_is_told() -> None:
    assert one(loop(controller=ideal(action="direct")), "wrong_action").weight == "stop"


def test_a_loop_unstable_with_either_action_is_not_blamed_on_the_action() -> None:
    assert "wrong_action" not in codes(loop(controller=ideal(gain=60.0)))


def test_a_stable_loop_with_negative_gain_and_direct_action_is_not_blamed_on_the_action() -> None:
    assert codes(loop(replace(LAG, gain=-1.2), ideal(action="direct"))) == ["loop_type"]


def test_a_loop_on_its_boundary_is_undecided_and_says_why() -> None:
    integrator = TransferFunction(kind="transfer_function", numerator=(1.0,), denominator=(1.0, 0.0))
    found = one(loop(integrator, ideal(gain=None, integral_s=1.0)), "undecided")
    assert found.weight == "stop"
    assert "on the axis" in found.sentence


def test_methods_that_disagree_are_told() -> None:
    one_way = Route(method="a", verdict="stable", unstable_roots=0)
    other_way = Route(method="b", verdict="unstable", unstable_roots=2)
    reason = "the two methods do not find the same number of unstable roots"
    told = {"verdict": "undecided", "routes": (one_way, other_way), "reason": reason}
    disagreeing = with_part(loop(), "stability", **told)
    assert reason in one(disagreeing, "undecided").sentence


def test_a_worst_case_that_was_not_computed_is_told() -> None:
    uncertain = replace(loop(), not_computed=("worst_case",))
    assert one(uncertain, "worst_case_not_computed").weight == "caution"


@pytest.mark.parametrize(
    ("stable_for_all", "code", "weight"),
    [(False, "unstable_within_uncertainty", "stop"), (None, "uncertainty_undecided", "caution")],
)
def test_a_box_that_is_not_shown_stable_is_told(stable_for_all: bool | None, code: str, weight: str) -> None:
    member = BoxMember(gain=1.25, time_constants=0.8, dead_time=1.4) if stable_for_all is False else None
    assert one(replace(loop(), worst_case=box(stable_for_all, member)), code).weight == weight


def test_the_model_that_is_unstable_is_named_by_its_factors() -> None:
    worst = box(False, BoxMember(gain=1.25, time_constants=0.8, dead_time=1.4))
    found = one(replace(loop(), worst_case=worst), "unstable_within_uncertainty")
    assert found.sentence.endswith("with gain × 1.25, time constants × 0.800, dead time × 1.40.")


def test_a_box_that_is_stable_throughout_adds_nothing() -> None:
    assert codes(replace(loop(), worst_case=box(True, None))) == ["loop_type"]


def box(stable_for_all: bool | None, member: BoxMember | None) -> WorstCase:
    return WorstCase(
        analysis="continuous",
        stable_for_all=stable_for_all,
        counterexample=member,
        max_sensitivity=None,
        gain_margin=None,
        phase_margin_deg=None,
        delay_margin_s=None,
        tolerated_error_scale=None,
    )


def test_a_cancelled_root_that_dies_out_is_told() -> None:
    plant = TransferFunction(kind="transfer_function", numerator=(1.0,), denominator=(4.0, 1.0))
    assert one(loop(plant, ideal(gain=1.0, integral_s=4.0)), "hidden_roots_stable").weight == "note"


def test_a_cancelled_root_that_grows_is_told_and_stops() -> None:
    found = loop(UNSTABLE_LAG, zeros(0.05))
    assert found.verdict != "stable"
    assert one(found, "hidden_roots_unstable").weight == "stop"


def test_a_derivative_without_filter_is_told() -> None:
    found = one(loop(controller=ideal(derivative_s=2.0)), "derivative_without_filter")
    assert found.weight == "caution"


def test_a_derivative_without_filter_that_is_scanned_is_told_for_what_it_does_there() -> None:
    scanned = replace(loop(controller=ideal(derivative_s=2.0)), judged_on="sampled")
    assert "at each scan" in one(scanned, "derivative_without_filter").sentence


def test_a_filtered_derivative_is_not_told() -> None:
    assert "derivative_without_filter" not in codes(loop(controller=ideal(derivative_s=2.0, filter_s=0.2)))


@pytest.mark.parametrize(
    ("settings", "code"),
    [
        ({"measurement_filter_s": "unknown"}, "measurement_filter_unknown"),
        ({"setpoint_weight": "unknown"}, "setpoint_weight_unknown"),
        ({"scan": "unknown"}, "scan_unknown"),
    ],
)
def test_a_setting_that_nobody_knows_needs_a_deviation(settings: dict[str, Any], code: str) -> None:
    assert one(loop(controller=ideal(**settings)), code).needs_deviation


def test_a_derivative_filter_that_nobody_knows_needs_a_deviation() -> None:
    controller = replace(ideal(derivative_s=2.0), derivative_filter="unknown")
    assert one(loop(controller=controller), "derivative_filter_unknown").needs_deviation


def test_no_other_finding_needs_a_deviation() -> None:
    assert not any(finding.needs_deviation for finding in find(loop(UNSTABLE_LAG, ideal(derivative_s=2.0))))


@pytest.mark.parametrize("integral_s", [3001.0, 0.049])
def test_an_integral_time_off_the_scale_of_the_model_is_told(integral_s: float) -> None:
    # the slowest time of the model is 30 s, its fastest the dead time of 5 s; the ratio is 100
    assert (
        one(loop(controller=ideal(integral_s=integral_s)), "integral_time_out_of_scale").weight == "caution"
    )


@pytest.mark.parametrize("integral_s", [2999.0, 0.051])
def test_an_integral_time_within_the_scale_of_the_model_is_not_told(integral_s: float) -> None:
    assert "integral_time_out_of_scale" not in codes(loop(controller=ideal(integral_s=integral_s)))


def test_a_derivative_time_off_the_scale_of_the_model_is_told() -> None:
    controller = ideal(derivative_s=4000.0, filter_s=400.0)
    assert one(loop(controller=controller), "derivative_time_out_of_scale").weight == "caution"


def test_a_short_derivative_time_is_not_told() -> None:
    assert "derivative_time_out_of_scale" not in codes(
        loop(controller=ideal(derivative_s=1e-3, filter_s=1e-4))
    )


def test_a_model_without_times_has_no_scale() -> None:
    assert "integral_time_out_of_scale" not in codes(loop(STATIC, ideal(integral_s=1e6)))


@pytest.mark.parametrize(("integral_s", "found"), [(600.0, False), (36_000.0, True)])
def test_the_slow_time_of_a_level_is_that_of_its_own_loop(integral_s: float, found: bool) -> None:
    # held at 0.0025·1/0.6 = 0.0042 rad/s, so at 240 s; the model's own times are 3 and 2 s
    buffer_tank = Integrating(kind="integrating", gain_per_s=0.0025, lag_s=3.0, dead_time_s=2.0)
    gains = ideal(gain=1 / 0.6, integral_s=integral_s)
    assert ("integral_time_out_of_scale" in codes(loop(buffer_tank, gains))) is found


def test_a_process_that_drifts_in_manual_is_told() -> None:
    assert "drifts" in one(loop(TANK, ideal(gain=5.0)), "does_not_hold_in_manual").sentence


def test_a_process_that_runs_away_in_manual_is_told() -> None:
    assert "runs away" in one(loop(UNSTABLE_LAG, ideal(gain=4.0)), "does_not_hold_in_manual").sentence


def test_an_inverse_response_is_told() -> None:
    assert one(loop(INVERSE, ideal(gain=0.5, integral_s=20.0)), "inverse_response").weight == "note"


def test_a_zero_of_the_controller_right_of_the_axis_is_told() -> None:
    assert "controller_zeros_right_of_axis" in codes(loop(controller=zeros(-0.05, 0.5)))


def test_the_offset_that_stays_without_integral_action_is_told_with_its_size() -> None:
    # P alone, loop gain 2·1.2: PV rests at 2.4/3.4 = 0.706 of the step, 29.4 % short of it
    found = one(loop(controller=ideal(integral_s=None)), "lasting_offset_setpoint")
    assert "29.4 % short" in found.sentence
    assert "0.706" in found.sentence
    assert "no integral action" in found.sentence


def test_the_offset_under_load_is_told_with_its_size() -> None:
    # a load of 1 % of output leaves 1.2/3.4 = 0.353 %
    assert "0.353 %" in one(loop(controller=ideal(integral_s=None)), "lasting_offset_load").sentence


def test_integral_action_leaves_no_offset() -> None:
    assert {"lasting_offset_setpoint", "lasting_offset_load"}.isdisjoint(codes(loop()))


def test_an_integrating_process_with_gain_alone_has_an_offset_under_load_only() -> None:
    found = codes(loop(TANK, ideal(gain=5.0, integral_s=None)))
    assert "lasting_offset_setpoint" not in found
    assert "lasting_offset_load" in found


def test_a_process_that_passes_no_lasting_signal_is_named_as_the_reason() -> None:
    found = one(loop(WASHOUT, ideal(gain=2.0, integral_s=None)), "lasting_offset_setpoint")
    assert "100 % short of it (at 0 of the step), because nothing lasting passes" in found.sentence


@pytest.mark.parametrize(
    ("plant", "controller", "number"),
    [(LAG, ideal(integral_s=None), 0), (LAG, ideal(), 1), (TANK, ideal(gain=5.0, integral_s=200.0), 2)],
)
def test_the_type_of_the_loop_is_told(plant: PlantModel, controller: Controller, number: int) -> None:
    assert one(loop(plant, controller), "loop_type").sentence.startswith(f"Loop of type {number}: ")


def test_of_a_loop_that_does_not_come_to_rest_no_rest_is_told() -> None:
    assert "loop_type" not in codes(loop(UNSTABLE_LAG, ideal(action="direct")))


def test_a_loop_that_less_gain_destabilises_is_told() -> None:
    found = loop(UNSTABLE_LAG, ideal(gain=1.6, integral_s=None))
    assert one(found, "gain_reduction_governs").weight == "caution"
    assert "0.625 times" in one(found, "gain_reduction_governs").sentence  # 1/1.6: static gain 1


def test_a_loop_nearer_to_too_much_gain_is_told_of_less_gain_as_a_note() -> None:
    found = loop(UNSTABLE_LAG, ideal(gain=20.0, integral_s=None))
    assert one(found, "gain_reduction_limited").weight == "note"


def test_a_loop_that_no_lesser_gain_destabilises_is_not_told_of_it() -> None:
    assert {"gain_reduction_governs", "gain_reduction_limited"}.isdisjoint(codes(loop()))


def test_several_gain_crossovers_are_told() -> None:
    resonant = loop(RESONANT, ideal(gain=None, integral_s=15.0))
    assert "passes 1 at 3 frequencies" in one(resonant, "several_gain_crossovers").sentence


def test_a_margin_from_infinite_frequency_is_told() -> None:
    assert "margins_from_infinite_frequency" in codes(loop(LEAD, ideal(gain=1.0, integral_s=None)))


def test_a_loop_that_does_not_fall_off_but_has_its_margins_before_is_not_told() -> None:
    static = replace(STATIC, dead_time_s=2.0)
    assert "margins_from_infinite_frequency" not in codes(loop(static, ideal(gain=1.0, integral_s=8.0)))


def test_a_loop_that_any_dead_time_destabilises_is_told() -> None:
    eager = replace(STATIC, numerator=(3.0,))
    found = one(loop(eager, ideal(gain=1.0, integral_s=8.0)), "margins_from_infinite_frequency")
    assert "Any further dead time" in found.sentence


def test_a_list_of_crossovers_that_was_cut_is_told() -> None:
    assert "crossovers_truncated" in codes(with_part(loop(), "margins", truncated=True))


def test_a_settling_time_that_hangs_by_a_hair_is_told() -> None:
    found = one(with_part(loop(), "setpoint_step", settling_time_sensitive=True), "settling_time_sensitive")
    assert found.weight == "note"


def test_the_dead_time_that_the_scan_of_the_model_takes_off_is_told() -> None:
    found = one(loop(replace(LAG, identified_at_scan_s=2.0)), "dead_time_shortened")
    assert "1.00 s" in found.sentence
    assert "leaves 4.00 s" in found.sentence


def test_a_dead_time_shorter_than_half_the_scan_of_the_model_is_told() -> None:
    short = replace(LAG, dead_time_s=0.5, identified_at_scan_s=3.0)
    assert "by 1.00 s" in one(loop(short), "dead_time_shorter_than_half_scan").sentence


def test_gains_that_cannot_be_told_in_every_form_are_told() -> None:
    # Ti < 4·Td: the zeros are complex, and there is no series form
    found = one(
        loop(controller=ideal(integral_s=40.0, derivative_s=15.0, filter_s=0.1)), "equivalents_lacking"
    )
    assert "series" in found.sentence


def test_the_impulse_of_an_unfiltered_derivative_of_the_set_point_is_told() -> None:
    controller = ideal(gain=0.5, derivative_s=2.0, setpoint_weight=SetpointWeight(derivative=1.0))
    assert one(loop(controller=controller), "setpoint_impulse").weight == "note"


def test_a_claim_that_differs_is_told_with_both_numbers() -> None:
    claims = compare(loop(), Claims(phase_margin_deg=10.0, gain_reduction_margin="unbounded"))
    (found,) = [finding for finding in find(loop(), claims) if finding.finding == "claim_differs"]
    assert "The tool says phase margin 10.0°; recomputed it is" in found.sentence


@pytest.mark.parametrize(
    ("outcome", "code"),
    [("differs", "second_opinion_differs"), ("not_available", "second_opinion_not_available")],
)
def test_another_librarys_opinion_is_told_where_it_does_not_agree(outcome: Any, code: str) -> None:
    note = "overshoot by 4 points"
    opinion = SecondOpinion(
        library="a library",
        version="1",
        approximation=None,
        values={},
        outcome=outcome,
        note=note,
    )
    found = one(replace(loop(), second_opinion=opinion), code)
    assert note in found.sentence


def test_the_heaviest_findings_come_first() -> None:
    found = find(loop(INVERSE, ideal(action="direct", derivative_s=2.0)))
    weights = [finding.weight for finding in found]
    assert weights == sorted(weights, key=["stop", "caution", "note"].index)
    assert set(weights) == {"stop", "caution", "note"}


def test_an_uncertain_model_is_told_of_once() -> None:
    uncertain = replace(LAG, uncertainty=Uncertainty(gain=(0.8, 1.25)))
    found = codes(loop(uncertain))
    assert len(found) == len(set(found))


LOOPS: list[tuple[PlantModel, Controller]] = [
    (LAG, ideal()),
    (LAG, ideal(action="direct")),
    (LAG, ideal(integral_s=None)),
    (LAG, ideal(integral_s=5000.0, derivative_s=5000.0, filter_s=1.0)),
    (TANK, ideal(gain=5.0, scan="unknown", measurement_filter_s="unknown")),
    (UNSTABLE_LAG, ideal(gain=1.6, integral_s=None)),
    (INVERSE, ideal(gain=0.5, integral_s=20.0)),
    (UNSTABLE_LAG, zeros(0.05)),
    (LEAD, ideal(gain=1.0, integral_s=None)),
    (replace(LAG, dead_time_s=0.5, identified_at_scan_s=3.0), ideal()),
]


@pytest.mark.parametrize(("plant", "controller"), LOOPS, ids=range(len(LOOPS)))
def test_every_finding_is_a_sentence_in_plain_words(plant: PlantModel, controller: Controller) -> None:
    for finding in find(loop(plant, controller)):
        assert re.fullmatch(r"[A-Z].*\.", finding.sentence), finding
        assert not re.search(r"None|nan|inf\b|_|\{|\}|  |\.\.", finding.sentence), finding


def test_every_note_of_the_recomputation_has_its_sentence() -> None:
    notes = tuple(value for name, value in vars(analysis_codes).items() if name.isupper())
    noted = replace(loop(), continuous=replace(loop().continuous, notes=notes))
    assert len(notes) >= 7
    assert set(notes) <= set(codes(noted))


def test_a_response_that_does_not_exist_is_told() -> None:
    controller = ideal(gain=0.1, derivative_s=1.0)
    assert "responses_not_realisable" in codes(loop(replace(LEAD, dead_time_s=0.0), controller))


def test_every_finder_is_named_once() -> None:
    assert len(FINDERS) == len(set(FINDERS))
