"""What python-control finds on the same loop by its own means. Never a verdict.

The only importer of python-control in the service, and itself imported only where a second opinion is asked
for: the import takes seconds. The library gets the loop as ratios of polynomials in the loop's natural unit
of time, the dead time as a Padé approximation; what follows from that, from its time grid and from its
definitions is its own, and `note` says so where the two differ.
"""

from __future__ import annotations

import math
import warnings
from dataclasses import dataclass
from typing import Literal

import control
import numpy as np

from service.analysis.loop import ClosedLoopParts, Reals
from service.analysis.results import Analysis, Quantity, SecondOpinion
from service.analysis.terms import ParallelTerms

PADE_ORDER = 10
"""Order of the approximation. At 5 a resonance at ωθ = 5 is already off by more than 2 %, at 10 it is not."""

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
    parts: ClosedLoopParts, recomputed: Analysis, settling_band_percent: float
) -> SecondOpinion:
    """Ask python-control about the loop that `recomputed` is about, and compare.

    Values that the library cannot give are None; a loop on which it fails altogether is `not_available`.
    """
    approximation = (
        f"dead time by a Padé approximation of order {PADE_ORDER}" if parts.dead_time > 0 else None
    )
    try:
        values = _values(parts, settling_band_percent)
    except Exception as failure:  # whatever a library of this size raises is an answer, not a fault of ours
        note = f"the library could not analyse this loop ({type(failure).__name__})"
        return _opinion(approximation, {}, "not_available", note)
    differing = _differing(values, recomputed)
    if not differing:
        return _opinion(approximation, values, "agrees", "within 2 %, 1 degree and 1 point of overshoot")
    return _opinion(approximation, values, "differs", _reason(differing, approximation, recomputed))


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
            values |= _margins(polynomials)
            values |= _step_metrics(polynomials, settling_band_percent, parts.unit_rad_s)
    return values


def _polynomials(parts: ClosedLoopParts) -> _Polynomials:
    """The loop multiplied out, every factor kept: what is hidden in L stays in its poles."""
    integrates = any(pole == 0 for pole in parts.controller.poles_rad_s)
    plant_zeros = parts.direction * parts.plant.gain * np.real(np.poly(np.array(parts.plant.zeros_rad_s)))
    plant_poles = np.real(np.poly(np.array(parts.plant.poles_rad_s)))
    filter_poles = np.array([parts.measurement_filter, 1.0])
    controller_poles = np.array([parts.feedback.tf_s, 1.0, 0.0][: 3 if integrates else 2])
    delay, delay_denominator = np.ones(1), np.ones(1)
    if parts.dead_time > 0:
        delay, delay_denominator = (np.array(side) for side in control.pade(parts.dead_time, PADE_ORDER))
    numerator = _product(_path(parts.feedback, integrates), plant_zeros, delay)
    denominator = _product(controller_poles, filter_poles, plant_poles, delay_denominator)
    setpoint = _product(_path(parts.setpoint, integrates), plant_zeros, delay, filter_poles)
    return _Polynomials(numerator, denominator, setpoint)


def _path(terms: ParallelTerms, integrates: bool) -> Reals:
    """Kp + Ki/s + Kd·s/(1+Tf·s) over s·(1+Tf·s), or over 1+Tf·s where there is no integral action."""
    square, linear = terms.kd_s + terms.kp * terms.tf_s, terms.kp + terms.ki_per_s * terms.tf_s
    return np.array([square, linear, terms.ki_per_s] if integrates else [square, linear])


def _product(*polynomials: Reals) -> Reals:
    total = np.ones(1)
    for polynomial in polynomials:
        total = np.convolve(total, polynomial)
    return np.trim_zeros(total, "f")


def _margins(polynomials: _Polynomials) -> Values:
    """The library lists every crossing; which of them is the margin is by our definition, not by its own."""
    loop = control.tf(polynomials.numerator, polynomials.denominator)
    factors, phases_deg, distances, *_ = control.stability_margins(loop, returnall=True)
    above = [float(factor) for factor in factors if factor > 1]
    below = [float(factor) for factor in factors if 0 < factor < 1]
    return {
        "gain_margin": _told(min(above, default=math.inf)),
        "gain_reduction_margin": _told(max(below, default=math.inf)),
        "phase_margin_deg": _told(min((abs(float(phase)) for phase in phases_deg), default=math.inf)),
        "max_sensitivity": _told(1.0 / min((float(distance) for distance in distances), default=math.nan)),
    }


def _step_metrics(polynomials: _Polynomials, settling_band_percent: float, unit_rad_s: float) -> Values:
    closed = control.tf(polynomials.setpoint, polynomials.characteristic)
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


def _differing(values: Values, recomputed: Analysis) -> list[str]:
    """The names on which the two differ; what either of them does not say is not compared."""
    ours = _ours(recomputed)
    return [name for name, ours_is in ours.items() if name in values and _differ(name, values[name], ours_is)]


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


def _differ(name: str, theirs: float | str | None, ours: Quantity | str) -> bool:
    if theirs is None or ours is None:
        return False
    if name == "unstable_roots" and ours == "unbounded":
        return theirs == 0.0  # no approximation of finite order has infinitely many roots
    if isinstance(theirs, str) or isinstance(ours, str):
        return theirs != ours
    allowed = max(RELATIVE_TOLERANCE * abs(ours), ABSOLUTE_TOLERANCES.get(name, 0.0))
    return abs(theirs - ours) > allowed


def _reason(differing: list[str], approximation: str | None, recomputed: Analysis) -> str:
    causes = []
    if recomputed.stability.verdict == "undecided":
        causes.append("here the verdict is undecided, which the library does not know")
    if approximation is not None:
        causes.append("the library approximates the dead time, here it is exact")
    if {"overshoot_percent", "settling_time_s"} & set(differing):
        causes.append("the library reads a response off a grid of times, here its turns are solved for")
    if "max_sensitivity" in differing:
        causes.append("the library looks for a peak within the frequency axis, here its ends count")
    if not causes:
        causes.append("neither approximates, so have the loop looked at before signing")
    return f"differs in {' and '.join(_WORDS[name] for name in differing)} ({'; '.join(causes)})"
