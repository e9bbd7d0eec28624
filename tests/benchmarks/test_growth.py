"""How the time of a recomputation grows with the dead time over the scan, and with the order of the plant.

`BENCHMARK_LOOPS=1000 pytest -n 0 -s tests/benchmarks/test_growth.py` prints figures worth reading, in ms of
the processor; `test_worst_case.py` has the same against the size of the box. The growth in each row is the
exponent of the power that leads to it from the row above.
"""

from __future__ import annotations

import math
import os
import time
from collections.abc import Iterable
from dataclasses import replace

import numpy as np

from service.analysis.controller import Controller, Scan
from service.analysis.plant import PlantModel
from service.analysis.recomputation import recompute
from tests.analysis.entered import first_order, ideal, lags

LONG = int(os.environ.get("BENCHMARK_LOOPS", "4")) > 4

REPEATED = 5 if LONG else 1

SCANS = (1, 3, 10, 30, 100, 300) if LONG else (1, 300)
ORDERS = (1, 2, 5, 10, 20) if LONG else (1, 20)


def _ms(plant: PlantModel, controller: Controller) -> float:
    """The least of several, the first of which is not counted."""
    times = []
    for _ in range(REPEATED + 1):
        start = time.process_time()
        found = recompute(plant, controller)
        times.append(1e3 * (time.process_time() - start))
    assert found.continuous.stability.verdict == "stable"
    return min(times[1:])


def _print(title: str, sizes: Iterable[int], times: Iterable[float]) -> None:
    print(f"\n{title:>24}{'ms':>10}{'growth':>10}")
    before: tuple[int, float] | None = None
    for size, ms in zip(sizes, times, strict=True):
        growth = "" if before is None else f"{math.log(ms / before[1]) / math.log(size / before[0]):10.2f}"
        print(f"{size:>24}{ms:>10.2f}{growth}")
        before = size, ms


def test_the_time_is_printed_against_the_dead_time_over_the_scan() -> None:
    plant, controller = first_order(1.0, 10.0, 6.0), ideal(0.8, 10.0)
    times = [
        _ms(plant, replace(controller, scan=Scan(interval_s=plant.dead_time_s / scans))) for scans in SCANS
    ]
    _print("scans in the dead time", SCANS, times)
    assert len(times) == len(SCANS)


def test_the_time_is_printed_against_the_order_of_the_plant() -> None:
    times = []
    for order in ORDERS:
        plant = lags(1.0, np.linspace(5.0, 10.0, order).tolist(), (), 3.0)
        controller = ideal(0.3, 20.0 * order)
        times.append((_ms(plant, controller), _ms(plant, replace(controller, scan=Scan(interval_s=1.0)))))
    _print("order, continuous", ORDERS, [continuous for continuous, _ in times])
    _print("order, at the scans too", ORDERS, [scanned for _, scanned in times])
    assert len(times) == len(ORDERS)
