"""A crossover is found wherever it lies, on a point of the frequency grid too."""

from __future__ import annotations

import math

import numpy as np
import pytest

from service.analysis.controller import Controller
from service.analysis.frequency import AxisResponse
from service.analysis.loop import form_loop
from service.analysis.plant import PlantModel
from service.analysis.recomputation import recompute
from tests.analysis.entered import first_order, ideal, integrating, lags, resonant

LOOPS: dict[str, tuple[PlantModel, Controller]] = {
    "four equal lags": (lags(1.0, [1.0] * 4), ideal(1.5)),
    "lag under dead time": (first_order(1.0, 5.0, 1.0), ideal(2.0, 5.0)),
    "integrator under dead time": (integrating(0.2, 0.0, 3.0), ideal(0.8, 40.0)),
    "light resonance": (resonant(0.02, 1.0, 0.01, 11.0), ideal(1.1, 0.5)),
    "unstable lag": (first_order(-1.0, -10.0, 3.0), ideal(2.0, 80.0)),
}


def steps(value: float, count: int) -> float:
    """The value so many float64 further up, or down."""
    for _ in range(abs(count)):
        value = math.nextafter(value, math.inf if count > 0 else 0.0)
    return value


@pytest.mark.parametrize("gain", [0.25, 0.5, 1.0, 1.5])
@pytest.mark.parametrize("order", [3, 4, 5, 6, 8])
def test_the_limit_of_equal_lags_at_round_gains(order: int, gain: float) -> None:
    # tan(π/4) = 1: the crossover of four lags of 1 s lies on the grid's own marks
    limit = 1.0 / math.cos(math.pi / order) ** order
    margins = recompute(lags(1.0, [1.0] * order), ideal(gain)).continuous.margins
    assert margins is not None
    assert margins.gain_margin == pytest.approx(limit / gain, rel=1e-12)


@pytest.mark.parametrize("name", LOOPS)
@pytest.mark.parametrize("kind", ["gain_crossovers", "phase_crossovers"])
@pytest.mark.parametrize("apart", [(0,), (-1,), (1,), (0, 1), (-1, 0), (-1, 1), (-8, 8), (-2, -1, 0, 1, 2)])
def test_a_crossover_on_the_grid_or_a_rounding_beside_it_is_not_missed(
    name: str, kind: str, apart: tuple[int, ...]
) -> None:
    axis = AxisResponse.of(form_loop(*LOOPS[name], None).loop)
    wanted = places(axis, kind)
    assert wanted
    for place in wanted:
        near = np.abs(axis.omega - place) < 1e-6 * place
        more = [steps(place, count) for count in apart]
        omega = np.unique(np.concatenate([axis.omega[~near], more]))
        found = places(AxisResponse(axis.loop, omega, *axis.loop.on_axis(omega)), kind)
        assert found == pytest.approx(wanted, rel=1e-12, abs=0.0)


def places(axis: AxisResponse, kind: str) -> list[float]:
    """The crossovers of a kind; of the phase crossovers those whose gain factor is between 0.01 and 100."""
    if kind == "gain_crossovers":
        return axis.gain_crossovers.tolist()
    crossings = axis.phase_crossovers
    return crossings.omega[np.abs(crossings.log_magnitude) < math.log(100.0)].tolist()
