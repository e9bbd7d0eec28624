"""Units of gains, and the gain of a filtered derivative at high frequency. Common practice."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from service.analysis.controller import (
    DerivativeFilter,
    DerivativeTime,
    IdealController,
    IntegralTime,
    Proportional,
)
from service.analysis.equivalents import equivalent_gains
from tests.analysis.entered import ideal, lags, series
from tests.published.reading import analysis, exact, printed


def in_unit(entry: Any, term: str, unit: str) -> float:
    found: float = next(told.value for told in getattr(entry, term) if told.unit == unit)
    return found


def terms(controller: IdealController, form: str) -> Any:
    return next(entry.controller for entry in equivalent_gains(controller) if entry.form == form)


def test_band_repeats_and_gains_of_the_parallel_form() -> None:
    # 50 % of band, 20 s a repeat, 6 s of derivative
    controller = IdealController(
        form="ideal",
        action="reverse",
        proportional=Proportional(value=50.0, unit="percent_band"),
        integral=IntegralTime(value=20.0, unit="seconds"),
        derivative=DerivativeTime(value=6.0, unit="seconds"),
    )
    told, truth = terms(controller, "parallel"), exact("F06")
    assert in_unit(told, "proportional", "gain") == truth["gain"]
    assert in_unit(told, "integral", "gain_per_second") == pytest.approx(truth["Ki"], rel=1e-15)
    assert in_unit(told, "derivative", "gain_seconds") == pytest.approx(truth["Kd"], rel=1e-15)
    repeats = in_unit(terms(controller, "ideal"), "integral", "repeats_per_minute")
    assert repeats == pytest.approx(truth["repeats_per_min_for_Ti20s"], rel=1e-15)


def test_repeats_per_minute_are_the_reciprocal_of_minutes_per_repeat() -> None:
    controller = replace(ideal(2.0), integral=IntegralTime(value=0.75, unit="repeats_per_minute"))
    told = terms(controller, "ideal")
    assert in_unit(told, "integral", "minutes") == pytest.approx(4.0 / 3.0, rel=1e-15)
    assert in_unit(told, "integral", "seconds") == pytest.approx(exact("F06")["Ti_s"], rel=1e-15)


def test_a_filtered_derivative_lets_noise_through_by_kc_times_1_plus_n() -> None:
    # K. J. Åström, T. Hägglund, PID Controllers, 1995; from memory. Kc = 2, Td = 1, filter Td/8
    noise = analysis(lags(0.1, [10.0, 5.0]), ideal(2.0, 10.0, 1.0, 1.0 / 8.0)).noise
    assert noise is not None
    assert noise.output_gain_high_frequency == pytest.approx(printed("G03")["gain"], rel=1e-13)


def test_the_series_form_lets_noise_through_by_kc_times_n() -> None:
    # remarked beside the value above
    controller = replace(series(2.0, 10.0, 1.0), derivative_filter=DerivativeFilter(value=8.0, unit="ratio"))
    noise = analysis(lags(0.1, [10.0, 5.0]), controller).noise
    assert noise is not None
    assert noise.output_gain_high_frequency == pytest.approx(2.0 * 8.0, rel=1e-13)
