"""What is stored to be drawn: in order of time, for every way in which a loop is scanned."""

from __future__ import annotations

import itertools
from dataclasses import replace
from typing import Literal

import pytest

from service.analysis.controller import Scan
from service.analysis.recomputation import recompute
from tests.analysis.entered import first_order, ideal


@pytest.mark.parametrize("interval_s", [0.1, 0.25, 0.5, 2.0])
@pytest.mark.parametrize("dead_time_s", [0.0, 2.5, 3.0])
@pytest.mark.parametrize("method", ["backward_difference", "trapezoidal"])
def test_the_time_of_a_stored_response_never_goes_back(
    interval_s: float, dead_time_s: float, method: Literal["backward_difference", "trapezoidal"]
) -> None:
    scanned = replace(ideal(1.0, 10.0), scan=Scan(interval_s=interval_s, method=method))
    curves = recompute(first_order(1.0, 10.0, dead_time_s), scanned, with_curves=True).curves
    assert curves is not None
    for response in (curves.setpoint, curves.load):
        assert response is not None
        assert all(earlier <= later for earlier, later in itertools.pairwise(response.time_s))
