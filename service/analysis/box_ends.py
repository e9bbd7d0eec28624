"""The two ends of the axis over the whole box, by series: what no cell of finite size can enclose.

With ρ the sum of −ln(1 − |ω/r|) over all roots (of |r/ω| at the upper end), L differs from its asymptote by a
factor whose logarithm is at most ρ in magnitude. Roots come in conjugate pairs, so that the first terms of
the series cancel in ln abs L, and its error is at most ρ₂, the sum of ½|ω/r|²/(1 − |ω/r|).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from service.analysis.box import TURN, Bounds, UncertainLoop
from service.analysis.loop import Reals

POWERS = np.concatenate([np.arange(0.0, 12.0, 0.5), np.arange(12.0, 91.0, 2.0)])
"""So many powers of e beyond the outermost root are tried as the end of the axis; past that it has none."""

LARGEST_RATIO = 0.3
"""The series is used where ω/r (or r/ω) is no larger than this."""

FLAT = 1e-5
"""Where L tends to a constant, the end is so near to it that ω/r is no larger than this."""


class EndsError(Exception):
    """The asymptotes are not reached within float64, or a member has a root at an end of the axis."""


@dataclass(frozen=True, slots=True)
class Wanted:
    """What an end has to exclude: abs L between the two levels (ln), for a k that is included in them."""

    log_small: float
    """Where L vanishes, ln abs L is below this in the end."""
    log_large: float
    """Where L grows, ln abs L is above this in the end."""


@dataclass(frozen=True, slots=True)
class End:
    """One end of the axis: ω below (or above) `omega`, all members; k and dead time included.

    `order` as in abs L → ω^(−order); `log_magnitude` bounds of ln abs L, `value`: the range of the real limit
    where L tends to a constant (each member's at dead time 0), `log_error` and `angle_error` how far ln abs L
    and the argument of L without dead time are from their limits; `angle`: the argument of −L at the limit.
    """

    omega: float
    order: int
    log_magnitude: tuple[float, float]
    value: tuple[float, float]
    log_error: float
    angle_error: float
    angle: float
    turns: bool
    """Dead time turns L to every angle (the upper end of a box that has members with dead time)."""
    never_crosses: bool
    """−L is nowhere real and positive in this end."""

    @property
    def distance_of_angle(self) -> float:
        """A bound below the angle from −L to the positive axis, where no dead time turns L."""
        return max(0.0, _from_multiple(self.angle) - self.angle_error)


def lower_end(loop: UncertainLoop, bounds: Bounds, wanted: Wanted) -> End:
    """The lower end, as near as what is wanted allows. Raises EndsError."""
    sizes = loop.sizes
    # a root r of the plant lies at r/f: the nearest to the origin counts
    nearest = np.where(loop.of_plant, sizes * math.exp(-bounds.log_time[1]), sizes)[sizes > 0]
    order = loop.order_at_origin
    candidates = _outwards(nearest.min() if nearest.size else 1.0, -1.0)
    ratio = candidates[:, None] / nearest
    log_error, angle_error = _errors(ratio)
    low, high = (loop.log_origin_coefficient + log for log in bounds.log_gain)
    low_log, high_log = (
        low - order * np.log(candidates) - log_error,
        high - order * np.log(candidates) + log_error,
    )
    turned = candidates * bounds.dead_time[1]
    if order > 0:
        fit = low_log > wanted.log_large
    elif order < 0:
        fit = high_log < wanted.log_small
    else:
        fit = (ratio.max(1, initial=0.0) <= FLAT) & (turned <= FLAT)
    index = _first(fit & (ratio.max(1, initial=0.0) <= LARGEST_RATIO))
    value = (0.0, 0.0)
    if order == 0:
        value = _between(loop.origin_sign * math.exp(low), loop.origin_sign * math.exp(high))
    angle = _angle_at_origin(loop)
    never = bool(_from_multiple(angle) > angle_error[index] + turned[index])
    return End(
        omega=float(candidates[index]),
        order=order,
        log_magnitude=_within(order, low_log[index], high_log[index], above=order > 0),
        value=value,
        log_error=float(log_error[index]),
        angle_error=float(angle_error[index] + turned[index]),
        angle=angle,
        turns=False,
        never_crosses=never,
    )


def upper_end(loop: UncertainLoop, bounds: Bounds, wanted: Wanted) -> End:
    """The upper end, as near as what is wanted allows. Raises EndsError."""
    sizes = loop.sizes
    farthest = np.where(loop.of_plant, sizes * math.exp(-bounds.log_time[0]), sizes)[sizes > 0]
    order = loop.excess
    candidates = _outwards(farthest.max() if farthest.size else 1.0, 1.0)
    ratio = farthest / candidates[:, None]
    log_error, angle_error = _errors(ratio)
    grown = [loop.growth_at_infinity * log for log in bounds.log_time]
    low = loop.log_gain + bounds.log_gain[0] + min(grown)
    high = loop.log_gain + bounds.log_gain[1] + max(grown)
    low_log, high_log = (
        low - order * np.log(candidates) - log_error,
        high - order * np.log(candidates) + log_error,
    )
    if order > 0:
        fit = high_log < wanted.log_small
    elif order < 0:
        fit = low_log > wanted.log_large
    else:
        fit = ratio.max(1, initial=0.0) <= FLAT
    fits = fit & (ratio.max(1, initial=0.0) <= LARGEST_RATIO)
    turns = bounds.dead_time[1] > 0
    never = np.zeros(len(fits), bool) if turns else _never_crosses(loop, bounds, candidates, angle_error)
    # where no dead time turns L, an end in which it does not cross is worth some steps more
    index = _first(fits & never) if (fits & never).any() else _first(fits)
    value = (0.0, 0.0)
    if order == 0:
        value = _between(loop.sign * math.exp(low), loop.sign * math.exp(high))
    return End(
        omega=float(candidates[index]),
        order=order,
        log_magnitude=_within(order, low_log[index], high_log[index], above=order < 0),
        value=value,
        log_error=float(log_error[index]),
        angle_error=float(angle_error[index]),
        angle=_angle_at_infinity(loop),
        turns=turns,
        never_crosses=bool(never[index]),
    )


def _outwards(start: float, direction: float) -> Reals:
    return start * np.exp(direction * POWERS)


def _errors(ratio: Reals) -> tuple[Reals, Reals]:
    """(ρ₂, ρ), from the ratios of shape (q, m), where they are below 1; shape (q,)."""
    ratio = np.minimum(ratio, 0.99)
    return (0.5 * ratio * ratio / (1.0 - ratio)).sum(1) + 1e-12, -np.log1p(-ratio).sum(1) + 1e-12


def _first(fit: npt.NDArray[np.bool_]) -> int:
    found = np.flatnonzero(fit)
    if not found.size:
        raise EndsError
    return int(found[0])


def _within(order: int, low: float, high: float, *, above: bool) -> tuple[float, float]:
    """Bounds of ln abs L in all of the end: beyond its edge L grows (`above`), vanishes or stays."""
    if order == 0:
        return float(low), float(high)
    return (float(low), math.inf) if above else (-math.inf, float(high))


def _between(first: float, second: float) -> tuple[float, float]:
    return min(first, second), max(first, second)


def _angle_at_origin(loop: UncertainLoop) -> float:
    """The argument of −L as ω falls to 0, up to whole turns."""
    sign = math.pi if loop.origin_sign < 0 else 0.0
    return sign + math.pi - 0.5 * math.pi * loop.order_at_origin


def _angle_at_infinity(loop: UncertainLoop) -> float:
    sign = math.pi if loop.sign < 0 else 0.0
    return sign + math.pi - 0.5 * math.pi * loop.excess


def _from_multiple(angle: float) -> float:
    return abs((angle + math.pi) % TURN - math.pi)


def _never_crosses(
    loop: UncertainLoop, bounds: Bounds, omega: Reals, angle_error: Reals
) -> npt.NDArray[np.bool_]:
    """Whether −L, without dead time, is real and positive nowhere above `omega`, shape of `omega`."""
    angle = _angle_at_infinity(loop)
    distance = _from_multiple(angle)
    if distance > 0.1:
        return np.asarray(angle_error < distance)
    # the phase tends to −180°: it stays on one side where the first term of its series outweighs the rest,
    # arg(jω − r) = π/2 + Re r/ω + …, the next term being of third order since roots come in pairs
    fixed = float((loop.roots.real * loop.weights)[~loop.of_plant].sum())
    moving = float((loop.roots.real * loop.weights)[loop.of_plant].sum())
    first = [fixed + moving * math.exp(-log) for log in bounds.log_time]
    if first[0] * first[1] <= 0:
        return np.zeros(len(omega), bool)
    sizes = np.abs(loop.roots) * np.where(loop.of_plant, math.exp(-bounds.log_time[0]), 1.0)
    ratio = np.minimum(sizes / omega[:, None], 0.99)
    rest = (ratio**3 / (1.0 - ratio)).sum(1)
    return np.asarray(min(abs(first[0]), abs(first[1])) / omega > rest + 1e-12 * (np.abs(first[0]) / omega))
