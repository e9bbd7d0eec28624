"""Where ticks stand and what they say."""

from __future__ import annotations

import itertools

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.figures import ticks


@pytest.mark.parametrize(
    ("span_s", "unit"),
    [(0.004, "s"), (180.0, "s"), (181.0, "min"), (10_800.0, "min"), (10_801.0, "h"), (1e7, "h")],
)
def test_time_is_told_in_the_unit_that_reads_best(span_s: float, unit: str) -> None:
    assert ticks.time_unit(span_s).name == unit


@given(st.floats(1e-9, 1e9), st.floats(-1e3, 1e3), st.integers(3, 9))
def test_linear_ticks_are_few_even_and_inside(span: float, offset: float, at_most: int) -> None:
    low = offset * span
    values = ticks.linear(low, low + span, at_most)
    # where a step leaves fewer than two, five of the step before it fit at the most
    assert 2 <= len(values) <= max(at_most, 5)
    steps = [after - before for before, after in itertools.pairwise(values)]
    assert max(steps) - min(steps) <= 1e-6 * span
    assert min(values) >= low - 1e-6 * span
    assert max(values) <= low + span * (1 + 1e-6)


def test_labels_show_every_digit_of_the_step_and_no_more() -> None:
    assert ticks.labels((0.0, 0.05, 0.1)) == ("0.00", "0.05", "0.10")
    assert ticks.labels((-2.0, -1.0, 0.0)) == ("−2", "−1", "0")
    assert ticks.labels((0.0, 2e-6, 4e-6)) == ("0", "2·10⁻⁶", "4·10⁻⁶")


def test_no_minus_stands_before_zero() -> None:
    assert ticks.labels((-0.5, -0.0, 0.5))[1] == "0.0"


def test_decades_are_thinned_where_there_are_many() -> None:
    assert ticks.decades(1e-9, 1e9, 7) == pytest.approx((1e-9, 1e-6, 1e-3, 1.0, 1e3, 1e6, 1e9))
    assert ticks.decade_labels((0.01, 1.0, 1e5)) == ("0.01", "1", "10⁵")


@given(st.floats(1e-12, 1e12))
def test_a_rounded_end_is_never_below_and_at_most_a_third_above(value: float) -> None:
    assert value * (1 - 1e-9) <= ticks.round_up(value) <= value * 1.34
