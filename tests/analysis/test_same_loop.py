"""The truths of the check files, whatever form, units, action and basis a loop is told in.

The files tell every loop in the ideal form, in gain and seconds, reverse acting. Here each is told again by
the definitions of the interface: its gains are turned into the other form at fifty digits and rounded once.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

import pytest
from mpmath import mp, mpf

from service.analysis.controller import (
    Controller,
    DerivativeFilter,
    DerivativeGain,
    DerivativeTime,
    FilterTime,
    IdealController,
    IntegralGain,
    IntegralTime,
    ParallelController,
    Proportional,
    Scan,
    SeriesController,
    SetpointWeight,
    TwoZerosController,
)
from service.analysis.plant import (
    FirstOrder,
    Integrating,
    PlantModel,
    Range,
    Ranges,
    SecondOrder,
    TransferFunction,
)
from service.analysis.recomputation import recompute
from service.analysis.results import Analysis
from tests.checks.loops import CheckLoop, read

FIFTY_DIGITS = {loop.name: loop for loop in read("fifty_digits.json")}
EXACT_DEAD_TIME = {loop.name: loop for loop in read("exact_dead_time.json")}
LOOPS = FIFTY_DIGITS | EXACT_DEAD_TIME

RANGES = Ranges(pv=Range(low=-20.0, high=230.0, unit="°C"), output=Range(low=4.0, high=20.0, unit="mA"))


@dataclass(frozen=True)
class Terms:
    """The controller of a check loop at fifty digits; Td and Tf are 0 where there is no derivative."""

    kc: Any
    ti: Any
    td: Any
    tf: Any
    b: Any
    c: Any

    @staticmethod
    def of(loop: CheckLoop) -> Terms:
        told = loop.controller()
        assert isinstance(told.setpoint_weight, SetpointWeight)
        assert told.proportional is not None
        assert told.integral is not None
        td = mpf(told.derivative.value) if told.derivative else mpf(0)
        tf = (
            td / told.derivative_filter.value
            if isinstance(told.derivative_filter, DerivativeFilter)
            else mpf(0)
        )
        weight = told.setpoint_weight
        return Terms(
            mpf(told.proportional.value),
            mpf(told.integral.value),
            td,
            tf,
            mpf(weight.proportional),
            mpf(weight.derivative),
        )

    @property
    def ki(self) -> Any:
        return self.kc / self.ti

    @property
    def kd(self) -> Any:
        return self.kc * self.td

    def weight(self) -> SetpointWeight:
        return weight(self.b, self.c)


def weight(b: Any, c: Any) -> SetpointWeight:
    return SetpointWeight(proportional=float(b), derivative=float(c))


def ideal(terms: Terms, *, gain: str = "gain", integral: str, minutes: bool) -> IdealController:
    """The ideal form: the gain and the integral term in one of their units, the other times in s or min."""
    seconds = {
        "seconds": terms.ti,
        "minutes": terms.ti / 60,
        "repeats_per_second": 1 / terms.ti,
        "repeats_per_minute": 60 / terms.ti,
    }
    unit: Any = "minutes" if minutes else "seconds"
    scale = 60 if minutes else 1
    return IdealController(
        form="ideal",
        action="reverse",
        proportional=proportional(terms, gain),
        integral=IntegralTime(value=float(seconds[integral]), unit=integral),  # type: ignore[arg-type]
        derivative=DerivativeTime(value=float(terms.td / scale), unit=unit) if terms.td else None,
        derivative_filter=DerivativeFilter(value=float(terms.tf / scale), unit=unit) if terms.tf else None,
        setpoint_weight=terms.weight(),
    )


def proportional(terms: Terms, unit: str) -> Proportional:
    value = terms.kc if unit == "gain" else 100 / terms.kc
    return Proportional(value=float(value), unit=unit)  # type: ignore[arg-type]


def parallel(
    terms: Terms,
    *,
    gain: str = "gain",
    integral: str,
    derivative: str,
    ratio: bool = False,
    scan_s: Any = None,
) -> ParallelController:
    """The parallel form: every term in one of its units, the filter as a time or as a ratio."""
    ki = {
        "gain_per_second": terms.ki,
        "gain_per_minute": 60 * terms.ki,
        "seconds": 1 / terms.ki,
        "minutes": 1 / (60 * terms.ki),
        "gain_per_scan": terms.ki * (scan_s or 0),
    }[integral]
    kd = {
        "gain_seconds": terms.kd,
        "gain_minutes": terms.kd / 60,
        "gain_scans": terms.kd / (scan_s or 1),
    }[derivative]
    tf = DerivativeFilter(
        value=float(terms.td / terms.tf if ratio else terms.tf) if terms.tf else 1.0,
        unit="ratio" if ratio else "seconds",
    )
    return ParallelController(
        form="parallel",
        action="reverse",
        proportional=proportional(terms, gain),
        integral=IntegralGain(value=float(ki), unit=integral),  # type: ignore[arg-type]
        derivative=DerivativeGain(value=float(kd), unit=derivative) if terms.td else None,  # type: ignore[arg-type]
        derivative_filter=tf if terms.tf else None,
        setpoint_weight=terms.weight(),
        scan=Scan(interval_s=float(scan_s)) if scan_s else None,
    )


def series(terms: Terms) -> SeriesController | None:
    """The series form where there is one: Ti′ and Td′ are the roots of x² − (Ti+Tf)·x + Ti·(Td+Tf)."""
    if terms.td == 0:
        ti, td, kc = terms.ti, mpf(0), terms.kc
    else:
        square = (terms.ti - terms.tf) ** 2 - 4 * terms.ti * terms.td
        if square < 0:
            return None
        ti = (terms.ti + terms.tf + mp.sqrt(square)) / 2
        td = terms.ti * (terms.td + terms.tf) / ti
        kc = terms.kc * ti / terms.ti
    # b of the series form weighs Kc′, and with c = 0 nothing but the proportional term sees the difference;
    # b = c = 1 is the whole controller on the error in either form
    b = 1 if terms.c == 1 else terms.b * terms.kc / kc
    return SeriesController(
        form="series",
        action="reverse",
        proportional=Proportional(value=float(kc), unit="gain"),
        integral=IntegralTime(value=float(ti), unit="seconds"),
        derivative=DerivativeTime(value=float(td), unit="seconds") if td else None,
        derivative_filter=DerivativeFilter(value=float(terms.tf), unit="seconds") if terms.tf else None,
        setpoint_weight=weight(b, terms.c),
    )


def two_zeros(terms: Terms) -> TwoZerosController:
    """The form with two zeros, or with one where there is no derivative.

    With its weights its set-point path, (b·Kp'·s + Ki + c·k·s²)/(s·(1+Tf·s)), is the ideal one.
    """
    k, kp = terms.kd + terms.kc * terms.tf, terms.kc + terms.ki * terms.tf
    b = (terms.b * terms.kc + terms.ki * terms.tf) / kp
    if not terms.td:
        zeros: tuple[Any, ...] = (float(-terms.ki / terms.kc),)
        return TwoZerosController(
            form="two_zeros",
            action="reverse",
            gain=float(terms.kc),
            zeros_rad_s=zeros,
            setpoint_weight=weight(b, 1),
        )
    root = mp.sqrt(kp**2 - 4 * k * terms.ki)
    if mp.im(root):
        zeros = tuple((float(-kp / (2 * k)), float(sign * mp.im(root) / (2 * k))) for sign in (1, -1))
    else:
        far = -(kp + root) / (2 * k)
        zeros = (float(far), float(terms.ki / (k * far)))
    c = (terms.b * terms.kc * terms.tf + terms.c * terms.kd) / k
    return TwoZerosController(
        form="two_zeros",
        action="reverse",
        gain=float(k),
        zeros_rad_s=zeros,
        derivative_filter=FilterTime(value=float(terms.tf), unit="seconds"),
        setpoint_weight=weight(b, c),
    )


def with_gain(plant: PlantModel, factor: Any) -> PlantModel:
    match plant:
        case FirstOrder() | SecondOrder():
            return replace(plant, gain=float(plant.gain * factor))
        case Integrating():
            return replace(plant, gain_per_s=float(plant.gain_per_s * factor))
        case TransferFunction():
            return replace(plant, numerator=tuple(float(c * factor) for c in plant.numerator))
    raise TypeError(plant)


Told = tuple[PlantModel, Controller | None, Ranges | None]

PER_CENT_IN_UNITS = mpf(RANGES.output.span) / mpf(RANGES.pv.span)
"""A plant's gain in per cent per per cent, from PV units per output unit."""


def plant_in_units(loop: CheckLoop) -> Told:
    plant = with_gain(loop.plant_model(), 1 / PER_CENT_IN_UNITS)
    return replace(plant, gain_basis="engineering_units"), loop.controller(), RANGES


def controller_in_units(loop: CheckLoop) -> Told:
    terms = Terms.of(loop)
    told = two_zeros(terms)
    gain = float(mpf(told.gain) * PER_CENT_IN_UNITS)
    return loop.plant_model(), replace(told, gain=gain, gain_basis="engineering_units"), RANGES


def both_in_units(loop: CheckLoop) -> Told:
    plant, _, ranges = plant_in_units(loop)
    terms = Terms.of(loop)
    in_units = replace(terms, kc=terms.kc * PER_CENT_IN_UNITS)
    told = parallel(in_units, integral="gain_per_second", derivative="gain_seconds")
    return plant, replace(told, gain_basis="engineering_units"), ranges


def direct(loop: CheckLoop) -> Told:
    return with_gain(loop.plant_model(), -1), replace(loop.controller(), action="direct"), None


def of_terms(tell: Callable[[Terms], Controller | None]) -> Callable[[CheckLoop], Told]:
    return lambda loop: (loop.plant_model(), tell(Terms.of(loop)), None)


TELLINGS: dict[str, Callable[[CheckLoop], Told]] = {
    "ideal in per cent of band and minutes": of_terms(
        lambda terms: ideal(terms, gain="percent_band", integral="minutes", minutes=True)
    ),
    "ideal in repeats per second": of_terms(
        lambda terms: ideal(terms, integral="repeats_per_second", minutes=False)
    ),
    "ideal in repeats per minute": of_terms(
        lambda terms: ideal(terms, integral="repeats_per_minute", minutes=True)
    ),
    "parallel in gain per second": of_terms(
        lambda terms: parallel(terms, integral="gain_per_second", derivative="gain_seconds")
    ),
    "parallel in gain per minute and per cent of band": of_terms(
        lambda terms: parallel(
            terms, gain="percent_band", integral="gain_per_minute", derivative="gain_minutes"
        )
    ),
    "parallel in minutes with the filter as a ratio": of_terms(
        lambda terms: parallel(terms, integral="minutes", derivative="gain_seconds", ratio=True)
    ),
    "parallel in seconds": of_terms(
        lambda terms: parallel(terms, integral="seconds", derivative="gain_minutes")
    ),
    "series": of_terms(series),
    "two zeros": of_terms(two_zeros),
    "direct action on a plant of the other sign": direct,
    "plant in engineering units": plant_in_units,
    "controller in engineering units": controller_in_units,
    "both in engineering units": both_in_units,
}

CASES = [
    (name, telling)
    for telling, tell in TELLINGS.items()
    for name, loop in LOOPS.items()
    if tell(loop)[1] is not None
]


def test_enough_loops_have_a_series_form_with_a_derivative() -> None:
    told = [name for name, telling in CASES if telling == "series" and LOOPS[name].controller().derivative]
    assert len(told) > 10


@pytest.mark.parametrize(("name", "telling"), CASES)
def test_the_truths_of_a_loop_do_not_depend_on_how_it_is_told(name: str, telling: str) -> None:
    plant, controller, ranges = TELLINGS[telling](LOOPS[name])
    assert controller is not None
    found, expected = recompute(plant, controller, ranges=ranges).continuous, LOOPS[name].expected
    assert found.stability.verdict == ("stable" if expected["stable"] else "unstable")
    assert {route.unstable_roots for route in found.stability.routes} == {expected["unstable_roots"]}
    if "decay_rate_per_s" in expected:
        rate = pytest.approx(expected["decay_rate_per_s"], rel=1e-7, abs=0.0)
        assert found.stability.decay_rate_per_s == rate
    if expected["stable"]:
        assert_margins(found, expected, 1e-9 if name in FIFTY_DIGITS else 1e-7)
    if "step" in expected:
        assert_setpoint_step(found, expected["step"], 1e-5 if name in FIFTY_DIGITS else 1e-4)


def assert_margins(found: Analysis, expected: dict[str, Any], tolerance: float) -> None:
    assert found.margins is not None
    for field in (
        "gain_margin",
        "gain_reduction_margin",
        "phase_margin_deg",
        "delay_margin_s",
        "max_sensitivity",
    ):
        truth = expected[field]
        assert getattr(found.margins, field) == (
            "unbounded" if truth is None else pytest.approx(truth, rel=tolerance, abs=0.0)
        ), field


def assert_setpoint_step(found: Analysis, expected: dict[str, Any], tolerance: float) -> None:
    step = found.setpoint_step
    assert step is not None
    assert step.overshoot_percent == pytest.approx(expected["overshoot_percent"], rel=0.0, abs=tolerance)
    if "settling_time_s" in expected and not step.settling_time_sensitive:
        assert step.settling_time_s == pytest.approx(expected["settling_time_s"], rel=1e-6, abs=0.0)


@pytest.mark.parametrize("name", [name for name in LOOPS if LOOPS[name].controller().derivative])
def test_gains_for_each_scan_are_the_same_gains(name: str) -> None:
    # the continuous analysis does not see the scan, but the interval stands in these units
    loop = LOOPS[name]
    told = parallel(
        Terms.of(loop),
        integral="gain_per_scan",
        derivative="gain_scans",
        scan_s=mpf("0.25") * Terms.of(loop).ti,
    )
    found = recompute(loop.plant_model(), told).continuous
    assert found.stability.unstable_roots == loop.expected["unstable_roots"]
    if loop.expected["stable"]:
        assert found.margins is not None
        sensitivity = loop.expected["max_sensitivity"]
        assert found.margins.max_sensitivity == pytest.approx(sensitivity, rel=1e-7, abs=0.0)
