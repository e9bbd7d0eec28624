"""What can be said of a loop without computing its responses: facts on which sentences are built."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import numpy.typing as npt

from service.analysis.controller import Controller, Scan
from service.analysis.frequency import AxisResponse
from service.analysis.loop import EPSILON, ClosedLoopParts, Complexes
from service.analysis.realisation import StateSpace
from service.analysis.results import LoopFacts, Verdict
from service.analysis.stability import decide

ON_AXIS = 64 * EPSILON
"""A pole nearer to the axis than this, relatively, is taken to lie on it."""


def facts(
    parts: ClosedLoopParts, space: StateSpace | None, controller: Controller, verdict: Verdict
) -> LoopFacts:
    """The facts of a loop whose verdict is known."""
    plant_poles: Complexes = np.array(parts.plant.poles_rad_s, complex) * complex(parts.unit_rad_s)
    plant_zeros = np.array(parts.plant.zeros_rad_s, complex)
    terms = parts.controller.feedback
    integrates = bool(np.any(plant_poles == 0))
    unstable = bool(np.any(_right_of_axis(plant_poles)))
    times = 1.0 / np.abs(plant_poles[plant_poles != 0])
    times = times[np.isfinite(times)]
    return LoopFacts(
        plant_holds_in_manual=bool(np.all(plant_poles.real < -ON_AXIS * np.abs(plant_poles))),
        plant_integrates=integrates,
        plant_unstable=unstable,
        integral_action=terms.ki_per_s != 0,
        derivative_action=terms.kd_s != 0,
        derivative_filtered=terms.tf_s > 0,
        realisable=terms.kd_s == 0 or terms.tf_s > 0,
        plant_zeros_right_of_axis=int(np.count_nonzero(_right_of_axis(plant_zeros))),
        controller_zeros_right_of_axis=_controller_zeros_right(parts),
        hidden_roots=tuple(_plain(complex(root) * parts.unit_rad_s) for root in parts.hidden_roots),
        stable_with_other_action=_stable_with_other_action(parts, space) if verdict == "unstable" else None,
        fastest_plant_time_s=float(times.min()) if times.size else None,
        slowest_plant_time_s=float(times.max()) if times.size else None,
        integral_time_s=_ratio(terms.kp, terms.ki_per_s),
        derivative_time_s=_ratio(terms.kd_s, terms.kp),
        filter_time_s=terms.tf_s if terms.tf_s > 0 else None,
        dead_time_s=parts.dead_time_s,
        dead_time_reduced_by_s=parts.dead_time_reduced_by_s,
        dead_time_negative_by_s=parts.dead_time_negative_by_s,
        scan_interval_s=controller.scan.interval_s if isinstance(controller.scan, Scan) else None,
        ringing_filters=tuple(_ringing_filters(parts, controller)),
        assumed=tuple(_unknown_fields(controller)),
    )


def with_other_action(
    parts: ClosedLoopParts, space: StateSpace | None
) -> tuple[ClosedLoopParts, StateSpace | None]:
    """The same loop with the controller's action turned round."""
    loop = replace(parts.loop, sign=-parts.loop.sign)
    turned = replace(parts, loop=loop, direction=-parts.direction)
    if space is None:
        return turned, None
    return turned, replace(
        space, c_u=-space.c_u, d_u=-space.d_u, d_r=-space.d_r, setpoint_impulse=-space.setpoint_impulse
    )


def _ratio(above: float, below: float) -> float | None:
    """above/below where both terms are there and the ratio is a float64."""
    ratio = above / below if above > 0 and below > 0 else 0.0
    return ratio if 0 < ratio < math.inf else None


def _stable_with_other_action(parts: ClosedLoopParts, space: StateSpace | None) -> bool:
    turned, turned_space = with_other_action(parts, space)
    return decide(turned, turned_space, AxisResponse.of(turned.loop)).stability.verdict == "stable"


def _right_of_axis(roots: Complexes) -> npt.NDArray[np.bool_]:
    return np.asarray(roots.real > ON_AXIS * np.abs(roots))


def _controller_zeros_right(parts: ClosedLoopParts) -> int:
    zeros = np.array(parts.controller.zeros_rad_s, complex)
    return int(np.count_nonzero(_right_of_axis(zeros)))


def _ringing_filters(parts: ClosedLoopParts, controller: Controller) -> list[tuple[str, float]]:
    scan = controller.scan
    if not (isinstance(scan, Scan) and scan.method == "trapezoidal"):
        return []
    times = {
        "derivative": parts.controller.feedback.tf_s,
        "measured value": parts.measurement_filter / parts.unit_rad_s,
    }
    return [(of, time_s) for of, time_s in times.items() if 0 < time_s < 0.5 * scan.interval_s]


def _unknown_fields(controller: Controller) -> list[str]:
    names = ("derivative_filter", "measurement_filter_s", "setpoint_weight", "scan")
    return [name for name in names if getattr(controller, name) == "unknown"]


def _plain(root: complex) -> float | tuple[float, float]:
    return root.real if root.imag == 0 else (root.real, root.imag)
