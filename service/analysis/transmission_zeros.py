"""Transmission zeros of a state space with one input and one output.

They are the finite eigenvalues w of the pencil (a b; c d) − w·(1 0; 0 0). Two ways lead there, and which of
them is the better depends on the system, so both are offered and whoever asks compares with the state
equations.

Source: A. Emami-Naeini, P. Van Dooren, Computation of zeros of linear multivariable systems, Automatica 18
(1982), for the pencil and its conditioning. From memory.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import numpy.typing as npt

Reals = npt.NDArray[np.float64]
Complexes = npt.NDArray[np.complex128]

SHIFT = 0.37
"""A point right of the axis, where no system has a zero but by chance; time is told so that dynamics lie
about 1.
"""

FARTHEST_ZERO = 1e13
"""A zero beyond this lies at infinity to float64."""


def transmission_zeros(a: Reals, b: Reals, c: Reals, d: float) -> Iterator[Complexes]:
    """Candidates, complex (m,), those at infinity left out: by way of 1/(w − σ), of which a zero at infinity
    is an ordinary eigenvalue 0, and as eigenvalues of a − b·c/d.

    `a` (n, n), `b` and `c` (n,), none of the last two all 0. Raises LinAlgError where the response is 0
    throughout.
    """
    n = len(a)
    pencil = np.zeros((n + 1, n + 1))
    pencil[:n, :n], pencil[:n, n], pencil[n, :n], pencil[n, n] = a - SHIFT * np.eye(n), b, c, d
    # both sides brought to one size, which moves no zero
    pencil[:, n] /= float(np.abs(b).max(initial=0.0)) or 1.0
    pencil[n] /= float(np.abs(pencil[n]).max()) or 1.0
    inverse = np.linalg.eigvals(np.linalg.inv(pencil)[:, :n] @ np.eye(n, n + 1)).astype(complex)
    zeros = SHIFT + 1.0 / inverse[np.abs(inverse) > 1.0 / FARTHEST_ZERO]
    yield _polished(_polished(zeros, a, b, c, d), a, b, c, d)
    if d != 0:
        zeros = np.linalg.eigvals(a - np.outer(b, c) / d).astype(complex)
        zeros = zeros[np.abs(zeros) < FARTHEST_ZERO]
        yield _polished(_polished(zeros, a, b, c, d), a, b, c, d)


def response(a: Reals, b: Reals, c: Reals, d: float, s: Complexes) -> Complexes:
    """c·(s − a)⁻¹·b + d, shape of `s`."""
    states = np.linalg.solve(s[:, None, None] * np.eye(len(a)) - a, b[:, None])
    return np.asarray(states[..., 0] @ c + d)


def log_product(points: Complexes, zeros: Complexes, poles: Complexes) -> Complexes:
    """ln of ∏(s−z)/∏(s−p), shape of `points`."""
    logs = np.log(points[:, None] - zeros).sum(1) - np.log(points[:, None] - poles).sum(1)
    return np.asarray(logs)


def _polished(zeros: Complexes, a: Reals, b: Reals, c: Reals, d: float) -> Complexes:
    """One step of Newton on the state equations, kept where it is small."""
    try:
        resolvent = np.linalg.inv(zeros[:, None, None] * np.eye(len(a)) - a)
    except np.linalg.LinAlgError:
        # a zero that is a pole too
        return zeros
    state = resolvent @ b
    value, slope = state @ c + d, -((resolvent @ state[..., None])[..., 0] @ c)
    step = value / slope
    step = np.where(np.isfinite(step) & (np.abs(step) < 1e-3 * np.abs(zeros)), step, 0.0)
    moved = zeros - step
    # a real zero stays real, and a pair a pair
    return np.where(zeros.imag == 0, moved.real + 0j, moved)
