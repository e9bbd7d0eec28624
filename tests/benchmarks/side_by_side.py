"""The service and the plain script on the same loops in one run, each loop by one and then by the other."""

from __future__ import annotations

import json
import sys
import tempfile
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from subprocess import run
from typing import TypeVar

import numpy as np

from service.analysis.recomputation import recompute
from service.documents.examples import EXAMPLES
from service.documents.recomputations import RecomputationRequest
from tests.benchmarks.plain_script import PlainLoop, recompute_plainly
from tests.checks.loops import CheckLoop, read

Found = TypeVar("Found")

REPEATED = 3
"""The least of so many is a loop's time: what else the machine does only adds to it."""

Clock = Callable[[], float]


@dataclass(frozen=True)
class Times:
    """Milliseconds of the processor, one for each loop, and whether both found the same verdict."""

    service_ms: list[float]
    script_ms: list[float]
    agreed: list[bool]


def check_loops() -> list[CheckLoop]:
    """Every loop of both check files, some 180."""
    return read("fifty_digits.json") + read("exact_dead_time.json")


def times(loops: list[CheckLoop]) -> Times:
    """Time both on each loop, after one that is not counted."""
    found = Times([], [], [])
    for loop in [loops[0], *loops]:
        plant, controller, plain = loop.plant_model(), loop.controller(), PlainLoop.of(loop)
        service_ms, script_ms = [], []
        for _ in range(REPEATED):
            elapsed, ours = _timed(lambda plant=plant, controller=controller: recompute(plant, controller))
            service_ms.append(elapsed)
            elapsed, theirs = _timed(lambda plain=plain: recompute_plainly(plain))
            script_ms.append(elapsed)
        found.service_ms.append(min(service_ms))
        found.script_ms.append(min(script_ms))
        found.agreed.append((ours.verdict == "stable") == theirs["stable"])
    return Times(found.service_ms[1:], found.script_ms[1:], found.agreed[1:])


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
        f"continuous recomputation, {len(found.service_ms)} loops, least of {REPEATED}, processor time in ms",
        f"{'':24}{'median':>10}{'95 %':>10}{'95 %/median':>14}{'largest':>10}",
    ]
    for name, values in (("service", found.service_ms), ("plain script", found.script_ms)):
        median, high = np.median(values), np.percentile(values, 95)
        lines.append(f"{name:24}{median:10.2f}{high:10.2f}{high / median:14.2f}{max(values):10.2f}")
    shares = np.array(found.service_ms) / np.array(found.script_ms)
    lines += [
        f"service/script: of the medians {np.median(found.service_ms) / np.median(found.script_ms):.3f}, "
        f"median of the loops' own {np.median(shares):.3f}, largest {shares.max():.3f}",
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
