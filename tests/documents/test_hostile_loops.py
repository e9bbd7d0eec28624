"""Loops that no plant has: each is answered or refused by name, in bounded work, never with inf or nan."""

from __future__ import annotations

import json
from typing import Any

import numpy as np
import pytest

from service.documents.canonical import canonical_bytes
from service.documents.errors import InvalidDocument
from service.documents.reading import read
from service.documents.recomputations import RecomputationRequest, answer
from service.documents.writing import plain, to_bytes
from tests.documents.worst_requests import WORST, WorstRequest

PI = {
    "form": "ideal",
    "action": "reverse",
    "proportional": {"value": 1.0, "unit": "gain"},
    "integral": {"value": 10.0, "unit": "seconds"},
}
LAG = {"kind": "first_order", "gain": 1.0, "time_constant_s": 10.0, "dead_time_s": 1.0}
RESONANCE = {"kind": "second_order", "gain": 1.0, "natural_frequency_rad_s": 1.0, "damping_ratio": 1e-9}
BOX = {"uncertainty": {"gain": [0.8, 1.2], "dead_time": [0.5, 2.0]}}
POINTS = {"kind": "frequency_response", "frequencies_rad_s": [0.1, 1.0, 10.0], "unstable_poles": 0}


def scanned(interval_s: float, output_delay_s: float = 0.0, method: str = "backward_difference") -> Any:
    scan = {"interval_s": interval_s, "output_delay_s": output_delay_s, "method": method}
    return PI | {"scan": scan}


def numbers_of_every_size() -> list[list[float]]:
    """A matrix on which LAPACK does not end once a mode is split off: what is left of it has overflown."""
    drawn = np.random.default_rng(9)
    matrix = 10.0 ** drawn.uniform(-4, 4, (6, 6)) * drawn.choice([-1.0, 1.0], (6, 6))
    at_an_end = drawn.random((6, 6)) < 0.08
    return np.where(at_an_end, drawn.choice([0.0, 1e300, 1.7e308], (6, 6)), matrix).tolist()


HOSTILE: dict[str, tuple[Any, Any]] = {
    "a scan for ever": (LAG, scanned(1.7e308)),
    "a scan for ever, trapezoidal": (LAG, scanned(1.7e308, method="trapezoidal")),
    "a scan in no time": (LAG, scanned(1e-20)),
    "a controller whose gain is the least number there is, and a box": (
        {"kind": "first_order", "gain": -1e-3, "time_constant_s": 12.0, "dead_time_s": 0.03, **BOX},
        {**PI, "proportional": {"value": 5e-324, "unit": "gain"}},
    ),
    "a plant of nearly no gain behind a controller of all there is": (
        {"kind": "first_order", "gain": 5e-324, "time_constant_s": 0.1, "dead_time_s": 1.2, **BOX},
        {**PI, "proportional": {"value": 1.7e308, "unit": "gain"}},
    ),
    "a loop that only 1e22 scans of delay would lose": (
        {"kind": "first_order", "gain": 267.2, "time_constant_s": 0.00438},
        {
            **scanned(1.3765),
            "proportional": {"value": 1e-20, "unit": "gain"},
            "integral": {"value": 0.0162, "unit": "seconds"},
        },
    ),
    "more hidden roots than eigenvalues that are numbers": (
        {
            "kind": "state_space",
            "a": [[798.0, 0.0, -545.0], [4.07, -1e300, 0.1], [1e-300, 0.0047, 1e-300]],
            "b": [-109.0, -0.05, 0.0],
            "c": [-551.0, 50.3, -186.0],
            "d": 0.1157,
            "dead_time_s": 0.7925,
            **BOX,
        },
        {
            **PI,
            "integral": {"value": 1e300, "unit": "seconds"},
            "scan": {"interval_s": 3.5855, "output_delay_s": 0.0029},
        },
    ),
    "a pair of zeros that rounding makes one": (
        {
            "kind": "state_space",
            "a": [[1e20, -0.029528934435297357], [1.3597820229114452, 1e20]],
            "b": [-6.577712356781084, 0.04249147270959437],
            "c": [0.004469234085351975, 6.228455928834663],
            "d": 114.55613965272322,
        },
        scanned(885.0),
    ),
    "a gain of all there is alone": (
        {"kind": "transfer_function", "numerator": [80.5], "denominator": [31.4]},
        {"form": "ideal", "action": "reverse", "proportional": {"value": 1.7e308, "unit": "gain"}},
    ),
    "a root beyond float64": (
        {"kind": "transfer_function", "numerator": [-1e300], "denominator": [71.5]},
        {
            "form": "ideal",
            "action": "direct",
            "proportional": {"value": 0.0075, "unit": "gain"},
            "integral": {"value": 0.046, "unit": "seconds"},
            "measurement_filter_s": 1e-20,
        },
    ),
    "an integral time of which float64 has no reciprocal": (
        LAG,
        {
            "form": "parallel",
            "action": "reverse",
            "integral": {"value": 1.4248440330120615e308, "unit": "minutes"},
        },
    ),
    "a delay of more scans than there are whole numbers in float64": (
        {"kind": "integrating", "gain_per_s": 0.5, "dead_time_s": 3.0},
        {
            "form": "two_zeros",
            "action": "direct",
            "gain": 0.2,
            "zeros_rad_s": [[-75.0, 0.06], [-75.0, -0.06]],
            "derivative_filter": {"value": 0.003, "unit": "seconds"},
            "scan": {"interval_s": 158.0, "output_delay_s": 1e300},
        },
    ),
    "a delay of very many scans": (LAG, scanned(1.0, 1e300)),
    "a scan for longer than its plant can be told": (
        {"kind": "integrating", "gain_per_s": 0.4, "lag_s": 0.0, "dead_time_s": 0.043},
        {
            "form": "two_zeros",
            "action": "reverse",
            "gain": 4.8,
            "zeros_rad_s": [-2.136, -0.00997],
            "derivative_filter": {"value": 1e-300, "unit": "seconds"},
            "scan": {"interval_s": 1e20, "output_delay_s": 6105.0},
        },
    ),
    "a crossover that no division of a scan is near": (
        {
            "kind": "transfer_function",
            "numerator": [0.03232409304563535],
            "denominator": [1.0, 1.3292289550487362, 76.22945326542556, 101.3263965079381],
            "dead_time_s": 1e-300,
        },
        {
            "form": "series",
            "action": "reverse",
            "proportional": {"value": 13.593726160500143, "unit": "gain"},
            "scan": {"interval_s": 1.883195810847447, "method": "trapezoidal"},
        },
    ),
    "a scan very long against an oscillation that hardly dies": (RESONANCE, scanned(1e12)),
    "a gain at the end of float64, scanned": (LAG | {"gain": 1.7e308}, scanned(1.0)),
    "a gain near nothing, scanned": (LAG | {"gain": 5e-324}, scanned(1.0)),
    "an integral of next to no action at a scan": (
        LAG,
        scanned(1.0) | {"integral": {"value": 1e17, "unit": "seconds"}},
    ),
    "a dead time with no phase in float64": (LAG | {"dead_time_s": 1e300}, PI),
    "a dead time without a phase under integral action twice": (
        {"kind": "integrating", "gain_per_s": -2.0, "lag_s": 0.0, "dead_time_s": 1.7e308},
        {
            "form": "parallel",
            "action": "direct",
            "proportional": {"value": 20.0, "unit": "gain"},
            "integral": {"value": 5.0, "unit": "seconds"},
        },
    ),
    "a gain of 10^20 under long dead time": (LAG | {"gain": 1e20, "dead_time_s": 500.0}, PI),
    "a response at the end of float64": (
        POINTS | {"response": [[1.7e308, 0.0], [1.0, -1.0], [0.1, -1.0]]},
        PI,
    ),
    "a response of nothing": (POINTS | {"response": [[0.0, 0.0], [0.0, 0.0], [0.0, 0.0]]}, PI),
    "a state space at the end of float64": (
        {
            "kind": "state_space",
            "a": [[1.0, 0.0], [0.0, 1.7e308]],
            "b": [1.0, 1e20],
            "c": [5e-324, -1.0],
            "d": 6.0,
        },
        PI | {"derivative": {"value": 446.0, "unit": "seconds"}},
    ),
    "a controller whose gain at high frequency is 0 in float64": (
        LAG,
        {
            "form": "two_zeros",
            "action": "direct",
            "gain": 1e-300,
            "zeros_rad_s": [[-3.0, 34.0], [-3.0, -34.0]],
            "derivative_filter": {"value": 1.7e308, "unit": "seconds"},
        },
    ),
    "a state space that overflows once its pole at the origin is split off": (
        {
            "kind": "state_space",
            "a": numbers_of_every_size(),
            "b": [1.0] * 6,
            "c": [1.0] * 6,
        },
        PI,
    ),
    "points so near that their differences overflow": (
        POINTS
        | {
            "frequencies_rad_s": [1e-320, 2e-320, 1.0],
            "response": [[1e9, 0.0], [-1e9, -1.0], [0.1, -1.0]],
        },
        PI,
    ),
    "a range of a plant that is a mere gain": (
        {
            "kind": "transfer_function",
            "numerator": [-3.0],
            "denominator": [1.0],
            "uncertainty": {"gain": [0.8, 1.2]},
        },
        {"form": "ideal", "action": "direct", "proportional": {"value": 1e-20, "unit": "gain"}},
    ),
}


@pytest.mark.parametrize("name", HOSTILE)
def test_it_is_answered_or_refused_by_name(name: str) -> None:
    plant, controller = HOSTILE[name]
    document = {"plant_model": plant, "controller": controller, "include": ["curves"]}
    found, places = None, ()
    try:
        found = answer(read(RecomputationRequest, document))
    except InvalidDocument as refused:
        places = tuple(refused.errors)
    if found is None:
        assert places
    else:
        assert json.loads(to_bytes(found))["verdict"] == found.verdict
        # what is answered can be kept too: the canonical form has no whole number above 2^53
        assert canonical_bytes(plain(found))


@pytest.mark.parametrize("worst", WORST, ids=lambda worst: worst.name)
def test_the_worst_requests_found_end_in_their_verdict_with_its_reason(worst: WorstRequest) -> None:
    found = answer(read(RecomputationRequest, json.dumps(worst.document).encode()))
    assert found.verdict == worst.verdict
    assert set(found.continuous.notes) == set(worst.notes)
    assert (None if found.sampled is None else found.sampled.notes) == worst.notes_at_scans
    if worst.verdict == "undecided":
        reasons = {
            analysis.stability.reason
            for analysis in (found.continuous, found.sampled)
            if analysis is not None
        }
        assert worst.reason in reasons
