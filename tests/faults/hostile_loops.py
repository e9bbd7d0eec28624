"""Loops that no plant has, and some that one may have: made up over the whole of float64.

Each is a request for a recomputation, as a body. Most are answered; what comes of them is judged elsewhere.
"""

from __future__ import annotations

import math
import random
from collections.abc import Callable
from typing import Any

import numpy as np

from tests.api.plant import Body

ENDS = (5e-324, 1e-300, 1e-20, 1e-9, 1e9, 1e20, 1e100, 1e300, 1.7e308)
"""Magnitudes at and near the ends of float64."""

ORDERS = (1, 2, 3, 4, 6, 10, 15, 20)
POINTS = (2, 5, 20, 60, 200, 700, 2000)

IN_FULL: Body = {
    "proportional": None,
    "integral": None,
    "derivative": None,
    "derivative_filter": None,
    "measurement_filter_s": 0.0,
    "setpoint_weight": {"proportional": 1.0, "derivative": 0.0},
    "scan": None,
}
"""What a record asks for by name."""


class HostileLoops:
    """Draws requests; the seed says which."""

    def __init__(self, seed: int) -> None:
        self._random = random.Random(seed)  # noqa: S311  no secret is made of it

    def request(self, *, in_full: bool = False) -> Body:
        """One request for a recomputation; `in_full`: with every field that a record asks for."""
        plant = self._plant()
        controller = self._controller(plant)
        if in_full:
            controller = IN_FULL | controller
            if controller["form"] == "two_zeros":
                for name in ("proportional", "integral", "derivative"):
                    del controller[name]
        include = self._random.choice([[], ["curves"], ["curves", "second_opinion"]])
        return {"plant_model": plant, "controller": controller, "include": include}

    def _between(self, low: float, high: float) -> float:
        """A magnitude, its logarithm uniform between these powers of ten."""
        return float(10.0 ** self._random.uniform(low, high))

    def _number(self, at_an_end: float = 0.1) -> float:
        drawn = self._random.random()
        if drawn < 0.05:
            return 0.0
        size = self._random.choice(ENDS) if drawn < 0.05 + at_an_end else self._between(-4, 4)
        return self._random.choice((-1.0, 1.0)) * size

    def _other_than_0(self) -> float:
        return self._number() or 1.0

    def _positive(self) -> float:
        return abs(self._other_than_0())

    def _plant(self) -> Body:
        kinds: list[Callable[[], Body]] = [
            self._first_order,
            self._second_order,
            self._oscillating,
            self._integrating,
            self._transfer_function,
            self._zeros_and_poles,
            self._state_space,
            self._measured,
        ]
        choice = self._random.choice
        dead_time_s = choice((0.0, self._between(-2, 2), self._between(1, 4), abs(self._number())))
        plant = choice(kinds)() | {"dead_time_s": dead_time_s}
        if plant["kind"] != "frequency_response" and self._random.random() < 0.15:
            plant["uncertainty"] = self._uncertainty()
        if self._random.random() < 0.05:
            plant["identified_through_filter_s"] = self._positive()
        if self._random.random() < 0.05:
            plant["identified_at_scan_s"] = self._positive()
        return plant

    def _first_order(self) -> Body:
        return {"kind": "first_order", "gain": self._number(), "time_constant_s": self._other_than_0()}

    def _second_order(self) -> Body:
        times = [self._other_than_0(), self._other_than_0()]
        lead = self._random.choice((0.0, self._number()))
        return {
            "kind": "second_order",
            "gain": self._number(),
            "time_constants_s": times,
            "lead_time_constant_s": lead,
        }

    def _oscillating(self) -> Body:
        damping = self._random.choice((0.0, self._between(-9, 0), -self._between(-3, 0), self._number()))
        return {
            "kind": "second_order",
            "gain": self._number(),
            "natural_frequency_rad_s": self._positive(),
            "damping_ratio": damping,
        }

    def _integrating(self) -> Body:
        lag_s = self._random.choice((0.0, self._number()))
        return {"kind": "integrating", "gain_per_s": self._number(), "lag_s": lag_s}

    def _transfer_function(self) -> Body:
        order = self._random.choice(ORDERS)
        below = [self._number(0.03) for _ in range(order + 1)]
        if self._random.random() < 0.5:
            roots = [complex(*root) if isinstance(root, list) else root for root in self._roots(order)]
            below = [float(value) for value in np.real(np.poly(roots))]
        above = [self._number(0.03) for _ in range(self._random.randrange(1, order + 2))]
        return {"kind": "transfer_function", "numerator": above, "denominator": below}

    def _zeros_and_poles(self) -> Body:
        order = self._random.choice(ORDERS)
        zeros = self._roots(self._random.choice((0, 0, 1, order // 2, order)))
        poles = self._roots(order)
        return {
            "kind": "zeros_poles_gain",
            "zeros_rad_s": zeros,
            "poles_rad_s": poles,
            "gain": self._other_than_0(),
        }

    def _roots(self, count: int) -> list[Any]:
        roots: list[Any] = []
        while len(roots) < count:
            if len(roots) + 2 > count or self._random.random() < 0.5:
                roots.append(self._random.choice((-1.0, -1.0, 1.0, 0.0)) * self._between(-3, 3))
                continue
            damped, growing = -self._between(-4, 2), self._between(-4, 1)
            real = self._random.choice((damped, damped, 0.0, growing))
            imaginary = self._between(-2, 3)
            roots += [[real, imaginary], [real, -imaginary]]
        return roots

    def _state_space(self) -> Body:
        order = self._random.choice(ORDERS)
        at_an_end = self._random.choice((0.0, 0.0, 0.05))
        row = [[self._number(at_an_end) for _ in range(order)] for _ in range(order + 2)]
        direct = self._random.choice((0.0, self._number()))
        return {"kind": "state_space", "a": row[:order], "b": row[order], "c": row[order + 1], "d": direct}

    def _measured(self) -> Body:
        """Points of some lags, oscillations and a delay, with noise; now and then of nothing."""
        drawn = {self._between(-3, 3) for _ in range(self._random.choice(POINTS))}
        omega = np.array(sorted(drawn | {1.0, 2.0}))[:2000]
        if self._random.random() < 0.3:
            omega = np.linspace(omega[0], omega[-1], len(omega))
        s, response = 1j * omega, np.full(len(omega), complex(self._between(-2, 2)))
        for _ in range(self._random.choice((1, 2, 4, 8, 12))):
            if self._random.random() < 0.6:
                response = response / (1.0 + s * self._between(-3, 3))
            else:
                natural, damping = self._between(-2, 2), self._between(-4, 0)
                response = response / (1.0 + 2.0 * damping * s / natural + (s / natural) ** 2)
        if self._random.random() < 0.3:
            response = response * np.exp(-s * self._between(-3, 1))
        noise = [complex(self._random.gauss(0, 1), self._random.gauss(0, 1)) for _ in omega]
        response = response * (1.0 + self._random.choice((0.0, 1e-6, 0.01, 0.1)) * np.array(noise))
        told = [[value.real, value.imag] for value in response.tolist()]
        if self._random.random() < 0.15 or not np.isfinite(told).all():
            told = [[self._number(), self._number()] for _ in omega]
        return {
            "kind": "frequency_response",
            "frequencies_rad_s": omega.tolist(),
            "response": told,
            "unstable_poles": self._random.choice((0, 0, 0, 1, 2)),
            "poles_at_origin": self._random.choice((0, 0, 1)),
        }

    def _uncertainty(self) -> Body:
        def factors() -> list[float]:
            wide = [self._between(-3, 0), self._between(0, 3)]
            return self._random.choice(([1.0, 1.0], [0.8, 1.25], [0.5, 2.0], wide))

        extra_s = self._random.choice((0.0, self._positive()))
        names = ("gain", "time_constants", "dead_time")
        return {name: factors() for name in names} | {"dead_time_extra_s": [0.0, extra_s]}

    def _controller(self, plant: Body) -> Body:
        form = self._random.choice(("ideal", "series", "parallel", "two_zeros"))
        controller = self._two_zeros() if form == "two_zeros" else self._terms(form)
        controller |= {"form": form, "action": self._random.choice(("reverse", "direct"))}
        if self._random.random() < 0.3:
            controller["measurement_filter_s"] = self._positive()
        if self._random.random() < 0.5:
            controller["scan"] = self._scan(plant)
        return controller

    def _gain(self) -> float:
        return self._random.choice((self._positive(), self._between(-2, 2), self._between(-2, 6)))

    def _two_zeros(self) -> Body:
        real, imaginary = -self._between(-3, 2), self._between(-3, 2)
        pair = [[real, imaginary], [real, -imaginary]]
        zeros: Any = self._random.choice(([real], [real, -imaginary], pair))
        controller: Body = {"gain": self._gain(), "zeros_rad_s": zeros}
        if len(zeros) == 2 and self._random.random() < 0.7:
            controller["derivative_filter"] = {"value": self._positive(), "unit": "seconds"}
        return controller

    def _terms(self, form: str) -> Body:
        controller: Body = {"proportional": {"value": self._gain(), "unit": "gain"}}
        if self._random.random() < 0.8:
            time_s = self._random.choice((self._positive(), self._between(-2, 2)))
            controller["integral"] = {"value": time_s, "unit": "seconds"}
        if self._random.random() < 0.4:
            unit = "gain_seconds" if form == "parallel" else "seconds"
            controller["derivative"] = {"value": self._positive(), "unit": unit}
            if self._random.random() < 0.8:
                controller["derivative_filter"] = {"value": self._positive(), "unit": "seconds"}
        return controller

    def _scan(self, plant: Body) -> Body:
        slowest = max(plant["dead_time_s"], 1.0)
        interval_s = self._random.choice((self._positive(), self._between(-4, 2.5), 0.01 * slowest))
        return {
            "interval_s": interval_s if math.isfinite(interval_s) else 1.0,
            "method": self._random.choice(("backward_difference", "trapezoidal")),
            "output_delay_s": self._random.choice((0.0, self._between(-2, 2), abs(self._number()))),
        }
