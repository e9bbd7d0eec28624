"""Enclosures over cells of a box hold every point of the cell, and bounds lie below every value met in it."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
import pytest

from service.analysis.box import DeadTimes, UncertainLoop, uncertain_loop
from service.analysis.box_ends import Wanted, lower_end, upper_end
from service.analysis.box_quantities import DelayMargin, Distance, GainMargin, PhaseMargin
from service.analysis.loop import form_loop
from service.analysis.tolerated_error import ErrorScale, least_scales
from tests.analysis.uncertain import invented_box

CELLS, POINTS = 300, 64

TURN = 2.0 * np.pi


def loop_of(seed: int) -> UncertainLoop:
    plant, controller = invented_box(seed)
    assert plant.uncertainty is not None
    loop = uncertain_loop(form_loop(plant, controller, None), plant, plant.uncertainty)
    assert loop is not None
    return loop


def random_cells(loop: UncertainLoop, seed: int) -> tuple[Any, Any, Any]:
    """Cells within the box from broad to tiny, and points in each: (cells, w, v), points in rows."""
    random = np.random.default_rng(seed)
    low, high = loop.bounds().log_time
    half_w = 10.0 ** random.uniform(-5.0, -0.2, CELLS)
    half_v = 0.5 * (high - low) * 10.0 ** random.uniform(-4.0, 0.0, CELLS)
    v = random.uniform(low + half_v, high - half_v)
    # half of the cells about the loop's own roots, where enclosures are hardest
    roots = loop.roots[loop.roots != 0]
    about = np.log(np.abs(roots[random.integers(len(roots), size=CELLS)]))
    near = random.random(CELLS) < 0.5
    w = np.where(near, about + random.normal(0.0, 1.0, CELLS) * half_w, random.uniform(-5.0, 5.0, CELLS))
    share = random.uniform(-1.0, 1.0, (2, POINTS, CELLS))
    share[:, :4] = np.array([[-1, -1, 1, 1], [-1, 1, -1, 1]])[..., None]
    return loop.cells(w, v, half_w, half_v), w + share[0] * half_w, v + share[1] * half_v


def at_points(loop: UncertainLoop, w: Any, v: Any) -> tuple[Any, Any]:
    """(ln(−L) without dead time, ω), shapes of `w`."""
    return loop.at(w.ravel(), v.ravel())[0].reshape(w.shape), np.exp(w - v)


SEEDS = range(16)


@pytest.fixture(autouse=True)
def _as_in_a_recomputation() -> Iterator[None]:
    """What leaves float64 shows as inf and nan and is met there."""
    with np.errstate(all="ignore"):
        yield


@pytest.mark.parametrize("seed", SEEDS)
def test_magnitude_and_phase_of_every_point_lie_in_the_enclosure_of_its_cell(seed: int) -> None:
    loop = loop_of(seed)
    cells, w, v = random_cells(loop, seed)
    logs, omega = at_points(loop, w, v)
    low, high = cells.log_magnitude
    assert (low <= logs.real).all()
    assert (logs.real <= high).all()
    assert (cells.omega_lowest <= omega).all()
    assert (omega <= cells.omega_highest).all()
    for dead_time in loop.bounds().dead_time:
        low, high = cells.phase(dead_time)
        phase = logs.imag - omega * dead_time
        assert (low <= phase).all()
        assert (phase <= high).all()
    random = np.random.default_rng(seed)
    a, b, c = random.normal(size=(3, CELLS))
    combination = cells.combination(a, b, c, 0.5)
    value = a * logs.real + b * logs.imag + c * omega + 0.5
    assert (combination.lowest <= value).all()
    assert (value <= combination.highest).all()


@pytest.mark.parametrize("seed", SEEDS)
def test_no_member_comes_nearer_to_minus_one_than_the_bound_of_its_cell(seed: int) -> None:
    loop = loop_of(seed)
    bounds = loop.bounds()
    cells, w, v = random_cells(loop, seed)
    logs, omega = at_points(loop, w, v)
    lowest = Distance(bounds).bound(cells, 1.0)[0]
    random = np.random.default_rng(seed)
    for _ in range(40):
        log_gain = (
            random.uniform(*bounds.log_gain) if random.random() < 0.5 else random.choice(bounds.log_gain)
        )
        dead_time = random.uniform(*bounds.dead_time) if random.random() < 0.5 else bounds.dead_time[1]
        distance = np.abs(1.0 - np.exp(logs + log_gain - 1j * omega * dead_time))
        assert (lowest <= distance * (1.0 + 1e-12) + 1e-13).all()


@pytest.mark.parametrize("seed", SEEDS)
def test_no_margin_of_a_member_lies_below_the_bound_of_its_cell(seed: int) -> None:
    loop = loop_of(seed)
    bounds = loop.bounds()
    cells, w, v = random_cells(loop, seed)
    logs, omega = at_points(loop, w, v)
    for dead_time in np.linspace(*bounds.dead_time, 7):
        angle = (logs.imag - omega * dead_time) % TURN
        crossed = (logs.real + bounds.log_gain[1] >= 0) & (logs.real + bounds.log_gain[0] <= 0)
        nearest = np.where(crossed, np.minimum(angle, TURN - angle), np.inf)
        # where a member comes to −1 the margins of a stable box have no meaning
        free = ~stretches_over_multiple(logs, omega, bounds.dead_time)
        assert (PhaseMargin(bounds, loop).bound(cells, np.inf)[0] <= nearest + 1e-9)[free].all()
        delay = np.where(crossed, angle / omega + dead_time - bounds.dead_time[1], np.inf)
        for attained in (np.inf, 1.0):
            lowest = DelayMargin(bounds, loop).bound(cells, attained)[0]
            assert (np.minimum(lowest, attained) <= delay + 1e-9)[free & (delay >= 0)].all()


def stretches_over_multiple(logs: Any, omega: Any, dead_time: tuple[float, float]) -> Any:
    low, high = logs.imag - omega * dead_time[1], logs.imag - omega * dead_time[0]
    return np.floor(high / TURN) != np.floor(low / TURN)


@pytest.mark.parametrize("seed", SEEDS)
def test_no_gain_margin_of_a_member_lies_below_the_bound_of_its_cell(seed: int) -> None:
    loop = loop_of(seed)
    bounds = loop.bounds()
    cells, w, v = random_cells(loop, seed)
    logs, omega = at_points(loop, w, v)
    least = 0.05
    lowest = GainMargin(bounds, loop, least).bound(cells, np.inf)[0]
    reached = stretches_over_multiple(logs, omega, bounds.dead_time)
    x = logs.real + bounds.log_gain[1]
    # members nearer to −1 than `least` do not exist in a box of which that is proven
    margin = np.where(reached & (x <= np.log1p(-least)), -x, np.inf)
    assert np.isfinite(margin).any() or bounds.dead_time[1] == bounds.dead_time[0]
    assert (lowest <= margin + 1e-9).all()


@pytest.mark.parametrize("seed", SEEDS)
def test_no_touching_member_lies_in_a_smaller_box_than_the_bound_of_its_cell(seed: int) -> None:
    loop = loop_of(seed)
    cells, w, v = random_cells(loop, seed)
    scale = least_scales(loop, w.ravel(), v.ravel())[0].reshape(w.shape)
    assert (ErrorScale(loop).bound(cells, np.inf)[0] <= scale).all()


@pytest.mark.parametrize("seed", SEEDS)
def test_beyond_the_ends_of_the_axis_l_is_as_they_say(seed: int) -> None:
    loop = loop_of(seed)
    bounds = loop.bounds()
    wanted = Wanted(log_small=-1.0, log_large=0.5)
    random = np.random.default_rng(seed)
    v = random.uniform(*bounds.log_time, 500)
    low, high = lower_end(loop, bounds, wanted), upper_end(loop, bounds, wanted)
    beyond = np.exp(random.exponential(2.0, 500))
    for end, omega in ((low, low.omega / beyond), (high, high.omega * beyond)):
        logs = loop.at(np.log(omega) + v, v)[0]
        assert (logs.real + bounds.log_gain[0] >= end.log_magnitude[0] - 1e-9).all()
        assert (logs.real + bounds.log_gain[1] <= end.log_magnitude[1] + 1e-9).all()
        off = (logs.imag - end.angle + np.pi) % TURN - np.pi
        assert (np.abs(off) <= end.angle_error + 1e-9).all()


@pytest.mark.parametrize("extra", [0.0, 0.3])
@pytest.mark.parametrize("entered", [0.0, 2.0])
@pytest.mark.parametrize("reduction", [0.0, 0.5, 3.0])
def test_the_scale_of_a_dead_time_is_that_of_the_smallest_box_that_has_it(
    entered: float, extra: float, reduction: float
) -> None:
    times = DeadTimes(entered, reduction, (np.log(0.7), np.log(1.4)), extra)
    for scale in (0.1, 1.0, 3.0):
        low, high = times.range(scale)
        if high > times.nominal:
            found = times.scale_above(np.array([high - times.nominal]))[0]
            assert found == pytest.approx(scale, rel=1e-9)
            assert times.range(found)[1] <= high * (1.0 + 1e-12)
        if 0 < low < times.nominal:
            assert times.scale_below(np.array([times.nominal - low]))[0] == pytest.approx(scale, rel=1e-9)
    assert times.scale_above(np.zeros(1))[0] == times.scale_below(np.zeros(1))[0] == 0.0
