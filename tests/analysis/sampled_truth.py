"""A sampled analysis against the slow references, and loops that are made up for it."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Any

import numpy as np
from mpmath import mp, mpf

from service.analysis.codes import DELAY_MARGIN
from service.analysis.controller import Controller, Scan, SetpointWeight
from service.analysis.plant import PlantModel
from service.analysis.recomputation import recompute
from service.analysis.results import Analysis
from tests.analysis.entered import factors, ideal, parallel, series, two_zeros
from tests.references.sampled_marching import (
    LoadMeasures,
    NoiseMeasures,
    SetpointMeasures,
    load_measures,
    march,
    noise_measures,
    setpoint_measures,
)
from tests.references.sampled_margins import FloatRoots, reference_delay_margin, reference_margins
from tests.references.sampled_told import ExactSampledLoop, roots_outside, sampled_loop, spectral_radius
from tests.references.told import exact_loop

RADIUS, MARGIN, NOISE, STEP = 1e-8, 1e-7, 1e-6, 1e-6
"""What the figures have to reach, relatively."""

ON_THE_CIRCLE = 1e-11
"""A spectral radius as near to 1 as this may be called undecided."""

LONGEST_MARCH = 6_000
SEARCHED_SCANS = 25.0
LONG_DELAY = 60.0
"""With more scans of dead time than this every root of every delay would take too long."""

MARGINS = (
    "gain_margin",
    "gain_reduction_margin",
    "phase_margin_deg",
    "max_sensitivity",
    "max_complementary_sensitivity",
    "disk_margin",
)
NOISES = {
    "output_std": "output_std_per_noise_std",
    "output_travel": "output_travel_per_scan",
    "derivative_share": "derivative_share",
}
SETPOINT_STEPS = {
    "rise_time": "rise_time_s",
    "settling_time": "settling_time_s",
    "overshoot_percent": "overshoot_percent",
    "undershoot_percent": "undershoot_percent",
    "peak_time": "peak_time_s",
    "iae": "iae",
    "ise": "ise",
    "itae": "itae",
    "output_peak": "output_peak",
    "output_total_variation": "output_total_variation",
}
LOAD_STEPS = {
    "peak_deviation": "peak_deviation",
    "peak_time": "peak_time_s",
    "recovery_time": "recovery_time_s",
    "iae": "iae",
    "integrated_error": "integrated_error",
}


class Comparison:
    """Everything in which the service and the references differ, in words."""

    def __init__(self, plant: PlantModel, controller: Controller) -> None:
        assert isinstance(controller.scan, Scan)
        self.controller = controller
        self.found: Analysis | None = recompute(plant, controller).sampled
        self.loop: ExactSampledLoop = sampled_loop(exact_loop(plant, controller), controller.scan)
        self.differences: list[str] = []

    @property
    def analysis(self) -> Analysis:
        assert self.found is not None
        return self.found

    def _compare(self, name: str, found: Any, truth: Any, relative: float, absolute: float = 0.0) -> None:
        if truth is None:
            if found != "unbounded":
                self.differences.append(f"{name}: {found} where there is none")
        elif not isinstance(found, float) or not abs(found - float(truth)) <= absolute + relative * abs(
            float(truth)
        ):
            self.differences.append(f"{name}: {found} for {float(truth)!r}")

    def stability(self) -> None:
        """Verdict, count and spectral radius."""
        stability, polynomial = self.analysis.stability, self.loop.characteristic()
        radius = spectral_radius(polynomial)
        if stability.verdict == "undecided" and abs(radius - 1) < ON_THE_CIRCLE:
            return
        outside = roots_outside(polynomial)
        verdict = "unstable" if outside else "stable"
        if (stability.verdict, stability.unstable_roots) != (verdict, outside):
            self.differences.append(
                f"verdict: {stability.verdict}, {stability.unstable_roots} roots ({stability.reason})"
                f" for {outside}, spectral radius {mp.nstr(radius, 12)}"
            )
        self._compare("spectral_radius", stability.spectral_radius, radius, RADIUS, 1e-12)

    @property
    def stable(self) -> bool:
        return self.analysis.stability.verdict == "stable" and not self.differences

    def margins(self) -> None:
        """Every margin but the delay margin, and what noise does by frequency."""
        margins, noise = self.analysis.margins, self.analysis.noise
        if margins is None or noise is None:
            self.differences.append(f"no margins: {self.analysis.notes}")
            return
        truth = reference_margins(self.loop)
        for name in MARGINS:
            self._compare(name, getattr(margins, name), getattr(truth, name), MARGIN)
        for name in ("max_control_sensitivity", "output_gain_high_frequency"):
            self._compare(name, getattr(noise, name), getattr(truth, name), MARGIN, 1e-12)
        if len(margins.gain_crossovers) != len(truth.gain_crossovers):
            self.differences.append(
                f"{len(margins.gain_crossovers)} gain crossovers for {len(truth.gain_crossovers)}"
            )
            return
        for found, omega, phase in zip(
            margins.gain_crossovers, truth.gain_crossovers, truth.phase_margins_deg, strict=True
        ):
            self._compare("gain crossover", found.rad_s, omega, MARGIN)
            self._compare("phase margin there", found.phase_margin_deg, phase, MARGIN, 1e-7)

    def delay_margin(self) -> None:
        """No root outside at any shorter delay that is tried, one just behind."""
        margins = self.analysis.margins
        if margins is not None and margins.delay_margin_s is None and DELAY_MARGIN in self.analysis.notes:
            # said to be not confirmed: no figure, and so none that could be wrong
            return
        if margins is None or margins.delay_margin_s is None:
            self.differences.append(f"no delay margin: {self.analysis.notes}")
            return
        interval, delay = float(self.loop.interval), float(self.loop.delay)
        quick = FloatRoots(self.loop)
        if margins.delay_margin_s == "unbounded":
            tried = np.linspace(0.0, SEARCHED_SCANS * interval, 30) + 1e-9 * interval
        else:
            end = float(margins.delay_margin_s)
            # as many as their matrices are small
            scans = (delay + end) / interval
            tried = np.append(
                np.linspace(0.0, end, int(min(40.0, 3.0 + 800.0 / scans)))[1:-1], end * (1 - 1e-6)
            )
            tried = tried[delay + tried < LONG_DELAY * interval]
            if roots_outside(self.loop.characteristic(mpf(end) * (1 + mpf(MARGIN)))) == 0:
                self.differences.append(f"delay_margin_s: {end} but no root is outside behind it")
            if roots_outside(self.loop.characteristic(mpf(end) * (1 - mpf(MARGIN)))) > 0:
                self.differences.append(f"delay_margin_s: {end} but a root is outside before it")
        # and where a direct path makes it to the next scan
        first = math.ceil(delay / interval) * interval - delay
        jumps = first + interval * np.arange(6)
        tried = np.concatenate([tried, jumps[jumps < tried.max(initial=0.0)]])
        for extra in tried:
            if quick.radius(float(extra)) > 1.0 + 1e-9:
                self.differences.append(f"delay_margin_s: {margins.delay_margin_s} but unstable at {extra}")
                return

    def delay_margin_by_search(self) -> None:
        """The delay margin found by lengthening the dead time step by step."""
        margins = self.analysis.margins
        assert margins is not None
        if margins.delay_margin_s is None:
            return
        truth = reference_delay_margin(self.loop, SEARCHED_SCANS * float(self.loop.interval))
        if truth is not None or margins.delay_margin_s == "unbounded":
            self._compare("delay_margin_s", margins.delay_margin_s, truth, MARGIN)
        elif isinstance(
            margins.delay_margin_s, float
        ) and margins.delay_margin_s < 0.99 * SEARCHED_SCANS * float(self.loop.interval):
            self.differences.append(f"delay_margin_s: {margins.delay_margin_s}, the search finds none")

    def responses(self) -> bool:
        """Noise and every metric of both steps; False where the march would be too long."""
        analysis = self.analysis
        radius = analysis.stability.spectral_radius
        assert isinstance(radius, float)
        count = (
            int(34.0 / -math.log(radius)) + 2 * int(self.loop.delay / self.loop.interval) + 20
            if radius > 0
            else 60
        )
        if count > LONGEST_MARCH:
            return False
        marched = march(self.loop, self.controller, count)
        setpoint, load, noise = analysis.setpoint_step, analysis.load_step, analysis.noise
        if setpoint is None or load is None or noise is None:
            self.differences.append(f"no responses: {analysis.notes}")
            return True
        self._noise(noise_measures(marched), noise)
        self._setpoint(setpoint_measures(marched, float(setpoint.final_value)), setpoint)  # type: ignore[arg-type]
        self._load(load_measures(marched, float(load.final_value)), load)  # type: ignore[arg-type]
        return True

    def _noise(self, truth: NoiseMeasures, found: Any) -> None:
        for mine, name in NOISES.items():
            self._compare(name, getattr(found, name), getattr(truth, mine), NOISE, 1e-12)

    def _setpoint(self, truth: SetpointMeasures, found: Any) -> None:
        offset = abs(1.0 - found.final_value) > 1e-9
        for mine, name in SETPOINT_STEPS.items():
            value, other = getattr(found, name), getattr(truth, mine)
            if offset and name in ("iae", "ise", "itae"):
                other = None
            if name == "settling_time_s" and found.settling_time_sensitive:
                continue
            if name == "peak_time_s" and found.overshoot_percent == 0:
                if value is not None:
                    self.differences.append(f"peak_time_s: {value} without overshoot")
                continue
            if name == "peak_time_s" and _as_high(
                truth, value, found.final_value * (1 + found.overshoot_percent / 100)
            ):
                continue
            self._compare(name, value, other, STEP, 1e-6 if "percent" in name else 1e-12)

    def _load(self, truth: LoadMeasures, found: Any) -> None:
        for mine, name in LOAD_STEPS.items():
            value, other = getattr(found, name), getattr(truth, mine)
            if found.final_value != 0 and name in ("iae", "integrated_error"):
                other = None
            if name == "peak_time_s" and (
                value == "unbounded" or _as_high(truth, value, found.peak_deviation)
            ):
                continue
            self._compare(f"load {name}", value, other, STEP, 1e-9)


def _as_high(truth: SetpointMeasures | LoadMeasures, time: Any, peak: float) -> bool:
    """Whether PV is at its peak at another time too: a plant that comes to rest within a scan stays level."""
    if not isinstance(time, float) or abs(time - truth.peak_time) <= STEP * truth.peak_time:
        return False
    return abs(truth.answer.at(time) - peak) <= 1e-13 * abs(peak)


def compared(plant: PlantModel, controller: Controller, *, search: bool = False) -> list[str]:
    """Everything in which the service and the references differ about a loop."""
    comparison = Comparison(plant, controller)
    comparison.stability()
    if comparison.stable:
        comparison.margins()
        comparison.delay_margin()
        comparison.responses()
        if search:
            comparison.delay_margin_by_search()
    return comparison.differences


def made_up(seed: int) -> tuple[PlantModel, Controller]:
    """A loop of any kind, as often stable as not."""
    draw = np.random.default_rng(seed)
    plant, pace = _plant(draw)
    interval = float(pace * 10.0 ** draw.uniform(-1.6, 0.7))
    whole = float(draw.choice([0, 0, 1, 2, 3, 5, 8, 12]))
    fraction = float(draw.choice([0.0, draw.uniform(0.02, 0.98)]))
    output_delay = float(draw.choice([0.0, 0.0, 0.5, draw.uniform(0.0, 1.5)])) * interval
    trapezoidal = bool(draw.random() < 0.5)
    scan = Scan(
        interval_s=interval,
        method="trapezoidal" if trapezoidal else "backward_difference",
        output_delay_s=output_delay,
    )
    dead_time = (whole + fraction) * interval
    plant = factors(plant.gain, plant.zeros_rad_s, plant.poles_rad_s, dead_time)
    pace = pace + dead_time + interval
    controller = _controller(draw, pace, scan, 1.0)
    # as strong as makes abs L about 1 where the loop is fast
    told = exact_loop(plant, controller)
    omega = 10.0 ** draw.uniform(-1.0, 0.15) / pace
    size = float(abs(told.at(mp.mpc(0, omega))))
    # now and then with the wrong action
    gain = plant.gain / size * (-1.0 if draw.random() < 0.05 else 1.0)
    return factors(gain, plant.zeros_rad_s, plant.poles_rad_s, dead_time), controller


def _plant(draw: Any) -> tuple[Any, float]:
    time = 10.0 ** draw.uniform(-1.0, 2.0)
    poles: list[Any] = [-1.0 / (time * 10.0 ** draw.uniform(-0.8, 0.3)) for _ in range(draw.integers(1, 4))]
    kind = draw.choice(["lags", "lags", "lags", "resonant", "integrating", "unstable", "equal"])
    if kind == "resonant":
        omega, damping = 10.0 ** draw.uniform(-0.5, 1.2) / time, 10.0 ** draw.uniform(-2.0, -0.1)
        real, imaginary = -damping * omega, omega * math.sqrt(1 - damping**2)
        poles = [*poles[:2], (real, imaginary), (real, -imaginary)]
    elif kind == "integrating":
        poles = [0.0, *poles[:2]]
    elif kind == "unstable":
        poles = [0.4 / time, *poles[:1]]
    elif kind == "equal":
        poles = [poles[0]] * int(draw.integers(2, 5))
    zeros = []
    if draw.random() < 0.35:
        zeros.append(draw.choice([-1.0, -1.0, 1.0]) / (time * 10.0 ** draw.uniform(-0.7, 0.4)))
    if draw.random() < 0.12 and len(poles) == 1 and not zeros:
        zeros.append(-1.0 / (time * 10.0 ** draw.uniform(-0.7, 0.4)))
    gain = math.prod([abs(complex(*p)) if isinstance(p, tuple) else abs(p) or 1.0 / time for p in poles])
    return factors(gain, zeros, poles), time


def _controller(draw: Any, pace: float, scan: Scan, gain: float) -> Controller:
    ti, td = pace * 10.0 ** draw.uniform(-0.3, 0.7), pace * 10.0 ** draw.uniform(-1.2, -0.2)
    tf = td * 10.0 ** draw.uniform(-1.3, -0.2)
    more: dict[str, Any] = {"scan": scan}
    if draw.random() < 0.3:
        more["measurement_filter_s"] = pace * 10.0 ** draw.uniform(-2.0, -0.3)
    if draw.random() < 0.5:
        more["setpoint_weight"] = SetpointWeight(
            proportional=float(draw.uniform(0, 1.2)), derivative=float(draw.choice([0.0, 1.0, 0.3]))
        )
    terms = draw.choice(["p", "pi", "pi", "pid", "pid", "i"])
    filtered = scan.method == "trapezoidal" or draw.random() < 0.7
    form = draw.choice(["ideal", "series", "parallel", "two_zeros"])
    d = (td, tf if filtered else None) if terms == "pid" else (None, None)
    integral = None if terms == "p" else ti
    if form == "ideal":
        return ideal(None if terms == "i" else gain, integral, *d, **more)
    if form == "series":
        return series(gain, integral, *d, **more)
    if form == "parallel":
        kd = gain * td if terms == "pid" else 0.0
        ki = 0.0 if terms == "p" else gain / ti
        if terms != "pid" and scan.method == "trapezoidal":
            return ideal(gain, integral, **more)
        return parallel(0.0 if terms == "i" else gain, ki, kd, d[1], **more)
    if terms in ("p", "pi", "i"):
        return two_zeros(gain, (-1.0 / ti,), **more)
    if draw.random() < 0.5:
        return two_zeros(gain * td, ((-0.8 / ti, 0.5 / ti), (-0.8 / ti, -0.5 / ti)), d[1], **more)
    return two_zeros(gain * td, (-1.0 / ti, -1.0 / td), d[1], **more)


def seeds(count: int, first: int = 0) -> Iterator[int]:
    """So many seeds."""
    yield from range(first, first + count)
