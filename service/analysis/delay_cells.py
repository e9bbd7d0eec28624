"""The steps of extra dead time in which a root of a scanned loop may leave the unit circle.

Where plant or crossover are fast against the scan a crossover may meet −1 several times within a scan. So
1 + L is looked at over a grid of angles ωh and of divisions of a scan; whole scans of dead time only turn it.
A root lies upon the circle in a cell about whose boundary 1 + L turns.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import replace

import numpy as np
import numpy.typing as npt

from service.analysis.frequency import distinct
from service.analysis.loop import Complexes, Reals
from service.analysis.sampled_loop import SampledLoop
from service.analysis.unit_circle import DIVISION_RAD, OnCircle, swinging_modes

NEAR_ONE = 0.1
"""Within this of 1 abs L at the points of a step may pass 1 between them."""

GRAZING = 0.25
"""Of the change of slope between two cells, twice what a straight line misses a curve by; and of the change
between two delays, by how much more a value may have moved between them.
"""

ALIVE = 3.0
"""A mode that dies away by fewer nepers within a scan swings through all of it."""

DIVIDED, ANGLE_SHARE, ANGLE_STEP = 32, 0.06, 0.03
"""The grid: cells of a scan, and the longest steps of ωh, against itself and in itself."""


def fastest_mode(sampled: SampledLoop) -> float:
    """Largest abs λ·h of the plant."""
    return float(np.abs(sampled.scanned.parts.plant.poles_rad_s).max(initial=0.0)) * sampled.scanned.interval


def swings_between_divisions(sampled: SampledLoop) -> bool:
    """Whether a mode of the plant swings so far within a scan that the grid does not follow it."""
    return bool(np.any(swinging_modes(sampled, ALIVE) > DIVISION_RAD * DIVIDED))


def cells(sampled: SampledLoop, angles: Reals, limit: float) -> Iterator[tuple[float, float]]:
    """Least and largest extra delay of every step of the grid in which 1 + L turns about a cell, the least
    first; up to a little beyond `limit`.

    A step from the last division of a scan to the next whole one is among them: there a direct path comes a
    scan later at once.
    """
    interval, plant = sampled.scanned.interval, sampled.plant
    shares = np.array(_shares(sampled))
    delays = (shares - plant.fraction) % 1.0 * interval
    here = OnCircle(sampled, angles)
    divided = [replace(each, whole_scans=0) for each in sampled.scanned.samples(delays.tolist())]
    values = here.values(divided)
    left = _steps_near_one(np.abs(values))
    if not left.size:
        return
    before: tuple[Complexes, Complexes, float] | None = None
    for whole in range(plant.whole_scans, plant.whole_scans + math.ceil(limit / interval) + 2):
        at_left, at_right = (
            1.0 + values[:, columns] * np.exp(-1j * whole * angles[columns]) for columns in (left, left + 1)
        )
        extra = (whole + shares - plant.whole_scans - plant.fraction) * interval
        if before is not None:
            at_left, at_right = np.vstack([before[0], at_left]), np.vstack([before[1], at_right])
            extra = np.append(before[2], extra)
        for row in _rows_about_zero(at_left, at_right):
            if extra[row + 1] > 0:
                yield max(float(extra[row]), 0.0), float(extra[row + 1])
        before = at_left[-1:], at_right[-1:], float(extra[-1])


def _steps_near_one(magnitude: Reals) -> npt.NDArray[np.intp]:
    """The steps of ωh, by their left ends, in which abs L comes near 1 at some division; elsewhere 1 + L is
    not 0.
    """
    low, high = magnitude.min(axis=0), magnitude.max(axis=0)
    passes = (np.minimum(low[:-1], low[1:]) <= 1.0 + NEAR_ONE) & (
        np.maximum(high[:-1], high[1:]) >= 1.0 - NEAR_ONE
    )
    return np.flatnonzero(passes)


def angles_of_grid(lowest: float, resonant: Reals) -> Reals:
    """ωh from below the lowest crossover to the Nyquist frequency, where real roots reach the circle, and
    beyond it, in steps that are short in themselves and against ωh; and those angles about resonances that
    lie closer together.
    """
    even = [0.7 * lowest]
    while even[-1] < math.pi:
        even.append(even[-1] + min(ANGLE_SHARE * even[-1], ANGLE_STEP))
    # the Nyquist frequency lies in the middle of the last step
    scale = (math.pi - even[0]) / (0.5 * (even[-2] + even[-1]) - even[0])
    angles = even[0] + scale * (np.array(even) - even[0])
    steps = resonant[1:] - resonant[:-1]
    close = np.flatnonzero(steps < 0.5 * np.minimum(ANGLE_SHARE * resonant[1:], ANGLE_STEP))
    more = resonant[np.union1d(close, close + 1)]
    return distinct(np.concatenate([angles, more[(angles[0] < more) & (more < angles[-2])]]))


def _shares(sampled: SampledLoop) -> list[float]:
    """Divisions of a scan, closer where a fast plant answers to the last part of it."""
    even = np.linspace(0.0, 1.0, DIVIDED + 1)
    fastest = fastest_mode(sampled)
    if fastest > DIVIDED / 8:
        # e^(−λh(1−ε)) moves within some 1/(λh) before the whole scan
        even = np.concatenate([even, 1.0 - np.geomspace(0.1 / fastest, 1.0, DIVIDED)])
    shares = np.sort(even[(even >= 0) & (even < 1.0)])
    return [*shares[np.append(True, np.diff(shares) > 1e-9)].tolist(), 1.0 - 1e-9]


def _rows_about_zero(at_left: Complexes, at_right: Complexes) -> list[int]:
    """The rows with a cell about whose boundary a function turns, and those where it comes nearest to 0 and
    so near, against how it changes in the cell, that two zeros may lie inside; values (rows, cells).
    """
    left, right = np.angle(at_left), np.angle(at_right)
    along = _wrapped(right - left)
    turn = along[:-1] + _wrapped(np.diff(right, axis=0)) - along[1:] - _wrapped(np.diff(left, axis=0))
    centre = np.abs(0.25 * (at_left[:-1] + at_left[1:] + at_right[:-1] + at_right[1:]))
    across = np.abs(at_right - at_left)
    along_delay = np.maximum(np.abs(np.diff(at_left, axis=0)), np.abs(np.diff(at_right, axis=0)))
    near = (centre < 0.5 * (np.maximum(across[:-1], across[1:]) + along_delay)).any(axis=1)
    nearest = centre.min(axis=1)
    walled = np.concatenate([[np.inf], nearest, [np.inf]])
    least = (nearest <= walled[:-2]) & (nearest <= walled[2:])
    about = (np.abs(turn) > math.pi).any(axis=1) | (near & least) | _grazed(at_left - 1.0, at_right - 1.0)
    rows: list[int] = np.flatnonzero(about).tolist()
    return rows


def _grazed(left: Complexes, right: Complexes) -> npt.NDArray[np.bool_]:
    """The rows of cells in which abs L may be 1 where L is real and negative, between two delays at which it
    is nearly so; L at the cells' edges, (rows + 1, cells).

    A chord passes −1 by more than an arc about the origin does: ln abs L is followed along the angle instead.
    """
    log_left, log_right = np.log(np.abs(left)), np.log(np.abs(right))
    angle_left, angle_right = np.angle(-left), np.angle(-right)
    crossed = (angle_left * angle_right <= 0) & (np.abs(angle_left - angle_right) < math.pi)
    share = angle_left / np.where(crossed, angle_left - angle_right, 1.0)
    rise = log_right - log_left
    there = np.where(crossed, log_left + share * rise, np.nan)
    # what a straight line in a cell may miss by, and how the value moves from one delay to the next
    bend = np.abs(np.diff(rise, axis=1, prepend=rise[:, :1], append=rise[:, -1:]))
    missed = GRAZING * np.maximum(bend[:, :-1], bend[:, 1:])
    before, behind = there[:-1], there[1:]
    moves = GRAZING * np.nan_to_num(np.abs(behind - before))
    grazed = (np.abs(before) <= missed[:-1] + moves) | (np.abs(behind) <= missed[1:] + moves)
    return np.asarray((grazed | (before * behind <= 0)).any(axis=1))


def _wrapped(angle: Reals) -> Reals:
    return np.asarray((angle + math.pi) % (2.0 * math.pi) - math.pi)
