"""What holds for every loop, tried on loops that Hypothesis makes up.

The normal run tries the same loops every time; PROPERTY_EXAMPLES=2000 in the environment tries so many new
ones.
"""

from __future__ import annotations

import math
import os
from dataclasses import dataclass, fields, replace
from typing import Any

import pytest
from hypothesis import HealthCheck, assume, given, reject, settings
from hypothesis import strategies as st

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
    SeriesController,
    TwoZerosController,
)
from service.analysis.equivalents import equivalent_gains
from service.analysis.errors import FieldError
from service.analysis.plant import ZerosPolesGain
from service.analysis.recomputation import recompute
from service.analysis.results import Analysis, EquivalentTerms, Margins
from tests.analysis.entered import factors, ideal
from tests.references.told import exact_loop
from tests.references.winding import roots_right_of

EXAMPLES = os.environ.get("PROPERTY_EXAMPLES")

tried = settings(
    max_examples=int(EXAMPLES or 30),
    derandomize=EXAMPLES is None,
    suppress_health_check=[HealthCheck.filter_too_much, HealthCheck.too_slow],
)

tried_slowly = settings(tried, max_examples=int(EXAMPLES or 20))

TIMES = ("delay_margin_s", "gain_margin_period_s", "gain_reduction_margin_period_s")
FREQUENCIES = ("max_sensitivity_rad_s",)
FREE_OF_TIME = (
    "gain_margin",
    "gain_reduction_margin",
    "phase_margin_deg",
    "max_sensitivity",
    "max_complementary_sensitivity",
    "disk_margin",
)


def powers(low: float, high: float) -> st.SearchStrategy[float]:
    """Numbers spread evenly over the decades from 10^low to 10^high."""
    return st.floats(low, high).map(lambda exponent: 10.0**exponent)


@dataclass(frozen=True)
class Loop:
    """A loop in the ideal form, which every test changes in its own way."""

    plant: ZerosPolesGain
    controller: IdealController

    def analysis(self) -> Analysis:
        try:
            return recompute(self.plant, self.controller).continuous
        except FieldError:
            # ill-posed: without dead time the gain at infinite frequency is −1
            reject()

    def in_time(self, unit: float) -> Loop:
        """The loop with every time multiplied."""
        plant, controller = self.plant, self.controller
        excess = len(plant.poles_rad_s) - len(plant.zeros_rad_s)

        def scaled(root: Any) -> Any:
            return tuple(part / unit for part in root) if isinstance(root, tuple) else root / unit

        def longer(term: Any) -> Any:
            return term and replace(term, value=term.value * unit)

        return Loop(
            replace(
                plant,
                zeros_rad_s=tuple(map(scaled, plant.zeros_rad_s)),
                poles_rad_s=tuple(map(scaled, plant.poles_rad_s)),
                gain=plant.gain / unit**excess,
                dead_time_s=plant.dead_time_s * unit,
            ),
            replace(
                controller,
                integral=longer(controller.integral),
                derivative=longer(controller.derivative),
                derivative_filter=longer(controller.derivative_filter),
                measurement_filter_s=controller.measurement_filter_s * unit,  # type: ignore[operator]
            ),
        )

    def with_gain(self, factor: float) -> Loop:
        return replace(self, plant=replace(self.plant, gain=self.plant.gain * factor))


@st.composite
def plants(draw: st.DrawFn) -> ZerosPolesGain:
    """Lags, a resonance, an integrator or an unstable lag, some with a zero, most with dead time."""
    poles: list[Any] = [-1.0 / draw(powers(-1.5, 1.5)) for _ in range(draw(st.integers(1, 3)))]
    kind = draw(st.sampled_from(["lags", "lags", "resonance", "integrating", "unstable"]))
    gain = draw(powers(-1.0, 1.0))
    if kind == "resonance":
        rad_s, damping = draw(powers(-1.0, 1.0)), draw(powers(-2.5, -0.05))
        pair = (-damping * rad_s, rad_s * math.sqrt(1.0 - damping**2))
        poles += [pair, (pair[0], -pair[1])]
        gain *= 2.0 * damping * rad_s**2
    elif kind == "integrating":
        poles.append(0.0)
    elif kind == "unstable":
        rate = draw(powers(-1.5, 0.5))
        poles.append(rate)
        gain *= -rate
    zeros = []
    if draw(st.booleans()):
        zeros.append(draw(st.sampled_from([-1.0, -1.0, 1.0])) / draw(powers(-1.5, 1.5)))
    for root in poles:
        gain *= -root if isinstance(root, float) and root < 0 else 1.0
    for zero in zeros:
        gain /= -zero
    dead_time_s = draw(st.just(0.0) | powers(-2.0, 1.0))
    return factors(gain, zeros, poles, dead_time_s)


@st.composite
def loops(draw: st.DrawFn) -> Loop:
    td = draw(st.none() | powers(-1.5, 1.0))
    tf = td / draw(st.floats(2.0, 20.0)) if td else None
    ti = draw(powers(-0.5, 2.0))
    filter_s = draw(st.just(0.0) | powers(-2.0, 0.5))
    return Loop(draw(plants()), ideal(draw(powers(-1.5, 1.0)), ti, td, tf, measurement_filter_s=filter_s))


def stable(loop: Loop) -> tuple[Analysis, Margins]:
    """The analysis of a stable loop that is not within a thousandth of its boundary; others are not tried."""
    found = loop.analysis()
    assume(found.margins is not None)
    assert found.margins is not None
    assume(isinstance(found.margins.max_sensitivity, float) and found.margins.max_sensitivity < 1e3)
    return found, found.margins


def same(value: Any, truth: Any, scale: float = 1.0, tolerance: float = 1e-9) -> bool:
    if isinstance(value, float) and isinstance(truth, float):
        return value == pytest.approx(truth * scale, rel=tolerance, abs=0.0)
    return bool(value == truth)


@tried
@given(loop=loops(), factor=powers(-3.0, 3.0))
def test_a_gain_moved_from_the_controller_to_the_plant_changes_no_margin(loop: Loop, factor: float) -> None:
    found, margins = stable(loop)
    assert loop.controller.proportional is not None
    term = replace(loop.controller.proportional, value=loop.controller.proportional.value / factor)
    moved, moved_margins = stable(
        replace(loop.with_gain(factor), controller=replace(loop.controller, proportional=term))
    )
    for name in (*FREE_OF_TIME, *TIMES):
        assert same(getattr(moved_margins, name), getattr(margins, name)), name
    assert same(moved.stability.decay_rate_per_s, found.stability.decay_rate_per_s, tolerance=1e-7)


@tried
@given(loop=loops(), unit=powers(-4.0, 4.0))
def test_a_loop_told_in_another_unit_of_time_is_the_same_loop(loop: Loop, unit: float) -> None:
    found, margins = stable(loop)
    scaled, scaled_margins = stable(loop.in_time(unit))
    for name in FREE_OF_TIME:
        assert same(getattr(scaled_margins, name), getattr(margins, name)), name
    for name in TIMES:
        assert same(getattr(scaled_margins, name), getattr(margins, name), unit), name
    before, after = found.crossovers.gain_crossovers, scaled.crossovers.gain_crossovers
    assert [other.rad_s * unit for other in after] == pytest.approx([one.rad_s for one in before], rel=1e-9)
    rate = found.stability.decay_rate_per_s
    assert same(scaled.stability.decay_rate_per_s, rate, 1.0 / unit, tolerance=1e-7)
    if found.setpoint_step and scaled.setpoint_step and found.setpoint_step.overshoot_percent is not None:
        overshoot = pytest.approx(found.setpoint_step.overshoot_percent, rel=1e-7, abs=1e-5)
        assert scaled.setpoint_step.overshoot_percent == overshoot


@tried
@given(loop=loops())
def test_the_peak_sensitivity_bounds_gain_and_phase_margin(loop: Loop) -> None:
    # S. Skogestad, I. Postlethwaite, Multivariable Feedback Control, 1996/2005, section 2.4 (from memory):
    # GM ≥ Ms/(Ms−1), PM ≥ 2·asin(1/(2Ms)); and of the reduction margin, on the other side of −1, Ms/(Ms+1)
    _, margins = stable(loop)
    peak = margins.max_sensitivity
    assert isinstance(peak, float)
    nearly = 1.0 - 1e-9
    if isinstance(margins.gain_margin, float) and peak > 1.0:
        assert margins.gain_margin >= peak / (peak - 1.0) * nearly
    if isinstance(margins.gain_reduction_margin, float):
        assert margins.gain_reduction_margin <= peak / (peak + 1.0) / nearly
    if isinstance(margins.phase_margin_deg, float):
        assert margins.phase_margin_deg >= 2.0 * math.degrees(math.asin(0.5 / peak)) * nearly


@tried
@given(loop=loops())
def test_the_disk_margin_lies_within_what_both_peaks_allow(loop: Loop) -> None:
    # the disk margin is 2 over the peak of abs(S − T), and S + T = 1 (P. Seiler, A. Packard, P. Gahinet, An
    # introduction to disk margins, IEEE Control Systems 40 (2020), from memory)
    _, margins = stable(loop)
    peak, complementary, disk = (
        margins.max_sensitivity,
        margins.max_complementary_sensitivity,
        margins.disk_margin,
    )
    assert isinstance(peak, float)
    assert isinstance(complementary, float)
    assert isinstance(disk, float)
    nearly = 1.0 - 1e-9
    assert disk >= 2.0 / (peak + complementary) * nearly
    # abs(S − T) = abs(2S − 1) ≥ 2·abs S − 1, and the same of T
    assert disk <= 2.0 / max(2.0 * max(peak, complementary) - 1.0, 1.0) / nearly


@tried
@given(loop=loops(), direct=st.booleans())
def test_the_integrated_error_of_a_load_is_minus_one_over_the_integral_gain(loop: Loop, direct: bool) -> None:
    # the output has to end at −1, and it is Ki times the integrated error (common practice, for example
    # K. J. Åström, T. Hägglund, PID Controllers, 1995, section 4.2, from memory)
    if direct:
        loop = Loop(loop.with_gain(-1.0).plant, replace(loop.controller, action="direct"))
    found, _ = stable(loop)
    assume(found.load_step is not None and found.load_step.integrated_error is not None)
    assert found.load_step is not None
    assert loop.controller.proportional is not None
    assert loop.controller.integral is not None
    ki = loop.controller.proportional.value / loop.controller.integral.value
    expected = (1.0 if direct else -1.0) / ki
    assert found.load_step.integrated_error == pytest.approx(expected, rel=1e-6, abs=0.0)
    assert isinstance(found.load_step.iae, float)
    assert found.load_step.iae >= abs(found.load_step.integrated_error) * (1.0 - 1e-6)


@tried
@given(loop=loops(), side=st.sampled_from([-1.0, 1.0]))
def test_each_gain_margin_is_where_the_loop_turns_unstable(loop: Loop, side: float) -> None:
    _, margins = stable(loop)
    factor = margins.gain_margin if side > 0 else margins.gain_reduction_margin
    assume(isinstance(factor, float))
    assert isinstance(factor, float)
    assert loop.with_gain(factor * (1.0 - side * 1e-6)).analysis().stability.verdict == "stable"
    assert loop.with_gain(factor * (1.0 + side * 1e-6)).analysis().stability.verdict == "unstable"


@tried
@given(loop=loops())
def test_the_delay_margin_is_where_the_loop_turns_unstable(loop: Loop) -> None:
    _, margins = stable(loop)
    extra = margins.delay_margin_s
    assume(isinstance(extra, float) and extra > 0)
    assert isinstance(extra, float)

    def delayed(factor: float) -> str:
        total = loop.plant.dead_time_s + extra * factor
        return replace(loop, plant=replace(loop.plant, dead_time_s=total)).analysis().stability.verdict

    assert delayed(1.0 - 1e-5) == "stable"
    assert delayed(1.0 + 1e-5) == "unstable"


@tried_slowly
@given(loop=loops())
def test_the_root_count_is_that_of_the_winding(loop: Loop) -> None:
    stability = loop.analysis().stability
    assume(stability.verdict != "undecided")
    exact = exact_loop(loop.plant, loop.controller)
    if stability.unstable_roots == "unbounded":
        # of neutral type: the chain of roots lies right of the axis
        assert exact.dead_time > 0
        assert len(exact.numerator) == len(exact.denominator)
        assert abs(exact.numerator[0]) > abs(exact.denominator[0])
    else:
        assert stability.unstable_roots == roots_right_of(exact)


@tried
@given(loop=loops())
def test_no_loop_is_left_undecided_far_from_its_boundary(loop: Loop) -> None:
    if loop.analysis().stability.verdict == "undecided":
        exact = exact_loop(loop.plant, loop.controller)
        # a loop at its boundary changes its count within a millionth of its gain
        counts = {roots_right_of(exact.with_gain(1 + share)) for share in (-1e-6, 1e-6)}
        assert len(counts) > 1


@tried
@given(
    loop=loops(),
    form=st.sampled_from(["series", "parallel", "two_zeros"]),
    unit=st.sampled_from([0, -1]),
)
def test_a_controller_entered_from_its_equivalents_has_the_same_margins_and_turns_back(
    loop: Loop, form: str, unit: int
) -> None:
    _, margins = stable(loop)
    told = terms_of(loop.controller, form)
    assume(told is not None)
    assert told is not None
    other = entered_as(form, told, loop.controller, unit)
    _, other_margins = stable(replace(loop, controller=other))  # type: ignore[arg-type]
    for name in (*FREE_OF_TIME, *TIMES):
        assert same(getattr(other_margins, name), getattr(margins, name), tolerance=1e-7), name
    back = terms_of(other, "ideal")
    assert back is not None
    again = entered_as("ideal", back, loop.controller, 0)
    for name in ("proportional", "integral", "derivative", "derivative_filter"):
        term, truth = getattr(again, name), getattr(loop.controller, name)
        assert (term is None) == (truth is None)
        assert term is None or term.value == pytest.approx(truth.value, rel=1e-6)


def terms_of(controller: Controller, form: str) -> EquivalentTerms | None:
    return next(entry.controller for entry in equivalent_gains(controller) if entry.form == form)


def entered_as(form: str, told: EquivalentTerms, original: IdealController, unit: int) -> Controller:
    """The controller that someone would enter from an entry, each term in its first or its last unit."""

    def term(kind: Any, group: tuple[Any, ...]) -> Any:
        return kind(value=group[unit].value, unit=group[unit].unit) if group else None

    common = {
        "action": original.action,
        "measurement_filter_s": original.measurement_filter_s,
    }
    if form == "two_zeros":
        assert told.gain is not None
        return TwoZerosController(
            form="two_zeros",
            gain=told.gain,
            zeros_rad_s=told.zeros_rad_s,
            derivative_filter=term(FilterTime, told.derivative_filter),
            **common,
        )
    seconds = tuple(entry for entry in told.derivative_filter if entry.unit == "seconds")
    if form == "parallel":
        return ParallelController(
            form="parallel",
            proportional=term(Proportional, told.proportional),
            integral=term(IntegralGain, told.integral),
            derivative=term(DerivativeGain, told.derivative),
            derivative_filter=term(DerivativeFilter, seconds),
            **common,
        )
    kind, name = (SeriesController, "series") if form == "series" else (IdealController, "ideal")
    return kind(
        form=name,
        proportional=term(Proportional, told.proportional),
        integral=term(IntegralTime, told.integral),
        derivative=term(DerivativeTime, told.derivative),
        derivative_filter=term(DerivativeFilter, seconds),
        **common,
    )


def test_every_margin_is_looked_at() -> None:
    names = {field.name for field in fields(Margins) if field.type not in ("bool",)}
    lists = {"gain_crossovers", "phase_crossovers"}
    assert names - lists == {*FREE_OF_TIME, *TIMES, *FREQUENCIES}
