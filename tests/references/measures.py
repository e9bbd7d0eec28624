"""The metrics of a marched response, by the interface's definitions, from its cubics."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from tests.references.marching import Marched

# Gauss-Legendre of four points on 0…1: exact for the square of a cubic
_NODES, _WEIGHTS = (lambda x, w: (0.5 * (x + 1.0), 0.5 * w))(*np.polynomial.legendre.leggauss(4))


@dataclass(frozen=True)
class SetpointMeasures:
    """Of a unit step of the set point."""

    rise_time: float
    settling_time: float
    overshoot_percent: float
    undershoot_percent: float
    peak_time: float
    iae: float
    ise: float
    itae: float
    output_peak: float
    output_total_variation: float


@dataclass(frozen=True)
class LoadMeasures:
    """Of a unit step of the load."""

    peak_deviation: float
    peak_time: float
    recovery_time: float
    iae: float
    integrated_error: float


def setpoint_measures(marched: Marched, final: float, band_percent: float = 2.0) -> SetpointMeasures:
    """Every metric; the march has to be long enough for its integrals."""
    cubics = _cubics(marched.step, marched.pv, marched.pv_slope)
    low = _extremum(marched, cubics, -np.sign(final))[1]
    peak_time, peak = _extremum(marched, cubics, np.sign(final))
    iae, ise, itae, _ = _integrals(marched, cubics, 1.0)
    output = _cubics(marched.step, marched.output, marched.output_slope)
    high, lowest = _extremum(marched, output, 1.0)[1], _extremum(marched, output, -1.0)[1]
    return SetpointMeasures(
        rise_time=_first_passage(marched, cubics, 0.9 * final) - _first_passage(marched, cubics, 0.1 * final),
        settling_time=_last_outside(marched, cubics, final, abs(final) * band_percent / 100.0),
        overshoot_percent=100.0 * max(0.0, peak / final - 1.0),
        undershoot_percent=100.0 * max(0.0, -low / final),
        peak_time=peak_time,
        iae=iae,
        ise=ise,
        itae=itae,
        output_peak=max(abs(high), abs(lowest)),
        output_total_variation=_variation(output, marched),
    )


def load_measures(marched: Marched, final: float) -> LoadMeasures:
    """Every metric of a load step; the set point stays at 0."""
    cubics = _cubics(marched.step, marched.pv, marched.pv_slope)
    above, below = _extremum(marched, cubics, 1.0), _extremum(marched, cubics, -1.0)
    peak_time, peak = above if abs(above[1]) >= abs(below[1]) else below
    iae, _, _, integrated = _integrals(marched, cubics, 0.0)
    return LoadMeasures(
        peak_deviation=peak,
        peak_time=peak_time,
        recovery_time=_last_outside(marched, cubics, final, 0.05 * abs(peak)),
        iae=iae,
        integrated_error=integrated,
    )


def _cubics(step: float, values: tuple[Any, Any], slopes: tuple[Any, Any]) -> Any:
    """Coefficients by rising power of the share of the step, shape (4, pieces)."""
    left, right = values
    rise, slope_left, slope_right = right - left, step * slopes[0], step * slopes[1]
    return np.array(
        [left, slope_left, 3 * rise - 2 * slope_left - slope_right, slope_left + slope_right - 2 * rise]
    )


def _at(cubics: Any, share: Any) -> Any:
    return cubics[0] + share * (cubics[1] + share * (cubics[2] + share * cubics[3]))


def _turns(cubics: Any) -> tuple[Any, Any]:
    """Pieces and shares at which a cubic turns within its piece."""
    a, b, c = 3 * cubics[3], 2 * cubics[2], cubics[1]
    with np.errstate(all="ignore"):
        root = np.sqrt(b * b - 4 * a * c)
        q = -0.5 * (b + np.where(b >= 0, 1.0, -1.0) * root)
        shares = np.array([q / a, c / q])
    inside = (shares > 0) & (shares < 1)
    which, pieces = np.nonzero(inside)
    return pieces, shares[which, pieces]


def _extremum(marched: Marched, cubics: Any, sign: float) -> tuple[float, float]:
    """Time and value of the highest (sign 1) or lowest (sign −1) point."""
    pieces, shares = _turns(cubics)
    count = cubics.shape[1]
    pieces = np.concatenate([np.arange(count), np.arange(count), pieces])
    shares = np.concatenate([np.zeros(count), np.ones(count), shares])
    values = _at(cubics[:, pieces], shares)
    best = int(np.argmax(sign * values))
    return float(marched.start[pieces[best]] + shares[best] * marched.step), float(values[best])


def _passages(cubics: Any, piece: int, level: float) -> list[float]:
    roots = np.roots((cubics[:, piece] - np.array([level, 0, 0, 0]))[::-1])
    real = roots[np.abs(roots.imag) < 1e-9].real
    return sorted(float(share) for share in real if -1e-9 <= share <= 1 + 1e-9)


def _reach(cubics: Any) -> tuple[Any, Any]:
    """Lowest and highest value of each piece."""
    low, high = np.minimum(cubics[0], _at(cubics, 1.0)), np.maximum(cubics[0], _at(cubics, 1.0))
    pieces, shares = _turns(cubics)
    turned = _at(cubics[:, pieces], shares)
    np.minimum.at(low, pieces, turned)
    np.maximum.at(high, pieces, turned)
    return low, high


def _first_passage(marched: Marched, cubics: Any, level: float) -> float:
    low, high = _reach(cubics)
    reached = np.flatnonzero((high >= level) if level > 0 else (low <= level))
    piece = int(reached[0])
    shares = _passages(cubics, piece, level)
    return float(marched.start[piece] + (shares[0] if shares else 0.0) * marched.step)


def _last_outside(marched: Marched, cubics: Any, final: float, band: float) -> float:
    low, high = _reach(cubics)
    outside = np.flatnonzero((high > final + band) | (low < final - band))
    if not outside.size:
        return 0.0
    piece = int(outside[-1])
    shares = _passages(cubics, piece, final + band) + _passages(cubics, piece, final - band)
    return float(marched.start[piece] + (max(shares) if shares else 1.0) * marched.step)


def _integrals(marched: Marched, cubics: Any, level: float) -> tuple[float, float, float, float]:
    """∫abs e, ∫e², ∫t·abs e and ∫e, e = level − PV; a sign change within a piece costs its square only."""
    error = level - np.array([_at(cubics, node) for node in _NODES])
    time = np.array([marched.start + node * marched.step for node in _NODES])
    weight = marched.step * _WEIGHTS[:, None]
    return (
        float((weight * np.abs(error)).sum()),
        float((weight * error**2).sum()),
        float((weight * time * np.abs(error)).sum()),
        float((weight * error).sum()),
    )


def _variation(cubics: Any, marched: Marched) -> float:
    """Total variation from rest: within the pieces, between them, and the jump at the start."""
    pieces, shares = _turns(cubics)
    within = np.abs(_at(cubics, 1.0) - cubics[0]).sum()
    for piece in np.unique(pieces):
        at = [0.0, *np.sort(shares[pieces == piece]), 1.0]
        values = _at(cubics[:, piece], np.array(at))
        within += np.abs(np.diff(values)).sum() - abs(values[-1] - values[0])
    jumps = np.abs(cubics[0][1:] - _at(cubics, 1.0)[:-1]).sum()
    return float(abs(cubics[0][0]) + within + jumps)
