"""A rational plant through measured points of a frequency response.

Source: Y. Nakatsukasa, O. Sète, L. N. Trefethen, The AAA algorithm for rational approximation, SIAM J. Sci.
Comput. 40 (2018), as scipy has it.
"""

from __future__ import annotations

import warnings
from collections.abc import Iterator
from functools import lru_cache

import numpy as np
import numpy.typing as npt

from service.analysis.errors import FieldError
from service.analysis.plant import MAX_ORDER, FrequencyResponse
from service.analysis.transmission_zeros import transmission_zeros

Reals = npt.NDArray[np.float64]
Complexes = npt.NDArray[np.complex128]

ZerosPolesGain = tuple[tuple[complex, ...], tuple[complex, ...], float]

EXACT = 1e-9
"""Error, against the largest response, at which AAA stops; what needs more poles than a plant has is
noise.
"""

MOST_POLES_BETWEEN = 8
RELOCATIONS = 12
"""Vector fitting: poles tried, and how often they are moved."""

MET_ON_THE_WHOLE, MET_AT_EACH_POINT = 0.05, 0.15
"""How well the fit must give the points, relatively: root mean square, and each one."""

SMALL_SHARE = 1e-3
"""A point whose response is smaller than this, against the median, is met to this share of it."""


def fitted(plant: FrequencyResponse) -> ZerosPolesGain:
    """Zeros and poles in rad/s and the leading gain, with the stated poles right of the axis and at the
    origin.

    Raises FieldError where no fit with those goes through the points.
    """
    found = _fit(plant)
    if found is None:
        raise FieldError(
            ("response",),
            "no rational response with the stated poles right of the axis and at the origin goes through "
            "these points",
        )
    return found


def points(plant: FrequencyResponse) -> tuple[Reals, Complexes]:
    """Frequencies in rad/s and the response there, (m,) each."""
    return np.array(plant.frequencies_rad_s), np.array([complex(*point) for point in plant.response])


def value_of(found: ZerosPolesGain, omega: Reals) -> Complexes:
    """The fitted response at frequencies in rad/s, shape of `omega`."""
    zeros, poles, gain = found
    s = 1j * omega[:, None]
    logs = np.log(s - np.array(zeros, complex)).sum(1) - np.log(s - np.array(poles, complex)).sum(1)
    return np.asarray(gain * np.exp(logs))


@lru_cache(maxsize=32)
def _fit(plant: FrequencyResponse) -> ZerosPolesGain | None:
    omega, response = points(plant)
    unit = float(np.exp(np.log(omega).mean()))
    at: Complexes = np.asarray(1j * omega / unit)
    # what the poles at the origin do is known, and the fit is spared it
    smooth: Complexes = np.asarray(response * at**plant.poles_at_origin)
    with warnings.catch_warnings(), np.errstate(all="ignore"):
        warnings.simplefilter("ignore")
        if not _carried(at.imag, smooth):
            return None
        for zeros, poles in _candidates(at, smooth):
            every = np.concatenate([np.zeros(plant.poles_at_origin, complex), poles])
            # a proper plant has no more zeros than poles; the farthest say nothing of what was measured
            kept = zeros[np.argsort(np.abs(zeros), kind="stable")][: len(every)]
            shape = value_of((tuple(kept), tuple(every), 1.0), omega / unit)
            gain = float(np.median((response / shape).real)) * unit ** (len(every) - len(kept))
            found = (tuple((kept * unit).tolist()), tuple((every * unit).tolist()), gain)
            if _meets(plant, found):
                return found
    return None


def _carried(omega: Reals, smooth: Complexes) -> bool:
    """Whether every divided difference of the points is a float64: LAPACK may not end on an inf."""
    nearest = min(float(np.diff(omega).min()), float(omega[0]))
    return bool(np.isfinite(4.0 * np.abs(smooth) / nearest).all())


def _candidates(at: Complexes, smooth: Complexes) -> Iterator[tuple[Complexes, Complexes]]:
    """Zeros and poles of fits: through the points, then between them with more and more poles."""
    # scipy's interpolation is large, and only this kind of plant needs it
    from scipy.interpolate import AAA  # noqa: PLC0415

    both = np.concatenate([at, np.conj(at)]), np.concatenate([smooth, np.conj(smooth)])
    try:
        through = AAA(*both, rtol=EXACT, max_terms=MAX_ORDER + 1)
        yield _in_pairs(through.roots()), _in_pairs(through.poles())
    except (ValueError, np.linalg.LinAlgError):
        # its numbers have left float64
        pass
    for order in range(1, min(MOST_POLES_BETWEEN, len(at) - 1) + 1):
        try:
            yield _between(at, smooth, order)
        except np.linalg.LinAlgError:
            continue


def _between(at: Complexes, smooth: Complexes, order: int) -> tuple[Complexes, Complexes]:
    """Vector fitting with so many poles, every point weighed by its own size."""
    omega = np.abs(at)
    poles = np.asarray(-np.geomspace(omega[0], omega[-1], order), complex)
    weight = 1.0 / np.maximum(np.abs(smooth), SMALL_SHARE * float(np.median(np.abs(smooth))))
    one = np.ones((len(at), 1), complex)
    for _ in range(RELOCATIONS):
        basis = _basis(at, poles)
        found = _least_squares([basis, one, -smooth[:, None] * basis], smooth, weight)
        a, b = _realised(poles)
        poles = _in_pairs(np.linalg.eigvals(a - np.outer(b, found[order + 1 :])).astype(complex))
    found = _least_squares([_basis(at, poles), one], smooth, weight)
    a, b = _realised(poles)
    zeros = next(transmission_zeros(a, b, found[:order], float(found[order])))
    return _in_pairs(zeros), poles


def _basis(at: Complexes, poles: Complexes) -> Complexes:
    """1/(s − p) for a real pole, the sum and j times the difference for a pair; (points, poles)."""
    columns = []
    for pole in poles[poles.imag >= 0]:
        one = 1.0 / (at - pole)
        if pole.imag == 0:
            columns.append(one)
        else:
            other = 1.0 / (at - np.conj(pole))
            columns += [one + other, 1j * (one - other)]
    return np.column_stack(columns)


def _realised(poles: Complexes) -> tuple[Reals, Reals]:
    """A and b of a state space whose states are the functions of `_basis`, in its order."""
    a, b = np.zeros((len(poles), len(poles))), np.zeros(len(poles))
    row = 0
    for pole in poles[poles.imag >= 0]:
        if pole.imag == 0:
            a[row, row], b[row] = pole.real, 1.0
            row += 1
        else:
            a[row : row + 2, row : row + 2] = [[pole.real, pole.imag], [-pole.imag, pole.real]]
            b[row] = 2.0
            row += 2
    return a, b


def _least_squares(columns: list[Complexes], values: Complexes, weight: Reals) -> Reals:
    """Real coefficients, by the real and imaginary parts of every row; columns brought to one size."""
    weighed = np.column_stack(columns) * weight[:, None]
    stacked = np.concatenate([weighed.real, weighed.imag])
    if not np.isfinite(stacked).all():
        raise np.linalg.LinAlgError("the numbers have left float64")
    sizes = np.linalg.norm(stacked, axis=0)
    sizes[sizes == 0] = 1.0
    found = np.linalg.lstsq(
        stacked / sizes, np.concatenate([values.real * weight, values.imag * weight]), rcond=None
    )[0]
    return np.asarray(found / sizes)


def _meets(plant: FrequencyResponse, found: ZerosPolesGain) -> bool:
    zeros, poles, gain = found
    if not np.isfinite([*zeros, *poles, gain]).all() or len(poles) > MAX_ORDER:
        return False
    if sum(pole.real > 0 for pole in poles) != plant.unstable_poles or _unpaired(zeros):
        return False
    omega, response = points(plant)
    size = np.maximum(np.abs(response), SMALL_SHARE * float(np.median(np.abs(response))))
    error = np.abs(value_of(found, omega) - response) / size
    return bool(np.sqrt((error**2).mean()) <= MET_ON_THE_WHOLE and error.max() <= MET_AT_EACH_POINT)


def _unpaired(roots: tuple[complex, ...]) -> bool:
    return sum(root.imag for root in roots) != 0


def _in_pairs(roots: Complexes) -> Complexes:
    """Roots of a fit to a real response, which come in pairs but for rounding: made exact pairs and real
    ones.
    """
    upper = roots[roots.imag > 1e-8 * np.abs(roots)]
    lower = roots[roots.imag < -1e-8 * np.abs(roots)]
    real = roots[np.abs(roots.imag) <= 1e-8 * np.abs(roots)].real
    pairs: list[complex] = []
    for root in upper.tolist():
        if not lower.size:
            break
        nearest = int(np.argmin(np.abs(lower - np.conj(root))))
        middle = 0.5 * (root + complex(np.conj(lower[nearest])))
        lower = np.delete(lower, nearest)
        pairs += [middle, middle.conjugate()]
    return np.concatenate([np.asarray(real, complex), np.array(pairs, complex)])
