"""The verdict of one analysis: two unrelated routes, and `undecided` where they do not say the same."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from service.analysis.frequency import AxisResponse
from service.analysis.loop import EPSILON, ClosedLoopParts, Complexes
from service.analysis.nyquist import ROUNDING_FACTOR, Count, count_right_of_axis
from service.analysis.realisation import StateSpace
from service.analysis.results import DominantRoot, Quantity, Route, Stability, Unbounded, Verdict
from service.analysis.roots import CharacteristicRoots, characteristic_roots

MAX_DOMINANT_ROOTS = 6

NYQUIST = "encirclements of -1 counted from the gain crossovers (Nyquist)"
POINTS = (
    "encirclements of -1 counted along the measured points; the other methods use a fit of these same points"
)
ROOTS = "characteristic roots by collocation of the delay system, polished by Newton"


@dataclass(frozen=True, eq=False)
class DecidedStability:
    """The stability to report, and the roots for whoever goes on computing."""

    stability: Stability
    roots: CharacteristicRoots


def decide(
    parts: ClosedLoopParts, space: StateSpace | None, axis: AxisResponse, by_points: Count | None = None
) -> DecidedStability:
    """Reach the verdict of the continuous loop by both routes, and by measured points where the plant is
    those.
    """
    hidden = count_hidden(parts.hidden_roots)
    routes = [] if by_points is None else [route(POINTS, by_points, hidden)]
    routes.append(route(NYQUIST, count_right_of_axis(axis), hidden))
    roots = characteristic_roots(space, axis, parts.hidden_roots)
    routes.append(route(ROOTS, roots.count, hidden))
    verdict, unstable_roots, reason = agree(routes)
    stability = Stability(
        verdict=verdict,
        unstable_roots=unstable_roots,
        routes=tuple(routes),
        decay_rate_per_s=_decay_rate_per_s(parts, roots),
        dominant_roots=_dominant_roots(parts, roots),
        reason=reason,
    )
    return DecidedStability(stability, roots)


def agree(routes: list[Route]) -> tuple[Verdict, int | Unbounded | None, str | None]:
    """One verdict from several routes: theirs where all say the same, else `undecided` with the reason."""
    undecided = [route for route in routes if route.verdict == "undecided"]
    if undecided:
        return "undecided", None, undecided[0].reason
    answers = {(route.verdict, route.unstable_roots) for route in routes}
    if len(answers) > 1:
        return "undecided", None, "the two methods do not find the same number of unstable roots"
    return routes[0].verdict, routes[0].unstable_roots, None


def route(method: str, count: Count, hidden: Count) -> Route:
    """One method's answer, the hidden roots added to its count."""
    if count.infinitely_many:
        return Route(method=method, verdict="unstable", unstable_roots="unbounded")
    if count.roots is None or hidden.roots is None:
        return Route(
            method=method, verdict="undecided", unstable_roots=None, reason=count.reason or hidden.reason
        )
    total = count.roots + hidden.roots
    return Route(method=method, verdict="unstable" if total else "stable", unstable_roots=total)


def count_hidden(hidden: Complexes) -> Count:
    """Cancelled factors count where they lie; one exactly on the axis never comes to rest."""
    on_axis = np.abs(hidden.real) <= ROUNDING_FACTOR * EPSILON * np.abs(hidden)
    if np.any(on_axis):
        return Count(
            None, reason="a factor that controller and plant cancel lies on the axis; it never comes to rest"
        )
    return Count(int(np.count_nonzero(hidden.real > 0)))


def _decay_rate_per_s(parts: ClosedLoopParts, roots: CharacteristicRoots) -> Quantity:
    real_parts = [float(part) for part in roots.roots.real] + [
        float(part) for part in parts.hidden_roots.real
    ]
    loop = parts.loop
    if loop.dead_time > 0 and 0 < loop.high_frequency_magnitude < math.inf:
        real_parts.append(math.log(loop.high_frequency_magnitude) / loop.dead_time)
    if not real_parts or (roots.count.roots is None and not roots.count.infinitely_many):
        return None
    if roots.count.infinitely_many and not math.isfinite(loop.high_frequency_magnitude):
        return None
    return -max(real_parts) * parts.unit_rad_s


def _dominant_roots(parts: ClosedLoopParts, roots: CharacteristicRoots) -> tuple[DominantRoot, ...]:
    hidden = parts.hidden_roots[parts.hidden_roots.imag >= 0]
    every = np.concatenate([roots.roots, hidden]) * parts.unit_rad_s
    every = every[np.lexsort((np.abs(every.imag), -every.real))]
    return tuple(dominant_root(complex(root)) for root in every[:MAX_DOMINANT_ROOTS])


def dominant_root(root: complex) -> DominantRoot:
    """A root in rad/s with its damping ratio."""
    size = abs(root)
    damping_ratio = -root.real / size if size > 0 else 0.0
    return DominantRoot(
        root=root.real if root.imag == 0 else (root.real, root.imag), damping_ratio=damping_ratio
    )
