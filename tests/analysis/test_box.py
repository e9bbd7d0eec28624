"""Enclosures hold every point of their cell, and no cell is left out that holds a member."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
import pytest

from service.analysis.box import DeadTimes, UncertainLoop, uncertain_loop
from service.analysis.box_cells import Cells, Rectangles, enclose
from service.analysis.box_ends import Wanted, lower_end, upper_end
from service.analysis.box_quantities import DelayMargin, Distance, GainMargin, PhaseMargin
from service.analysis.box_search import Quantity
from service.analysis.box_sectors import Sectors, excluded, excluded_at_sight
from service.analysis.loop import form_loop
from service.analysis.tolerated_error import ErrorScale
from tests.analysis.uncertain import invented_box

CELLS, POINTS = 300, 64

TURN = 2.0 * np.pi

ALL_FREQUENCIES = (1e-300, 1e300)

ABOUT = ("their middle", "a corner", "any point")


def loop_of(seed: int) -> UncertainLoop:
    plant, controller = invented_box(seed)
    assert plant.uncertainty is not None
    loop = uncertain_loop(form_loop(plant, controller, None), plant, plant.uncertainty)
    assert loop is not None
    return loop


def random_cells(loop: UncertainLoop, seed: int, about: str) -> tuple[Cells, Any, Any]:
    """Cells within the box from broad to tiny, and points in each: (cells, w, v), points in rows."""
    random = np.random.default_rng(seed)
    low, high = loop.bounds().log_time
    half_w = 10.0 ** random.uniform(-5.0, -0.2, CELLS)
    half_v = 0.5 * (high - low) * 10.0 ** random.uniform(-4.0, 0.0, CELLS)
    v = random.uniform(low + half_v, high - half_v)
    # half of the cells about the loop's own roots, where enclosures are hardest
    roots = loop.roots[loop.roots != 0]
    beside = np.log(np.abs(roots[random.integers(len(roots), size=CELLS)]))
    near = random.random(CELLS) < 0.5
    w = np.where(near, beside + random.normal(0.0, 1.0, CELLS) * half_w, random.uniform(-5.0, 5.0, CELLS))
    share = random.uniform(-1.0, 1.0, (2, POINTS, CELLS))
    share[:, :4] = np.array([[-1, -1, 1, 1], [-1, 1, -1, 1]])[..., None]
    places = Rectangles(w - half_w, w + half_w, v - half_v, v + half_v)
    at_w, at_v = places.centre
    if about == "a corner":
        at_w = np.where(random.random(CELLS) < 0.5, places.low_w, places.high_w)
        at_v = np.where(random.random(CELLS) < 0.5, places.low_v, places.high_v)
    elif about == "any point":
        at_w, at_v = random.uniform(places.low_w, places.high_w), random.uniform(places.low_v, places.high_v)
    within = (np.clip(w + share[0] * half_w, *places[:2]), np.clip(v + share[1] * half_v, *places[2:]))
    return enclose(loop, places, at_w, at_v), *within


def at_points(loop: UncertainLoop, w: Any, v: Any) -> tuple[Any, Any, Any]:
    """(x, y, ω) with ln(−L) = x + jy without dead time, shapes of `w`."""
    there = loop.at(w.ravel(), v.ravel())
    return there.x.reshape(w.shape), there.y.reshape(w.shape), np.exp(w - v)


SEEDS = range(16)


@pytest.fixture(autouse=True)
def _as_in_a_recomputation() -> Iterator[None]:
    """What leaves float64 shows as inf and nan and is met there."""
    with np.errstate(all="ignore"):
        yield


@pytest.mark.parametrize("about", ABOUT)
@pytest.mark.parametrize("seed", SEEDS)
def test_every_point_of_a_cell_lies_in_its_enclosure(seed: int, about: str) -> None:
    loop = loop_of(seed)
    cells, w, v = random_cells(loop, seed, about)
    x, y, _ = at_points(loop, w, v)
    low, high = cells.log_magnitude
    assert (low <= x).all()
    assert (x <= high).all()
    there, step_w, step_v = cells.response, w - cells.w, v - cells.v
    off_x = x - there.x - there.x_w * step_w - there.x_v * step_v
    off_y = y - there.y - there.y_w * step_w - there.y_v * step_v
    allowed = cells.bend_plant * step_w**2 + cells.bend_rest * (step_w - step_v) ** 2 + cells.rounding
    assert (np.hypot(off_x, off_y) <= allowed).all()


def quantities(loop: UncertainLoop) -> list[Quantity]:
    bounds = loop.bounds()
    margins = [GainMargin(bounds), PhaseMargin(bounds), DelayMargin(bounds)]
    return [Distance(bounds), *margins, ErrorScale(loop)]


def left_out(cells: Cells, quantity: Quantity, levels: Any) -> Any:
    """Which of the cells are said to hold no member with a value below its level."""
    sectors = Sectors.of([quantity.sector(float(level), ALL_FREQUENCIES) for level in levels])
    return excluded(cells, sectors, about_corners=True)[0] | excluded_at_sight(cells, sectors)


@pytest.mark.parametrize("about", ABOUT)
@pytest.mark.parametrize("seed", SEEDS)
def test_no_cell_is_left_out_that_holds_a_member_with_less(seed: int, about: str) -> None:
    loop = loop_of(seed)
    cells, w, v = random_cells(loop, seed, about)
    tiny = (cells.places.high_w - cells.places.low_w < 1e-3) & (
        cells.places.high_v - cells.places.low_v < 1e-3
    )
    for quantity in quantities(loop):
        x, y, omega = at_points(loop, w, v)
        least = quantity.values(x.ravel(), y.ravel(), omega.ravel(), v.ravel()).reshape(w.shape).min(0)
        # nothing comes of a distance that is 0 in any case, or of a disc that is not convex
        met = np.isfinite(least) & (least > 1e-6) & (not isinstance(quantity, Distance) or least < 0.99)
        if not met.any():
            continue
        chosen = np.flatnonzero(met)
        some, least = cells.only(chosen), least[chosen]
        assert not left_out(some, quantity, least * (1.0 + 1e-9) + 1e-12).any(), type(quantity)
        # and where the level is far below what is met, it is told of small cells
        told = left_out(some, quantity, 0.5 * least)[tiny[chosen]]
        assert told.sum() >= 0.95 * told.size, type(quantity)


@pytest.mark.parametrize("seed", SEEDS)
def test_a_disc_that_is_not_convex_is_left_out_only_where_no_member_comes_nearer(seed: int) -> None:
    loop = loop_of(seed)
    cells, w, v = random_cells(loop, seed, "their middle")
    x, y, omega = at_points(loop, w, v)
    quantity = Distance(loop.bounds())
    least = quantity.values(x.ravel(), y.ravel(), omega.ravel(), v.ravel()).reshape(w.shape).min(0)
    far = np.flatnonzero(least > 1.0)
    assert not left_out(cells.only(far), quantity, least[far] * (1.0 + 1e-9)).any()
    assert left_out(cells.only(far), quantity, 1.0 + 0.5 * (least[far] - 1.0)).any()


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
        there = loop.at(np.log(omega) + v, v)
        assert (there.x + bounds.log_gain[0] >= end.log_magnitude[0] - 1e-9).all()
        assert (there.x + bounds.log_gain[1] <= end.log_magnitude[1] + 1e-9).all()
        off = (there.y - end.angle + np.pi) % TURN - np.pi
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
