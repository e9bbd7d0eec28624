"""Computed values are told with three digits, gains as they were entered."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.analysis.results import Quantity
from service.judgement.digits import apart, as_entered, beside_limit, three_digits, time


@pytest.mark.parametrize(
    ("value", "told"),
    [
        (3.1234, "3.12"),
        (69.3456, "69.3"),
        (3.1, "3.10"),
        (100.0, "100"),
        (1234.0, "1230"),
        (99.96, "100"),
        (999.6, "1000"),
        (0.012345, "0.0123"),
        (-2.5, "-2.50"),
        (0.0, "0"),
        (999_600.0, "1.00 × 10⁶"),
        (1.2e-7, "1.20 × 10⁻⁷"),
        ("unbounded", "without limit"),
        (None, "not defined"),
    ],
)
def test_a_computed_value_has_three_digits(value: Quantity, told: str) -> None:
    assert three_digits(value) == told


@given(st.floats(1e-4, 9e5))
def test_three_digits_are_within_half_a_digit_of_the_value(value: float) -> None:
    assert float(three_digits(value)) == pytest.approx(value, rel=0.005001)


@pytest.mark.parametrize(
    ("value", "limit", "told"),
    [(1.996, 2.0, "1.996"), (2.0, 2.0, "2.00"), (1.9, 2.0, "1.90"), (1.9999999, 2.0, "1.9999999")],
)
def test_a_value_just_past_its_limit_is_told_with_digits_that_show_it(
    value: float, limit: float, told: str
) -> None:
    assert beside_limit(value, limit) == told


@given(st.floats(0.001, 1000), st.floats(0.001, 1000))
def test_a_value_beside_its_limit_reads_as_it_lies(value: float, limit: float) -> None:
    read = float(beside_limit(value, limit))
    assert (read > limit, read < limit) == (value > limit, value < limit)


@pytest.mark.parametrize(
    ("one", "other", "told"),
    [
        (0.0027272727272727272, 0.027272727272727270, ("0.00273", "0.0273")),
        (3.0, 3.0000001, ("3.0000000", "3.0000001")),
        (0.0, 1.5, ("0", "1.50")),
        (2.0, 2.0, ("2.00", "2.00")),
    ],
)
def test_two_numbers_are_told_with_digits_that_show_their_difference(
    one: float, other: float, told: tuple[str, str]
) -> None:
    assert apart(one, other) == told


@pytest.mark.parametrize(
    ("value", "displayed", "told"),
    [
        (2.0, None, "2"),
        (0.1, None, "0.1"),
        (1234567.5, None, "1234567.5"),
        (2.0, "2.00", "2.00"),
        (2.0, "2,00", "2,00"),
        (0.000125, None, "0.000125"),
    ],
)
def test_a_gain_is_told_as_it_was_entered(value: float, displayed: str | None, told: str) -> None:
    assert as_entered(value, displayed) == told


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_a_gain_that_is_told_reads_back_to_the_same_number(value: float) -> None:
    assert float(as_entered(value)) == value


@pytest.mark.parametrize(
    ("seconds", "told"), [(12.34, "12.3 s"), (120.0, "120 s (2.00 min)"), ("unbounded", "without limit")]
)
def test_a_long_time_is_told_in_minutes_too(seconds: Quantity, told: str) -> None:
    assert time(seconds) == told
