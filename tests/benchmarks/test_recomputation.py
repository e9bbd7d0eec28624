"""The recomputation, continuous alone and whole, beside the plain script on python-control."""

from __future__ import annotations

import os

from tests.benchmarks import side_by_side

LOOPS = int(os.environ.get("BENCHMARK_LOOPS", "4"))


def test_the_figures_of_a_recomputation_are_printed() -> None:
    loops = side_by_side.check_loops()
    # spread over the families, which stand in order
    chosen = loops[:: max(1, len(loops) // LOOPS)][:LOOPS]
    found = side_by_side.times(chosen)
    print("\n" + side_by_side.table(found, side_by_side.cold_start_s(max(1, LOOPS // 20))))
    assert len(found.service_ms) == len(found.whole_ms) == len(found.script_ms) == len(chosen)
    # the loops are the same on both sides: on a few ordinary ones the script finds the same verdict
    assert sum(found.agreed) > 0.9 * len(chosen)
