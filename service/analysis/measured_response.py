"""A loop whose plant is known by points of its frequency response alone: what the points say of its
stability.

The encirclements are counted along the points, ln P between two of them straight in ln ω. The count is left
open where the points leave it open: where P turns too far from one point to the next, where the lowest or the
highest point does not show how L goes on, or where L passes −1 more closely than the straight way and the
rational fit differ. The fit is a second method on the same points, and no more evidence than they are.
"""

from __future__ import annotations

import cmath
import math

import numpy as np

from service.analysis.loop import ClosedLoopParts, Complexes, Reals
from service.analysis.nyquist import Count
from service.analysis.plant import FrequencyResponse
from service.analysis.response_fit import fitted, points, value_of

LARGEST_TURN_RAD = 0.5 * math.pi
"""Between two points P may turn no further than this, or its turns cannot be counted."""

LARGE_AT_START = 10.0
SMALL_AT_END = 0.5
TURNED_AT_START = 0.35
"""What the first and the last point must show: L large, or real but for this share; L small."""

WHOLE = 0.2
"""How far from a whole number the count may be; the ends of the axis are not measured."""

PARTS_OF_A_STEP = 8
STEP_RAD = 0.3
MAX_PARTS = 2000
"""Work bound: a step between two points that would need more parts than this leaves the count open."""

MAX_PARTS_IN_ALL = 40_000
"""Work bound: the same for all steps together."""


def count_by_points(plant: FrequencyResponse, parts: ClosedLoopParts) -> Count:
    """Roots of 1 + L right of the axis as far as the points tell."""
    omega, response = points(plant)
    phase = np.unwrap(np.angle(response))
    if np.any(np.abs(np.diff(phase)) > LARGEST_TURN_RAD):
        return Count(None, reason="the response turns by more than 90° from one point to the next")
    walked = _refined(omega, phase, parts)
    if walked is None:
        return Count(None, reason="the dead time turns L too often between the points")
    at, logs = np.log(walked), np.log(omega)
    straight = np.interp(at, logs, np.log(np.abs(response))) + 1j * np.interp(at, logs, phase)
    # controller, filters, ranges and dead time are what the loop has beside the plant as it was fitted
    by_fit = np.exp(parts.loop.log_response(walked / parts.unit_rad_s))
    along = by_fit / value_of(fitted(plant), walked) * np.exp(straight)
    left_open = _open_ends(along, walked, parts)
    if left_open is not None:
        return Count(None, reason=left_open)
    if np.any(np.abs(1.0 + along) <= 2.0 * np.abs(along - by_fit)):
        return Count(None, reason="between two points L may pass -1 on either side")
    angle = np.unwrap(np.angle(1.0 + along))
    turned = float(angle[-1] - angle[0])
    # from the asymptote at ω = 0 to the first point, along all of them, and from the last to 0
    turned += math.remainder(float(angle[0]) - _angle_at_origin(parts), 2.0 * math.pi)
    turned -= cmath.phase(1.0 + complex(along[-1]))
    roots = plant.unstable_poles + 0.5 * max(parts.loop.order_at_origin, 0) - turned / math.pi
    if not math.isfinite(roots):
        return Count(None, reason="the loop's numbers leave the range of float64")
    if abs(roots - round(roots)) > WHOLE or round(roots) < 0:
        return Count(None, reason="the encirclements along the points do not add up to a whole number")
    return Count(round(roots))


def _angle_at_origin(parts: ClosedLoopParts) -> float:
    """arg(1 + L) as ω falls to 0."""
    order, coefficient = parts.loop.order_at_origin, parts.loop.origin_coefficient
    if order > 0:
        return -0.5 * math.pi * order + (0.0 if coefficient > 0 else math.pi)
    return math.pi if order == 0 and coefficient < -1.0 else 0.0


def _open_ends(along: Complexes, omega: Reals, parts: ClosedLoopParts) -> str | None:
    """What the first or the last point leaves open."""
    order, first = parts.loop.order_at_origin, complex(along[0])
    if order > 0 and abs(first) < LARGE_AT_START:
        return "the lowest point does not reach down to where L is large"
    if order <= 0 and abs(first.imag) > TURNED_AT_START * abs(first):
        return "the lowest point does not reach down to where P turns no more"
    if abs(along[-1]) > SMALL_AT_END:
        return "the highest point does not reach up to where L is small"
    last = np.abs(along[omega >= 0.5 * omega[-1]])
    if last[-1] > last[0]:
        return "L still grows at the highest point"
    return None


def _refined(omega: Reals, phase: Reals, parts: ClosedLoopParts) -> Reals | None:
    """The points and more between them, so that neither dead time nor controller turns far in one step."""
    delayed = np.diff(omega) * parts.dead_time_s
    counts = PARTS_OF_A_STEP + np.ceil((np.abs(np.diff(phase)) + delayed) / STEP_RAD)
    if counts.max() > MAX_PARTS or counts.sum() > MAX_PARTS_IN_ALL:
        return None
    steps = zip(omega[:-1], omega[1:], counts.astype(int).tolist(), strict=True)
    return np.concatenate(
        [omega[:1], *(np.geomspace(low, high, count + 1)[1:] for low, high, count in steps)]
    )
