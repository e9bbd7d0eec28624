"""A plant that is entered as a state space, told as zeros, poles and gain; every mode of it stays.

Modes that the input does not reach or PV does not see come back as a pole with a zero upon it, so that they
count where they lie, as everywhere.
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from service.analysis.errors import FieldError
from service.analysis.plant import StateSpace
from service.analysis.transmission_zeros import log_product, response, transmission_zeros

MET = 1e-9
"""How well zeros, poles and gain must give the state space's own response, relatively."""

AT_ORIGIN = 1e-13
"""A singular value smaller than this, against the largest, makes a pole at the origin."""

ONE_NUMBER = 1e-10
"""A zero nearer to a pole than this, relatively, lies upon it."""

Reals = npt.NDArray[np.float64]
Complexes = npt.NDArray[np.complex128]


def zeros_poles_gain(
    plant: StateSpace,
) -> tuple[tuple[complex, ...], tuple[complex, ...], float]:
    """Zeros and poles in rad/s, conjugates adjacent, and the leading gain.

    Raises FieldError where float64 does not give the zeros.
    """
    a, b, c = np.array(plant.a), np.array(plant.b), np.array(plant.c)
    poles = _poles(a)
    sizes = np.abs(poles[poles != 0])
    unit = float(np.exp(np.log(sizes).mean())) if sizes.size else 1.0
    scaled = a / unit, b / unit, c, plant.d
    if not (np.any(b) and np.any(c)):
        return (), tuple(poles.tolist()), plant.d
    for zeros in _candidates(scaled):
        zeros = _upon_poles(zeros, poles / unit)
        gain = _gain(scaled, zeros, poles / unit)
        # of a pair as near together as rounding both may be taken for one of two poles
        paired = np.count_nonzero(zeros.imag > 0) == np.count_nonzero(zeros.imag < 0)
        if gain is not None and paired:
            leading = gain * unit ** (len(poles) - len(zeros))
            return tuple((zeros * unit).tolist()), tuple(poles.tolist()), leading
    raise FieldError(("a",), "the zeros of this state space cannot be computed to enough digits")


def _candidates(scaled: tuple[Reals, Reals, Reals, float]) -> list[Complexes]:
    try:
        return list(transmission_zeros(*scaled))
    except np.linalg.LinAlgError:
        # the response is 0 throughout
        return []


def _poles(a: Reals) -> Complexes:
    """Eigenvalues, those at the origin exact: each is split off by a vector that A takes to 0."""
    largest = float(np.abs(a).max(initial=0.0))
    # a power of two moves no bit, and LAPACK may never end on singular values of a matrix that has overflown
    size = 2.0 ** math.floor(math.log2(largest)) if largest > 0 else 1.0
    at_origin = 0
    rest = a / size
    largest /= size
    while rest.size:
        _, sizes, vectors = np.linalg.svd(rest)
        if sizes[-1] > AT_ORIGIN * max(float(sizes[0]), largest):
            break
        at_origin += 1
        rest = vectors[:-1] @ rest @ vectors[:-1].T
    others = size * np.linalg.eigvals(rest).astype(complex) if rest.size else np.empty(0, complex)
    return np.concatenate([np.zeros(at_origin, complex), others])


def _upon_poles(zeros: Complexes, poles: Complexes) -> Complexes:
    """Zeros that are poles but for rounding, made those."""
    result = zeros.copy()
    typical = float(np.abs(poles).max(initial=0.0))
    for index, zero in enumerate(zeros):
        distance = np.abs(poles - zero)
        nearest = int(np.argmin(distance))
        if distance[nearest] <= ONE_NUMBER * max(abs(zero), 1e-3 * typical):
            result[index] = poles[nearest]
    return result


def _gain(scaled: tuple[Reals, Reals, Reals, float], zeros: Complexes, poles: Complexes) -> float | None:
    """The leading gain; None where the factors do not give the response on the axis."""
    sizes = np.abs(np.concatenate([zeros, poles]))
    sizes = sizes[(sizes > 0) & (sizes < 1e8)]
    low, high = (float(sizes.min()), float(sizes.max())) if sizes.size else (1.0, 1.0)
    points: Complexes = np.asarray(1j * np.geomspace(0.1 * low, 10.0 * high, 16) * 1.0123)
    with np.errstate(all="ignore"):
        direct = response(*scaled, points)
        ratio = direct / np.exp(log_product(points, zeros, poles))
    size = np.abs(direct)
    told = size >= 1e-6 * float(size.max())
    if not told.any():
        return None
    gain = float(np.median(ratio.real[told]))
    met = math.isfinite(gain) and gain != 0 and bool(np.all(np.abs(ratio[told] - gain) <= MET * abs(gain)))
    return gain if met else None
