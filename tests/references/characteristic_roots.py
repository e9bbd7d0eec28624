"""The characteristic roots themselves: Newton from every point of a grid, then fifty digits.

Whether the rightmost one found is the rightmost one there is, the winding count of a line beside it says.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from mpmath import mp, mpc, mpf

from tests.references.told import ExactLoop, derivative, polynomial_roots, value_at
from tests.references.winding import roots_right_of

STEPS = 40
BESIDE = mpf("1e-7")
"""How far from the rightmost root the line lies on which it is counted, relative to the root or the pace."""


def roots_near_axis(loop: ExactLoop, depth: float = 4.0, size: int = 50) -> list[Any]:
    """Roots found with real part above −`depth`·pace, rightmost first, those above or on the real axis only.

    The pace of the loop is the geometric mean of its poles, zeros and 1/dead time. Not proven complete.
    """
    pace = float(natural_pace(loop))
    numerator, denominator = (_in_pace(side, pace) for side in (loop.numerator, loop.denominator))
    theta = float(loop.dead_time) * pace
    top = _top(loop, pace)
    real = np.concatenate([np.linspace(-depth, max(depth, 1.0), size), -np.geomspace(1e-5, depth, size)])
    imag = np.unique(
        np.concatenate([np.linspace(0.0, top, 4 * size), np.geomspace(1e-5, top, 2 * size), [0.0]])
    )
    at = np.concatenate([(real[:, None] + 1j * imag[None, :]).ravel(), _beside_open_loop(loop, pace)])
    with np.errstate(all="ignore"):
        for _ in range(STEPS):
            step = _newton(at, numerator, denominator, theta)
            at = at - step
        arrived = np.abs(step) < 1e-4 * np.maximum(np.abs(at), 1e-6)
    at = at[arrived & (at.real > -depth) & (at.imag > -1e-9) & (np.abs(at) < 4 * top)]
    starts = _distinct(at)
    return _polished(loop, [mpc(complex(start)) * mpf(pace) for start in starts])


def rightmost_root(loop: ExactLoop) -> Any:
    """The rightmost characteristic root, proven by the winding of the lines just beside it."""
    roots = roots_near_axis(loop)
    if not roots:
        raise ValueError("no root was found near the axis")
    rightmost = roots[0]
    beside = BESIDE * max(abs(rightmost.real), mpf("1e-9") * abs(rightmost))
    if roots_right_of(loop, rightmost.real + beside) != 0:
        raise ValueError("a root lies right of the one found")
    if roots_right_of(loop, rightmost.real - beside) == 0:
        raise ValueError("what was found is not a root")
    return rightmost


def natural_pace(loop: ExactLoop) -> Any:
    """The geometric mean of the magnitudes of what the loop is made of, in rad/s."""
    roots = polynomial_roots(loop.denominator) + polynomial_roots(loop.numerator)
    magnitudes = [abs(root) for root in roots if root != 0]
    if loop.dead_time > 0:
        magnitudes.append(1 / loop.dead_time)
    if not magnitudes:
        return mpf(1)
    return mp.exp(mp.fsum(mp.log(magnitude) for magnitude in magnitudes) / len(magnitudes))


def _in_pace(polynomial: list[Any], pace: float) -> Any:
    degree = len(polynomial) - 1
    return np.array([float(c * mpf(pace) ** (degree - index)) for index, c in enumerate(polynomial)])


def _top(loop: ExactLoop, pace: float) -> float:
    roots = polynomial_roots(loop.denominator)
    fastest = max((float(abs(root)) / pace for root in roots), default=1.0)
    delayed = 40.0 / (float(loop.dead_time) * pace) if loop.dead_time > 0 else 1.0
    return min(3.0 * max(fastest, delayed, 1.0), 1e4)


def _beside_open_loop(loop: ExactLoop, pace: float) -> Any:
    """Starts beside every open-loop pole and zero: what is light there is light in the closed loop."""
    roots = polynomial_roots(loop.denominator) + polynomial_roots(loop.numerator)
    centres = np.array([complex(root) / pace for root in roots])
    offsets = np.array([0.0, 0.01, -0.01, 0.1j, -0.1j, -0.05 + 0.05j])
    return (centres[:, None] + np.maximum(np.abs(centres), 1e-3)[:, None] * offsets[None, :]).ravel()


def _newton(s: Any, numerator: Any, denominator: Any, theta: float) -> Any:
    n, d = np.polyval(numerator, s), np.polyval(denominator, s)
    dn, dd = np.polyval(np.polyder(numerator), s), np.polyval(np.polyder(denominator), s)
    delay = np.exp(-s * theta)
    step = (d + n * delay) / (dd + (dn - theta * n) * delay)
    # an overlong step would throw every start of the left half plane to where e^(−sθ) rules
    length = np.abs(step)
    return np.where(length > 1.0, step / length, step)


def _distinct(roots: Any) -> list[complex]:
    """One of each cluster, rightmost first."""
    digits = 6 - np.floor(np.log10(np.maximum(np.abs(roots), 1e-12)))
    scale = 10.0**digits
    rounded = np.round(roots.real * scale) / scale + 1j * np.round(roots.imag * scale) / scale
    _, first = np.unique(rounded, return_index=True)
    found: list[complex] = []
    for root in sorted(roots[first], key=lambda value: -value.real):
        if len(found) < 40 and all(abs(root - other) > 1e-5 * abs(other) for other in found):
            found.append(complex(root))
    return found


def _polished(loop: ExactLoop, starts: list[Any]) -> list[Any]:
    roots: list[Any] = []
    for start in starts:
        root = _newton_exact(loop, start)
        if root is None:
            continue
        # a real root comes back with what is left of its imaginary part, a conjugate with the other sign
        root = mpc(root.real, 0 if abs(root.imag) < mpf("1e-20") * abs(root) else abs(root.imag))
        if all(abs(root - other) > mpf("1e-12") * abs(other) for other in roots):
            roots.append(root)
    return sorted(roots, key=lambda root: -root.real)


def _newton_exact(loop: ExactLoop, root: Any) -> Any:
    """Newton on the characteristic function at fifty digits; None where it does not settle."""
    numerator, denominator = loop.numerator, loop.denominator
    for _ in range(60):
        delay = mp.exp(-root * loop.dead_time)
        n, d = value_at(numerator, root), value_at(denominator, root)
        dn, dd = value_at(derivative(numerator), root), value_at(derivative(denominator), root)
        slope = dd + (dn - loop.dead_time * n) * delay
        if slope == 0:
            return None
        step = (d + n * delay) / slope
        root = root - step
        if abs(step) < mpf("1e-42") * abs(root):
            return root
    # a double root settles to half of the digits only
    return root if abs(step) < mpf("1e-15") * abs(root) else None
