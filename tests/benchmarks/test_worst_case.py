"""The time of a worst case against what makes it long: size of the box, dead time, order, resonance.

How it grows, as measured: a box whose factors are raised to the power 8 takes some two times as long as the
usual one, 100 lags of dead time three times as long as none, 20 lags half as long again as one, a damping a
thousand times lighter twice as long. An ordinary box takes two or three waves of a hundred cells: the time
goes into calls, not into cells.
"""

from __future__ import annotations

import os
import time
from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from service.analysis.controller import Controller
from service.analysis.plant import PlantModel
from service.analysis.recomputation import recompute
from service.analysis.results import WorstCase
from tests.analysis.entered import first_order, ideal, lags, resonant
from tests.analysis.uncertain import invented_box, uncertain

LOOPS = int(os.environ.get("BENCHMARK_LOOPS", "4"))

REPEATED = 3

Box = tuple[str, PlantModel, Controller]


def _scaled(plant: PlantModel, scale: float) -> PlantModel:
    """The plant with the box of 0.8 to 1.25 (dead time 0.7 to 1.4), every factor raised to `scale`."""
    usual = (0.8**scale, 1.25**scale)
    return uncertain(plant, gain=usual, time_constants=usual, dead_time=(0.7**scale, 1.4**scale))


def _boxes() -> Iterator[Box]:
    lag, pi = first_order(2.0, 10.0, 3.0), ideal(0.2, 10.0)
    for scale in (0.0, 0.25, 0.5, 1.0, 2.0, 4.0, 8.0):
        yield f"factors to the power {scale:g}", _scaled(lag, scale), pi
    for dead_time in (0.0, 1.0, 10.0, 100.0, 1000.0):
        slow = ideal(0.2, 2.0 * (10.0 + dead_time))
        yield f"dead time of {dead_time / 10.0:g} lags", _scaled(first_order(2.0, 10.0, dead_time), 1.0), slow
    for order in (1, 2, 5, 10, 20):
        plant = lags(1.0, np.linspace(5.0, 10.0, order).tolist(), (), 3.0)
        yield f"{order} lags", _scaled(plant, 1.0), ideal(0.3, 20.0 * order)
    for damping in (0.3, 0.03, 0.003, 0.0003):
        plant = resonant(1.0, 1.0, damping, 20.0)
        yield f"a damping of {damping:g} under dead time", _scaled(plant, 1.0), ideal(0.1 * damping, 20.0)


def _ms(plant: PlantModel, controller: Controller) -> tuple[float, float, WorstCase | None]:
    """(The recomputation, the same without uncertainty, in ms of the processor; the worst case)."""
    known = replace(plant, uncertainty=None)
    whole, without = [], []
    for _ in range(REPEATED):
        for model, times in ((plant, whole), (known, without)):
            start = time.process_time()
            recompute(model, controller)
            times.append(1e3 * (time.process_time() - start))
    return min(whole), min(without), recompute(plant, controller).worst_case


def test_the_time_of_a_worst_case_is_printed_against_what_makes_it_long() -> None:
    print("\n  ms of it  ms in all  box")
    for name, plant, controller in _boxes():
        whole, known, worst = _ms(plant, controller)
        assert worst is not None
        assert worst.stable_for_all is not None
        print(f"{whole - known:10.1f} {whole:10.1f}  {name}: {_told(worst)}")


def test_the_times_of_many_invented_boxes_are_printed() -> None:
    found = [_ms(*invented_box(seed))[:2] for seed in range(LOOPS)]
    whole = np.array([pair[0] for pair in found])
    added = whole - np.array([pair[1] for pair in found])
    for name, values in (("the worst case", added), ("the whole recomputation", whole)):
        median, high = np.percentile(values, [50, 95])
        print(f"\n{name}, {LOOPS} boxes: median {median:.1f} ms, 95th percentile {high:.1f} ms", end="")
    assert len(found) == LOOPS


def _told(worst: WorstCase) -> str:
    if worst.max_sensitivity is None or not isinstance(worst.max_sensitivity.at_most, float):
        return "not stable for all"
    return f"sensitivity {worst.max_sensitivity.at_least:.3g} to {worst.max_sensitivity.at_most:.3g}"
