"""Values that the tests of JuliaControl's PID functions assert (test_pid_design.jl). Read."""

from __future__ import annotations

from typing import Any

import pytest

from service.analysis.controller import Controller
from service.analysis.equivalents import equivalent_gains
from tests.analysis.entered import first_order, ideal, parallel
from tests.published.reading import analysis, decimals, exact


def told(controller: Controller, form: str) -> list[float] | None:
    """The three terms of a form: gain, then the times in seconds or the gains of the parallel form."""
    entry: Any = next(entry for entry in equivalent_gains(controller) if entry.form == form)
    if entry.controller is None:
        return None
    units = (
        ("gain", "gain_per_second", "gain_seconds") if form == "parallel" else ("gain", "seconds", "seconds")
    )
    groups = (entry.controller.proportional, entry.controller.integral, entry.controller.derivative)
    return [
        next(term.value for term in group if term.unit == unit)
        for group, unit in zip(groups, units, strict=True)
    ]


def test_an_ideal_controller_in_the_other_forms() -> None:
    controller = ideal(2.0, 3.0, 0.5)
    assert told(controller, "parallel") == [decimals(value, 7) for value in exact("F01")["parallel"]]
    # the library lists the smaller of the two times first; here the integral time is the larger one
    assert told(controller, "series") == [decimals(value, 8) for value in exact("F01")["series_usual"]]


def test_a_parallel_controller_in_the_other_forms() -> None:
    controller = parallel(4.0, 3.0, 0.5)
    assert told(controller, "ideal") == [decimals(value, 7) for value in exact("F02")["standard"]]
    # told there with the smaller time as the integral one: the same controller with the times exchanged
    gain, integral_s, derivative_s = exact("F02")["series"]
    exchanged = [gain * derivative_s / integral_s, derivative_s, integral_s]
    assert told(controller, "series") == pytest.approx(exchanged, rel=1e-7)


def test_no_series_form_where_ti_is_below_four_td() -> None:
    # (Ti)² − 4·Ti·Td = −1 for the first, kp² − 4·ki·kd = −2 for the second
    assert exact("F03")["discriminant"][0] < 0
    assert told(ideal(1.0, 1.0, 0.5), "series") is None
    assert told(parallel(2.0, 3.0, 0.5), "series") is None


def test_pole_placement_by_pi() -> None:
    # 1/(s+1) with damping 0.7 at 2 rad/s asked for: the roots that the library places
    found = analysis(first_order(1.0, 1.0), ideal(exact("F05")["Kp"], exact("F05")["Ti"]))
    (pair,) = found.stability.dominant_roots
    assert pair.root == (decimals(-1.4, 6), decimals(1.428286, 6))
    assert pair.damping_ratio == pytest.approx(0.7, rel=1e-12)
