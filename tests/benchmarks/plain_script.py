"""A loop recomputed by python-control in the plain way: what an engineer's own script does.

Dead time as a Padé approximation of order 5, `stability_margins`, the poles of the closed loop, `step_info`
of set point and load, and the peak of abs S on 2000 frequencies.
"""

from __future__ import annotations

import warnings
from dataclasses import dataclass
from typing import Any

import control
import numpy as np

from tests.checks.loops import CheckLoop

PADE_ORDER = 5
FREQUENCIES = 2000


@dataclass(frozen=True)
class PlainLoop:
    """Plant, without its dead time, and controller as transfer functions."""

    plant: Any
    controller: Any
    dead_time_s: float

    @staticmethod
    def of(loop: CheckLoop) -> PlainLoop:
        """The loop as one would type it in; not part of what is timed."""
        document, terms = loop.request["plant_model"], loop.request["controller"]
        kc, ti = terms["proportional"]["value"], terms["integral"]["value"]
        td = terms["derivative"]["value"] if terms["derivative"] else 0.0
        tf = td / terms["derivative_filter"]["value"] if terms["derivative_filter"] else 0.0
        numerator, denominator = [kc * ti * (td + tf), kc * (ti + tf), kc], [ti * tf, ti, 0.0]
        controller = control.tf(np.trim_zeros(numerator, "f"), np.trim_zeros(denominator, "f"))
        return PlainLoop(_plant(document), controller, document["dead_time_s"])


def recompute_plainly(loop: PlainLoop) -> dict[str, Any]:
    """Everything of the script; a part that the library fails on is None."""
    plant = loop.plant
    if loop.dead_time_s > 0:
        plant = plant * control.tf(*control.pade(loop.dead_time_s, PADE_ORDER))
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        opened = loop.controller * plant
        closed, disturbed = control.feedback(opened, 1), control.feedback(plant, loop.controller)
        margins = control.stability_margins(opened)
        poles = closed.poles()
        found = {
            "stable": bool(np.all(poles.real < 0)),
            "gain_margin": margins[0],
            "phase_margin_deg": margins[1],
            "setpoint_step": _step_info(closed),
            "load_step": _step_info(disturbed),
        }
        centre = np.log10(np.median(np.abs(poles)))
        omega = np.logspace(centre - 3.0, centre + 3.0, FREQUENCIES)
        found["max_sensitivity"] = float(np.max(1.0 / np.abs(1.0 + opened(1j * omega))))
    return found


def _step_info(system: Any) -> Any:
    try:
        return control.step_info(system)
    except (IndexError, ValueError):
        # known of 0.10: a response that does not come to rest on the grid
        return None


def _plant(document: dict[str, Any]) -> Any:
    match document["kind"]:
        case "first_order":
            return control.tf([document["gain"]], [document["time_constant_s"], 1.0])
        case "second_order" if "time_constants_s" in document:
            first, second = document["time_constants_s"]
            return control.tf([document["gain"]], [first * second, first + second, 1.0])
        case "second_order":
            rad_s, damping = document["natural_frequency_rad_s"], document["damping_ratio"]
            return control.tf([document["gain"]], [1.0 / rad_s**2, 2.0 * damping / rad_s, 1.0])
        case "integrating":
            return control.tf([document["gain_per_s"]], [document["lag_s"], 1.0, 0.0])
        case "transfer_function":
            return control.tf(document["numerator"], document["denominator"])
    raise ValueError(document["kind"])
