"""The time axis ends where the settling can be seen, and a long tail does not squeeze the movement."""

from __future__ import annotations

from dataclasses import replace

import pytest

from service.analysis.results import ResponseCurve
from service.figures import window
from tests.figures.responses_to_draw import creeping, second_order


def test_the_settling_lies_inside_the_chart() -> None:
    # ζ = 0.4, ωn = 0.1 rad/s: the 2 % settling time is 84.1 s
    assert 84.1 < window.horizon_s(second_order(0.4, 0.1, 5000.0), None) <= 130.0


def test_almost_equal_gains_are_drawn_over_the_same_time() -> None:
    ends = {window.horizon_s(second_order(0.4 + 1e-4 * step, 0.1, 5000.0), None) for step in range(5)}
    assert len(ends) == 1


def test_the_length_of_what_was_stored_does_not_move_the_chart() -> None:
    assert window.horizon_s(second_order(0.4, 0.1, 800.0), None) == window.horizon_s(
        second_order(0.4, 0.1, 2000.0), None
    )


def test_a_long_tail_is_cut() -> None:
    end_s = window.horizon_s(creeping(20_000.0), None)
    assert end_s <= 120.0  # the rise takes 3 s, the last 2 % almost an hour


def test_a_slow_earlier_response_takes_at_most_three_times_the_span() -> None:
    quick, slow = second_order(0.7, 1.0, 100.0), second_order(0.7, 0.01, 10_000.0)
    alone, beside = window.horizon_s(quick, None), window.horizon_s(quick, slow)
    assert alone < beside <= 4.0 * alone


def test_the_axis_never_runs_past_what_was_stored() -> None:
    assert window.horizon_s(second_order(0.4, 0.1, 50.0), None) <= 50.0


@pytest.mark.parametrize("level", [0.0, 1.0])
def test_a_response_that_never_moves_is_drawn_whole(level: float) -> None:
    still = ResponseCurve(time_s=(0.0, 10.0), pv=(level, level), output=(0.0, 0.0))
    assert window.horizon_s(still, None) == 10.0


def test_a_tall_first_peak_of_the_output_is_cut_and_said_to_be() -> None:
    calm = second_order(0.4, 0.1, 400.0)
    spiked = replace(calm, output=(200.0, *calm.output[1:]))
    values, cut = window.output_values(spiked, 400.0)
    assert cut
    assert max(values) < 10.0
    assert window.output_values(calm, 400.0)[1] is False
