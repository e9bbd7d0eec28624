"""The service and the plain script on the same loops in one run, each loop by one and then by the other."""

from __future__ import annotations

import json
import sys
import tempfile
import time
from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path
from subprocess import run
from typing import TypeVar

import numpy as np

from service.analysis.controller import Controller, Scan
from service.analysis.plant import PlantModel
from service.analysis.recomputation import recompute
from service.documents.examples import EXAMPLES
from service.documents.recomputations import RecomputationRequest
from tests.analysis.uncertain import uncertain
from tests.benchmarks.plain_script import PlainLoop, recompute_plainly
from tests.checks.loops import CheckLoop, read

Found = TypeVar("Found")

GOLDEN = 0.618
"""Multiples of it, less their whole part, are spread evenly."""

REPEATED = 3
"""The least of so many is a loop's time: what else the machine does only adds to it."""

Clock = Callable[[], float]


@dataclass(frozen=True)
class Times:
    """Milliseconds of the processor, one for each loop, and whether both found the same verdict.

    `whole_ms`: continuous, at the scans, noise and worst case in one recomputation.
    """

    service_ms: list[float]
    whole_ms: list[float]
    script_ms: list[float]
    agreed: list[bool]


def check_loops() -> list[CheckLoop]:
    """Every loop of both check files, some 180."""
    return read("fifty_digits.json") + read("exact_dead_time.json")


def times(loops: list[CheckLoop]) -> Times:
    """Time both on each loop, in turn, after one that is not counted."""
    found = Times([], [], [], [])
    for number, loop in enumerate([loops[0], *loops]):
        plant, controller, plain = loop.plant_model(), loop.controller(), PlainLoop.of(loop)
        boxed, scanned = as_executed(plant, controller, number)
        work: dict[str, Callable[[], object]] = {
            "service": lambda plant=plant, controller=controller: recompute(plant, controller),
            "whole": lambda boxed=boxed, scanned=scanned: recompute(boxed, scanned),
            "script": lambda plain=plain: recompute_plainly(plain),
        }
        elapsed: dict[str, list[float]] = {name: [] for name in work}
        for _ in range(REPEATED):
            for name, one in work.items():
                elapsed[name].append(_timed(one)[0])
        found.service_ms.append(min(elapsed["service"]))
        found.whole_ms.append(min(elapsed["whole"]))
        found.script_ms.append(min(elapsed["script"]))
        theirs = recompute_plainly(plain)
        found.agreed.append((recompute(plant, controller).verdict == "stable") == theirs["stable"])
    return Times(found.service_ms[1:], found.whole_ms[1:], found.script_ms[1:], found.agreed[1:])


def as_executed(plant: PlantModel, controller: Controller, number: int) -> tuple[PlantModel, Controller]:
    """The loop with a box about its plant and a scan that divides its dead time in 1 to 10.

    Without dead time the scan is a tenth of the reciprocal of the crossover frequency.
    """
    scans = 1.0 + 9.0 * ((number * GOLDEN) % 1.0)
    if plant.dead_time_s > 0:
        interval_s = plant.dead_time_s / scans
    else:
        crossovers = recompute(plant, controller).continuous.crossovers.gain_crossovers
        interval_s = 0.1 / max([crossing.rad_s for crossing in crossovers], default=1.0)
    boxed = uncertain(plant, gain=(0.8, 1.25), time_constants=(0.8, 1.25), dead_time=(0.7, 1.4))
    return boxed, replace(controller, scan=Scan(interval_s=interval_s))


def cold_start_s(times_each: int) -> list[float]:
    """From nothing to the answer of `gain-signoff recompute`, in processes of their own."""
    with tempfile.TemporaryDirectory() as folder:
        request = Path(folder) / "request.json"
        request.write_text(json.dumps(EXAMPLES[RecomputationRequest]))
        command = [sys.executable, "-m", "service.command", "recompute", str(request)]
        root = Path(__file__).parents[2]
        return [
            _timed(lambda: run(command, cwd=root, check=True, capture_output=True), time.perf_counter)[0]
            / 1e3
            for _ in range(times_each)
        ]


def table(found: Times, cold_s: list[float]) -> str:
    """What is printed."""
    lines = [
        f"{len(found.service_ms)} loops, least of {REPEATED}, processor time in ms",
        f"{'':24}{'median':>10}{'95 %':>10}{'95 %/median':>14}{'largest':>10}",
    ]
    rows = {"continuous": found.service_ms, "whole": found.whole_ms, "plain script": found.script_ms}
    for name, values in rows.items():
        median, high = np.median(values), np.percentile(values, 95)
        lines.append(f"{name:24}{median:10.2f}{high:10.2f}{high / median:14.2f}{max(values):10.2f}")
    for name, values in (("continuous", found.service_ms), ("whole", found.whole_ms)):
        shares = np.array(values) / np.array(found.script_ms)
        of_medians = np.median(values) / np.median(found.script_ms)
        lines.append(
            f"{name}/script: of the medians {of_medians:.3f}, median of the loops' own "
            f"{np.median(shares):.3f}, largest {shares.max():.3f}"
        )
    lines += [
        f"the script found another verdict on {found.agreed.count(False)} loops",
        f"cold start of `gain-signoff recompute`: median {np.median(cold_s):.2f} s, "
        f"largest {max(cold_s):.2f} s of {len(cold_s)}",
    ]
    return "\n".join(lines)


def _timed(work: Callable[[], Found], clock: Clock = time.process_time) -> tuple[float, Found]:
    """Milliseconds, of this process's own processor time unless another clock is given."""
    start = clock()
    found = work()
    return 1000.0 * (clock() - start), found
