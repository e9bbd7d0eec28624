"""Plants with uncertainty as one would enter them, and invented boxes without end."""

from __future__ import annotations

from dataclasses import replace
from typing import Any, TypeVar

import numpy as np

from service.analysis.controller import Controller
from service.analysis.plant import PlantModel, SecondOrder, Uncertainty
from tests.analysis.entered import first_order, ideal, integrating, lags, parallel, ratio, resonant, series

Plant = TypeVar("Plant", bound=PlantModel)

CERTAIN = (1.0, 1.0)

KINDS = 8


def uncertain(
    plant: Plant,
    gain: tuple[float, float] = CERTAIN,
    time_constants: tuple[float, float] = CERTAIN,
    dead_time: tuple[float, float] = CERTAIN,
    extra_s: float = 0.0,
) -> Plant:
    """The plant with these factors."""
    box = Uncertainty(
        gain=gain, time_constants=time_constants, dead_time=dead_time, dead_time_extra_s=(0.0, extra_s)
    )
    return replace(plant, uncertainty=box)


def invented_box(seed: int) -> tuple[PlantModel, Controller]:
    """A plant with uncertainty and a controller that mostly suits it; the kinds take turns."""
    random = np.random.default_rng(seed)

    def between(low: float, high: float) -> float:
        return float(random.uniform(low, high))

    time_s = 10.0 ** between(-1.0, 2.0)
    dead_time_s = time_s * 10.0 ** between(-1.3, 0.3) * (between(0.0, 1.0) > 0.15)
    gain = between(0.2, 1.6)
    plant, controller = _loop(seed % KINDS, time_s, dead_time_s, gain, between)
    extra_s = (dead_time_s + 0.02 * time_s) * between(0.0, 0.4) * (between(0.0, 1.0) < 0.3)
    return (
        uncertain(
            plant,
            gain=(between(0.6, 1.0), between(1.0, 1.5)),
            time_constants=(between(0.6, 1.0), between(1.0, 1.5)),
            dead_time=(between(0.5, 1.0), between(1.0, 1.6)),
            extra_s=extra_s,
        ),
        controller,
    )


def _loop(
    kind: int, time_s: float, dead_time_s: float, gain: float, between: Any
) -> tuple[PlantModel, Controller]:
    match kind:
        case 0:
            plant_gain = between(0.5, 3.0)
            kc = 0.6 * gain * time_s / (plant_gain * (dead_time_s + 0.1 * time_s))
            return first_order(plant_gain, time_s, dead_time_s), ideal(kc, time_s * between(0.3, 2.0))
        case 1:
            # a lead to either side of the axis
            plant = SecondOrder(
                kind="second_order",
                gain=2.0,
                time_constants_s=(time_s, time_s * between(0.1, 0.9)),
                lead_time_constant_s=time_s * between(-0.5, 0.5),
                dead_time_s=dead_time_s,
            )
            return plant, ideal(0.8 * gain, time_s, 0.3 * time_s, 0.03 * time_s)
        case 2:
            kc = 0.6 * gain * time_s / (dead_time_s + 0.3 * time_s)
            plant = integrating(1.0 / time_s, time_s * between(0.0, 0.5), dead_time_s)
            return plant, ideal(kc, time_s * between(3.0, 10.0))
        case 3:
            damping = 10.0 ** between(-2.0, -0.3)
            plant = resonant(1.0, 1.0 / time_s, damping, dead_time_s)
            return plant, ideal(gain * damping, time_s * between(0.5, 4.0))
        case 4:
            times_s = [time_s * between(0.1, 1.0) for _ in range(2 + int(between(0.0, 4.0)))]
            return lags(1.0, times_s, (), dead_time_s), ideal(0.8 * gain, time_s * between(0.5, 2.0))
        case 5:
            plant = first_order(-1.0, -time_s, 0.2 * dead_time_s)
            return plant, ideal(1.5 + 2.0 * gain, time_s * between(2.0, 9.0))
        case 6:
            # inverse response
            plant = lags(1.5, [time_s, 0.3 * time_s], [-time_s * between(0.05, 0.5)], dead_time_s)
            return plant, series(0.6 * gain, time_s * between(0.5, 2.0), 0.2 * time_s, 0.02 * time_s)
        case _:
            plant = ratio([1], [time_s**3, 2.0 * time_s**2, 2.0 * time_s, 1], dead_time_s)
            return plant, parallel(0.6 * gain, 0.4 * gain / time_s, 0.3 * gain * time_s, 0.02 * time_s)
