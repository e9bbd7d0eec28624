"""What python-control finds on the same loop by its own means. Never a verdict.

The only importer of python-control in the service, and itself imported only where a second opinion is asked
for: the import takes seconds. The library gets the loop as ratios of polynomials in the loop's natural unit
of time, the dead time as a Padé approximation; where there is a scan it discretises them itself, and only the
part of the dead time that divides a scan is approximated. What follows from that, from its time grid and from
its definitions is its own, and `note` says so where the two differ.
"""

from __future__ import annotations

import math
import warnings
from dataclasses import dataclass
from typing import Literal

import control
import numpy as np

from service.analysis.controller import Scan
from service.analysis.loop import ClosedLoopParts, Reals
from service.analysis.results import Analysis, Quantity, SecondOpinion
from service.analysis.scan import Scanned
from service.analysis.terms import ParallelTerms

PADE_ORDER = 10
"""Order of the approximation. At 5 a resonance at ωθ = 5 is already off by more than 2 %, at 10 it is not."""

PADE_ORDER_IN_A_SCAN = 5
"""Order for a part of a scan, up to the Nyquist frequency."""

MAX_WHOLE_SCANS = 40
"""With more scans of dead time the library's polynomials in z have no trustworthy roots."""

NO_GAIN = 1e-6
"""A crossing at a smaller factor is that of integral action at frequency 0, which the library rounds."""

RELATIVE_TOLERANCE = 0.02
ABSOLUTE_TOLERANCES = {"phase_margin_deg": 1.0, "overshoot_percent": 1.0}
"""The library agrees within 2 %, or within 1° or 1 point: the measure that claims are held to."""

LIBRARY = "python-control"
_WORDS = {
    "verdict": "verdict",
    "unstable_roots": "the number of unstable roots",
    "gain_margin": "gain margin",
    "gain_reduction_margin": "gain reduction margin",
    "phase_margin_deg": "phase margin",
    "max_sensitivity": "maximum sensitivity",
    "overshoot_percent": "overshoot",
    "settling_time_s": "settling time",
}

Outcome = Literal["agrees", "differs", "not_available"]
Values = dict[str, float | str | None]


@dataclass(frozen=True, eq=False)
class _Polynomials:
    """L = numerator/denominator, PV/SP = setpoint/(numerator + denominator); highest power first."""

    numerator: Reals
    denominator: Reals
    setpoint: Reals

    @property
    def characteristic(self) -> Reals:
        """Numerator plus denominator, whose roots are the closed loop's poles."""
        return np.trim_zeros(np.asarray(np.polyadd(self.numerator, self.denominator), dtype=np.float64), "f")


def second_opinion(
    parts: ClosedLoopParts, scan: Scan | None, recomputed: Analysis, settling_band_percent: float
) -> SecondOpinion:
    """Ask python-control about the loop that `recomputed` is about, and compare.

    Values that the library cannot give are None; a loop on which it fails altogether is `not_available`.
    """
    try:
        approximation = _approximation(parts, scan)
        unfit = None if scan is None else _unfit_at_scans(parts, scan)
    except ArithmeticError:
        approximation, unfit = None, "the scan interval leaves the range of float64"
    if unfit is not None:
        return _opinion(approximation, {}, "not_available", unfit)
    try:
        values = (
            _values(parts, settling_band_percent)
            if scan is None
            else _values_at_scans(parts, scan, settling_band_percent)
        )
    except Exception as failure:  # whatever a library of this size raises is an answer, not a fault of ours
        note = f"the library could not analyse this loop ({type(failure).__name__})"
        return _opinion(approximation, {}, "not_available", note)
    differing = _differing(values, recomputed, 0.0 if scan is None else scan.interval_s)
    if not differing:
        return _opinion(approximation, values, "agrees", "within 2 %, 1 degree and 1 point of overshoot")
    return _opinion(approximation, values, "differs", _reason(differing, approximation, scan, recomputed))


def _approximation(parts: ClosedLoopParts, scan: Scan | None) -> str | None:
    if scan is None:
        order = f"Padé approximation of order {PADE_ORDER}"
        return f"dead time by a {order}" if parts.dead_time > 0 else None
    discretised = "zero-order hold and controller discretised by the library"
    if _delay(parts, scan)[1] == 0:
        return discretised
    order = f"Padé approximation of order {PADE_ORDER_IN_A_SCAN}"
    return f"{discretised}, the part of the dead time that divides a scan by a {order}"


def _delay(parts: ClosedLoopParts, scan: Scan) -> tuple[int, float]:
    """Whole scans of delay, and the rest in the loop's unit."""
    return Scanned.of(parts, scan).split_delay()


def _unfit_at_scans(parts: ClosedLoopParts, scan: Scan) -> str | None:
    """Why the library cannot be asked about this loop at its scans, None where it can."""
    if _delay(parts, scan)[0] > MAX_WHOLE_SCANS:
        return "the dead time is too many scans long for its polynomials"
    if len(parts.plant.zeros_rad_s) == len(parts.plant.poles_rad_s):
        return "it reads PV after the new output is put out, which matters in a plant that answers at once"
    return None


def _values_at_scans(parts: ClosedLoopParts, scan: Scan, settling_band_percent: float) -> Values:
    with warnings.catch_warnings(), np.errstate(all="ignore"):
        warnings.simplefilter("ignore")
        interval = scan.interval_s * parts.unit_rad_s
        whole, fraction = _delay(parts, scan)
        plant = control.tf(*_plant(parts))
        if fraction > 0:
            plant = plant * control.tf(*control.pade(fraction * interval, PADE_ORDER_IN_A_SCAN))
        held = control.sample_system(plant, interval, method="zoh")
        held = held * control.tf([1.0], [1.0] + [0.0] * whole, interval)
        method = "tustin" if scan.method == "trapezoidal" else "backward_diff"
        integrates = any(pole == 0 for pole in parts.controller.poles_rad_s)
        denominator = _controller_denominator(parts, integrates)
        filtered = np.array([parts.measurement_filter, 1.0])
        feedback, setpoint = (
            control.sample_system(control.tf(_path(terms, integrates), below), interval, method=method)
            for terms, below in (
                (parts.feedback, _product(denominator, filtered)),
                (parts.setpoint, denominator),
            )
        )
        loop = feedback * held
        characteristic = np.polyadd(loop.num[0][0], loop.den[0][0])
        unstable = int(np.count_nonzero(np.abs(np.roots(characteristic)) >= 1.0))
        values: Values = {
            "verdict": "unstable" if unstable else "stable",
            "unstable_roots": float(unstable),
        }
        if unstable == 0:
            values |= _margins(loop)
            # as state spaces: multiplied out, the closed loop's polynomials lose all digits of a short scan
            behind, before, back = (control.ss(system) for system in (held, setpoint, feedback))
            closed = control.feedback(behind, back) * before
            values |= _step_metrics(closed, settling_band_percent, parts.unit_rad_s)
    return values


def _opinion(approximation: str | None, values: Values, outcome: Outcome, note: str) -> SecondOpinion:
    return SecondOpinion(
        library=LIBRARY,
        version=control.__version__,
        approximation=approximation,
        values=values,
        outcome=outcome,
        note=note,
    )


def _values(parts: ClosedLoopParts, settling_band_percent: float) -> Values:
    # the library warns of conditioning and of crossings that do not exist; both show in its values
    with warnings.catch_warnings(), np.errstate(all="ignore"):
        warnings.simplefilter("ignore")
        polynomials = _polynomials(parts)
        roots = np.roots(polynomials.characteristic)
        unstable = int(np.count_nonzero(roots.real >= 0))
        values: Values = {
            "verdict": "unstable" if unstable else "stable",
            "unstable_roots": float(unstable),
        }
        if unstable == 0:
            values |= _margins(control.tf(polynomials.numerator, polynomials.denominator))
            closed = control.tf(polynomials.setpoint, polynomials.characteristic)
            values |= _step_metrics(closed, settling_band_percent, parts.unit_rad_s)
    return values


def _polynomials(parts: ClosedLoopParts) -> _Polynomials:
    """The loop multiplied out, every factor kept: what is hidden in L stays in its poles."""
    integrates = any(pole == 0 for pole in parts.controller.poles_rad_s)
    plant_zeros, plant_poles = _plant(parts)
    filter_poles = np.array([parts.measurement_filter, 1.0])
    controller_poles = _controller_denominator(parts, integrates)
    delay, delay_denominator = np.ones(1), np.ones(1)
    if parts.dead_time > 0:
        delay, delay_denominator = (np.array(side) for side in control.pade(parts.dead_time, PADE_ORDER))
    numerator = _product(_path(parts.feedback, integrates), plant_zeros, delay)
    denominator = _product(controller_poles, filter_poles, plant_poles, delay_denominator)
    setpoint = _product(_path(parts.setpoint, integrates), plant_zeros, delay, filter_poles)
    return _Polynomials(numerator, denominator, setpoint)


def _plant(parts: ClosedLoopParts) -> tuple[Reals, Reals]:
    """Numerator, direction in it, and denominator of the plant without dead time."""
    zeros = np.real(np.poly(np.array(parts.plant.zeros_rad_s)))
    return parts.direction * parts.plant.gain * np.atleast_1d(zeros), np.atleast_1d(
        np.real(np.poly(np.array(parts.plant.poles_rad_s)))
    )


def _controller_denominator(parts: ClosedLoopParts, integrates: bool) -> Reals:
    return np.array([parts.feedback.tf_s, 1.0, 0.0][: 3 if integrates else 2])


def _path(terms: ParallelTerms, integrates: bool) -> Reals:
    """Kp + Ki/s + Kd·s/(1+Tf·s) over s·(1+Tf·s), or over 1+Tf·s where there is no integral action."""
    square, linear = terms.kd_s + terms.kp * terms.tf_s, terms.kp + terms.ki_per_s * terms.tf_s
    return np.array([square, linear, terms.ki_per_s] if integrates else [square, linear])


def _product(*polynomials: Reals) -> Reals:
    total = np.ones(1)
    for polynomial in polynomials:
        total = np.convolve(total, polynomial)
    return np.trim_zeros(total, "f")


def _margins(loop: control.TransferFunction) -> Values:
    """The library lists every crossing; which of them is the margin is by our definition, not by its own."""
    factors, phases_deg, distances, *_ = control.stability_margins(loop, returnall=True)
    every = [float(factor) for factor in factors]
    if loop.isdtime(strict=True) and (at_nyquist := float(loop(-1.0).real)) < 0:
        # it lists no crossing at the Nyquist frequency, where L is real
        every.append(-1.0 / at_nyquist)
    above = [factor for factor in every if factor > 1]
    below = [factor for factor in every if NO_GAIN < factor < 1]
    return {
        "gain_margin": _told(min(above, default=math.inf)),
        "gain_reduction_margin": _told(max(below, default=math.inf)),
        "phase_margin_deg": _told(min((abs(float(phase)) for phase in phases_deg), default=math.inf)),
        "max_sensitivity": _told(1.0 / min((float(distance) for distance in distances), default=math.nan)),
    }


def _step_metrics(
    closed: control.TransferFunction, settling_band_percent: float, unit_rad_s: float
) -> Values:
    try:
        found = control.step_info(closed, SettlingTimeThreshold=settling_band_percent / 100.0)
    except Exception:  # it indexes past the end of its grid where a response has not settled there
        return {"overshoot_percent": None, "settling_time_s": None}
    return {
        "overshoot_percent": _told(float(found["Overshoot"])),
        "settling_time_s": _told(float(found["SettlingTime"]) / unit_rad_s),
    }


def _told(value: float) -> float | str | None:
    if math.isnan(value):
        return None
    return "unbounded" if math.isinf(value) else value


def _differing(values: Values, recomputed: Analysis, scan_s: float) -> list[str]:
    """The names on which the two differ; what either of them does not say is not compared."""
    ours = _ours(recomputed)
    return [
        name
        for name, ours_is in ours.items()
        if name in values and _differ(name, values[name], ours_is, scan_s)
    ]


def _ours(recomputed: Analysis) -> dict[str, Quantity | str]:
    found: dict[str, Quantity | str] = {
        "verdict": recomputed.stability.verdict,
        "unstable_roots": recomputed.stability.unstable_roots,
    }
    margins, step = recomputed.margins, recomputed.setpoint_step
    if margins is not None:
        for name in ("gain_margin", "gain_reduction_margin", "phase_margin_deg", "max_sensitivity"):
            found[name] = getattr(margins, name)
    if step is not None:
        found["overshoot_percent"] = step.overshoot_percent
        found["settling_time_s"] = None if step.settling_time_sensitive else step.settling_time_s
    return found


def _differ(name: str, theirs: float | str | None, ours: Quantity | str, scan_s: float) -> bool:
    if theirs is None or ours is None:
        return False
    if name == "unstable_roots" and ours == "unbounded":
        return theirs == 0.0  # no approximation of finite order has infinitely many roots
    if isinstance(theirs, str) or isinstance(ours, str):
        return theirs != ours
    allowed = max(RELATIVE_TOLERANCE * abs(ours), ABSOLUTE_TOLERANCES.get(name, 0.0))
    if name == "settling_time_s":
        # the library sees a scanned loop at its scans alone
        allowed = max(allowed, scan_s)
    return abs(theirs - ours) > allowed


def _reason(differing: list[str], approximation: str | None, scan: Scan | None, recomputed: Analysis) -> str:
    causes = []
    if recomputed.stability.verdict == "undecided":
        causes.append("here the verdict is undecided, which the library does not know")
    if approximation is not None and "Padé" in approximation:
        causes.append("the library approximates the dead time, here it is exact")
    if {"overshoot_percent", "settling_time_s"} & set(differing):
        causes.append(
            "the library reads a response off a grid of times, here its turns are solved for"
            if scan is None
            else "the library sees PV at the scans alone, here it is followed between them"
        )
    if "max_sensitivity" in differing:
        causes.append("the library looks for a peak within the frequency axis, here its ends count")
    if scan is not None and set(differing) - {"overshoot_percent", "settling_time_s"}:
        causes.append("its polynomials in z lose digits where the scan is short")
    if not causes:
        causes.append("neither approximates, so have the loop looked at before signing")
    return f"differs in {' and '.join(_WORDS[name] for name in differing)} ({'; '.join(causes)})"
