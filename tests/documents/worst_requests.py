"""Requests that took longest, or most memory, of all that a fuzz over float64 has found; each as it is now.

They are no loops of a plant. `tests/benchmarks/test_worst_requests.py` prints what they take.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from service.analysis import codes

Json = dict[str, Any]


@dataclass(frozen=True)
class WorstRequest:
    """A request, its verdict with the reason where it is undecided, and what could not be computed.

    `notes` of the continuous analysis, `notes_at_scans` of the sampled one, None where there is none.
    """

    name: str
    plant_model: Json
    controller: Json
    verdict: str
    notes: tuple[str, ...] = ()
    notes_at_scans: tuple[str, ...] | None = None
    reason: str | None = None
    include: tuple[str, ...] = ("curves",)

    @property
    def document(self) -> Json:
        """The request as it is sent."""
        return {
            "plant_model": self.plant_model,
            "controller": self.controller,
            "include": list(self.include),
        }


def _gain(value: float) -> Json:
    return {"value": value, "unit": "gain"}


def _seconds(value: float) -> Json:
    return {"value": value, "unit": "seconds"}


def _order_20(dead_time_s: float) -> Json:
    """Ten light resonances side by side, under a dead time that its own fastest crossover turns often."""
    pairs = [[-0.01 * (n + 1), 1.0 + 0.05 * n] for n in range(10)]
    poles = [pole for real, imag in pairs for pole in ([real, imag], [real, -imag])]
    return {
        "kind": "zeros_poles_gain",
        "zeros_rad_s": [],
        "poles_rad_s": poles,
        "gain": 1000.0,
        "dead_time_s": dead_time_s,
    }


def _points(dead_time_s: float) -> Json:
    """2000 points of a lag, evenly spaced, so that dead time turns L as often between any two of them."""
    omega = [0.01 * (n + 1) for n in range(2000)]
    lag = [1.0 / complex(1.0, 3.0 * w) for w in omega]
    return {
        "kind": "frequency_response",
        "frequencies_rad_s": omega,
        "response": [[value.real, value.imag] for value in lag],
        "unstable_poles": 0,
        "dead_time_s": dead_time_s,
    }


TOO_SLOW = codes.TOO_SLOW
NO_DELAY_MARGIN = codes.DELAY_MARGIN
NO_CONTROL_SENSITIVITY = codes.CONTROL_TOO_MUCH_WORK

WORST: tuple[WorstRequest, ...] = (
    WorstRequest(
        # 6.4 s and 680 MiB before the values of a response were counted
        "an oscillation that never dies, scanned slowly",
        {
            "kind": "second_order",
            "gain": 1.6e-4,
            "natural_frequency_rad_s": 0.649,
            "damping_ratio": 0.0,
            "dead_time_s": 3.84,
        },
        {
            "form": "parallel",
            "action": "reverse",
            "proportional": _gain(0.0144),
            "integral": _seconds(50.4),
            "derivative": {"value": 157.0, "unit": "gain_seconds"},
            "derivative_filter": _seconds(5514.0),
            "scan": {"interval_s": 22.875368383830605},
        },
        "unstable",
        notes_at_scans=(TOO_SLOW,),
    ),
    WorstRequest(
        # 6.3 s and 860 MiB
        "two light resonances, one scanned every hundred of its turns",
        {
            "kind": "zeros_poles_gain",
            "zeros_rad_s": [80.9],
            "poles_rad_s": [[0.0, 981.6], [0.0, -981.6], [-4.9e-4, 74.5], [-4.9e-4, -74.5]],
            "gain": 0.0042,
            "dead_time_s": 0.0063,
        },
        {
            "form": "series",
            "action": "direct",
            "proportional": _gain(42.15),
            "integral": _seconds(177.8),
            "measurement_filter_s": 0.0214,
            "scan": {"interval_s": 0.8926932452865985, "output_delay_s": 0.7018529857382103},
        },
        "stable",
        notes=(TOO_SLOW,),
        notes_at_scans=(NO_DELAY_MARGIN, TOO_SLOW),
    ),
    WorstRequest(
        # 2.9 s and 540 MiB
        "a resonance of thousands of turns in a dead time of thousands of scans",
        {
            "kind": "zeros_poles_gain",
            "zeros_rad_s": [],
            "poles_rad_s": [[-0.0386, 481.1], [-0.0386, -481.1]],
            "gain": 9.03e-4,
            "dead_time_s": 412.7,
        },
        {
            "form": "ideal",
            "action": "reverse",
            "proportional": _gain(1.98),
            "integral": _seconds(632.3),
            "scan": {"interval_s": 0.1337},
        },
        "stable",
        notes=(TOO_SLOW,),
        notes_at_scans=(NO_DELAY_MARGIN, TOO_SLOW),
    ),
    WorstRequest(
        # 2.2 s and 340 MiB
        "a derivative filter of 1e-9 s under 1082 s of dead time",
        {
            "kind": "transfer_function",
            "numerator": [-0.0319],
            "denominator": [147.7, 0.366],
            "dead_time_s": 1081.7,
        },
        {
            "form": "ideal",
            "action": "direct",
            "proportional": _gain(0.0414),
            "integral": _seconds(12.13),
            "derivative": _seconds(989.3),
            "derivative_filter": _seconds(1e-9),
        },
        "stable",
        notes=(TOO_SLOW, NO_CONTROL_SENSITIVITY),
        include=("curves", "second_opinion"),
    ),
    WorstRequest(
        # 0.7 s and 130 MiB
        "a filter of 0.2 ms under 78 s of dead time",
        {
            "kind": "first_order",
            "gain": 6e-4,
            "time_constant_s": 17.32,
            "dead_time_s": 77.65,
        },
        {
            "form": "two_zeros",
            "action": "reverse",
            "gain": 9.21,
            "zeros_rad_s": [[-0.371, 0.361], [-0.371, -0.361]],
            "derivative_filter": _seconds(1.6e-4),
        },
        "stable",
        notes=(NO_CONTROL_SENSITIVITY,),
    ),
    WorstRequest(
        # asked for 200 GiB
        "a dead time of billions of scans behind a filter that lets nothing through",
        {"kind": "state_space", "a": [[-199.5]], "b": [0.001026], "c": [4079.9], "dead_time_s": 6.449},
        {
            "form": "ideal",
            "action": "direct",
            "proportional": _gain(0.7626),
            "derivative": _seconds(1e9),
            "derivative_filter": _seconds(0.002464),
            "measurement_filter_s": 1e20,
            "scan": {"interval_s": 1e-9, "method": "trapezoidal", "output_delay_s": 0.3595},
        },
        "stable",
        notes=(TOO_SLOW, codes.NUMBERS),
        notes_at_scans=(TOO_SLOW,),
    ),
    WorstRequest(
        "order 20 at the bound on nodes",
        _order_20(290.0),
        {"form": "ideal", "action": "reverse", "proportional": _gain(1.0)},
        "unstable",
    ),
    WorstRequest(
        "order 20 past the bound on nodes",
        _order_20(2900.0),
        {"form": "ideal", "action": "reverse", "proportional": _gain(1.0)},
        "undecided",
        reason="the dead time is too long against the loop's fastest gain crossover for the roots to be "
        "computed",
    ),
    WorstRequest(
        "a loop that is at rest after 38,000 scans",
        {"kind": "first_order", "gain": 1.0, "time_constant_s": 10.0, "dead_time_s": 2.0},
        {
            "form": "ideal",
            "action": "reverse",
            "proportional": _gain(2.0),
            "integral": _seconds(10.0),
            "scan": {"interval_s": 0.006},
        },
        "stable",
        notes_at_scans=(),
    ),
    WorstRequest(
        # 1.2 s and 440 MiB
        "2000 points under a dead time that turns L nearly a hundred times between two of them",
        _points(5.8e4),
        {
            "form": "ideal",
            "action": "reverse",
            "proportional": _gain(1.0),
            "integral": _seconds(3.0),
        },
        "undecided",
        reason="the dead time turns L too often between the points",
    ),
)
