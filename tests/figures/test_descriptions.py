"""The words and the table beside a chart say what it shows, from the stored numbers."""

from __future__ import annotations

from dataclasses import replace

import pytest

from service.figures.descriptions import ROWS, describe, describe_frequency, table
from service.judgement.digits import three_digits
from tests.figures.responses_to_draw import frequency, load, setpoint


def test_a_set_point_step_is_told_with_its_metrics() -> None:
    words = describe(setpoint(earlier=True))
    assert words.startswith(
        "Set-point step of 1 % of range, proposed gains. PV comes to rest at 1.00 % of range."
    )
    assert "It overshoots by 25.4 % after 34.3 s." in words
    assert "It stays within ±2 % after 84.1 s." in words
    assert words.endswith("Drawn beside it, dashed: the gains in force.")


def test_nothing_is_told_that_was_not_computed() -> None:
    words = describe(setpoint(settling_time_s=None, overshoot_percent=0.0, final_value="unbounded"))
    assert "stays within" not in words
    assert "It does not overshoot." in words
    assert "PV comes to no rest that can be stated." in words


def test_a_load_step_is_told_by_its_peak() -> None:
    words = describe(load())
    assert "PV is driven off by 0.610 % of range after 22.0 s. It has recovered after 90.0 s." in words


def test_the_peak_of_the_sensitivity_is_told_where_it_says_something() -> None:
    curve = frequency()
    at = max(range(len(curve.rad_s)), key=lambda index: curve.sensitivity[index])
    rad_s, peak = three_digits(curve.rad_s[at]), three_digits(curve.sensitivity[at])
    assert f"near {rad_s} rad/s: {peak} at the drawn points" in describe_frequency(curve, stable=True)
    on_the_edge = replace(curve, sensitivity=(1e15, *curve.sensitivity[1:]))
    assert "largest" not in describe_frequency(on_the_edge, stable=True)


def test_of_a_loop_that_is_not_shown_stable_no_sensitivity_is_told() -> None:
    words = describe_frequency(frequency(), stable=False)
    assert words.startswith("Loop gain over frequency, from")
    assert "The sensitivity |S| is not drawn" in words
    assert "largest" not in words


def test_the_table_reads_the_drawn_curve_at_even_times() -> None:
    response = setpoint(earlier=True)
    heading, *rows = table(response)
    assert heading[0] == "Time, min"
    assert len(heading) == 4
    assert len(rows) == ROWS
    assert rows[0] == ("0", "0", "2.00", "0")
    assert all(len(row) == 4 for row in rows)


@pytest.mark.parametrize("index", range(ROWS))
def test_each_row_lies_on_the_curve(index: int) -> None:
    response = setpoint()
    row = table(response)[1 + index]
    time_s = 10.0 * index  # 100 s are drawn
    nearest = min(range(len(response.curve.time_s)), key=lambda at: abs(response.curve.time_s[at] - time_s))
    assert float(row[1]) == pytest.approx(response.curve.pv[nearest], abs=0.01)
