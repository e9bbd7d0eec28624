"""The matrix exponential less one against forty digits of mpmath, on either side of every squaring."""

from __future__ import annotations

import math

import mpmath
import numpy as np
import pytest

from service.analysis.exponentials import LARGEST_NORM, exponentials_less_one

TRIANGULAR = np.array([[-1.0, 0.5, 0.0], [0.0, -3.0, 2.0], [0.0, 0.0, 0.0]])
TURNING = np.array([[0.0, 1.0], [-1.0, -0.1]])
DEFECTIVE = np.array([[-1.0, 1.0], [0.0, -1.0]])


def exactly(matrix: np.ndarray, time: float) -> np.ndarray:
    with mpmath.workdps(40):
        exponential = mpmath.expm(mpmath.matrix(matrix.tolist()) * mpmath.mpf(time))
        return np.array((exponential - mpmath.eye(len(matrix))).tolist(), float)


@pytest.mark.parametrize("matrix", [TRIANGULAR, TURNING, DEFECTIVE], ids=["lags", "oscillation", "defective"])
@pytest.mark.parametrize("time", [1e-9, 0.3, LARGEST_NORM, math.nextafter(LARGEST_NORM, 1.0), 2.0, 12.0])
def test_it_is_met_to_float64(matrix: np.ndarray, time: float) -> None:
    scale = time / float(np.abs(matrix).sum(axis=0).max())
    (found,) = exponentials_less_one(matrix, np.array([scale]))
    expected = exactly(matrix, scale)
    # each squaring doubles what rounding has done
    doubled = max(1.0, time / LARGEST_NORM)
    assert np.abs(found - expected).max() <= 2e-15 * doubled * np.abs(expected).max()


def test_many_times_are_each_their_own() -> None:
    times = np.array([0.0, 0.01, 0.5, 3.0])
    together = exponentials_less_one(TRIANGULAR, times)
    assert not together[0].any()
    for time, found in zip(times, together, strict=True):
        assert found == pytest.approx(exactly(TRIANGULAR, time), rel=1e-13, abs=1e-15)


def test_nothing_has_an_exponential_too() -> None:
    assert exponentials_less_one(np.zeros((0, 0)), np.array([1.0, 2.0])).shape == (2, 0, 0)
