"""Polynomials by their values at Chebyshev extreme points of [0, 1]: differentiation, integration,
evaluation.

Source: L. N. Trefethen, Spectral Methods in MATLAB (SIAM 2000), chapters 6 and 12; J.-P. Berrut, L. N.
Trefethen, Barycentric Lagrange interpolation, SIAM Review 46 (2004) 501-517.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache

import numpy as np
import numpy.typing as npt

from service.analysis.brackets import newton_zero
from service.analysis.loop import Reals

NODES = 16
"""Nodes of a piece of a response; e^(λt) over a piece with abs λ·length ≤ 6 is met to some 1e-11."""

ROWS_AT_ONCE = 2048
"""More would leave the processor's cache, and take memory in proportion."""


@lru_cache(maxsize=64)
def points(count: int) -> Reals:
    """`count` extreme points on [0, 1], increasing."""
    k = np.arange(count)
    x = 0.5 - 0.5 * np.sin(0.5 * np.pi * (count - 1 - 2 * k) / (count - 1))
    return _frozen(x)


@lru_cache(maxsize=64)
def differentiation(count: int) -> Reals:
    """Matrix from values to the derivative's values on [0, 1], shape (count, count)."""
    x, weight = points(count), 1.0 / barycentric_weights(count)
    difference = x[:, None] - x[None, :] + np.eye(count)
    matrix = np.outer(weight, 1.0 / weight) / difference
    matrix -= np.diag(matrix.sum(axis=1))
    return _frozen(matrix)


@lru_cache(maxsize=64)
def barycentric_weights(count: int) -> Reals:
    """Weights of the barycentric formula, shape (count,)."""
    k = np.arange(count)
    return _frozen(np.where((k == 0) | (k == count - 1), 0.5, 1.0) * (-1.0) ** k)


@lru_cache(maxsize=64)
def integration(count: int) -> Reals:
    """Matrix from values to the values of the integral from 0, shape (count, count)."""
    matrix = np.zeros((count, count))
    # on twice the nodes, since the integral's degree is one higher than the nodes carry
    fine = points(2 * count)
    inner = np.linalg.solve(differentiation(2 * count)[1:, 1:], evaluation(count, fine)[1:, :])
    matrix[1:, :] = evaluation(2 * count, points(count))[1:, 1:] @ inner
    return _frozen(matrix)


def evaluation(count: int, at: Reals) -> Reals:
    """Matrix from values at the nodes to values at `at`, shape (len(at), count)."""
    difference = at[:, None] - points(count)
    exact = difference == 0
    upon_node = exact.any()
    terms = barycentric_weights(count) / (np.where(exact, 1.0, difference) if upon_node else difference)
    matrix = terms / terms.sum(axis=1, keepdims=True)
    if upon_node:
        hit = exact.any(axis=1)
        matrix[hit] = exact[hit]
    return np.asarray(matrix)


def value_and_slope(rows: Reals) -> Callable[[Reals], tuple[Reals, Reals]]:
    """Of the polynomials with these values at the nodes, shape (m, count), a function from a place for each,
    shape (m,), to value and slope there.
    """
    slopes = rows @ differentiation(rows.shape[1]).T

    def at_places(at: Reals) -> tuple[Reals, Reals]:
        matrix = evaluation(rows.shape[1], at)
        return np.einsum("ij,ij->i", matrix, rows), np.einsum("ij,ij->i", matrix, slopes)

    return at_places


def evaluate_rows(rows: Reals, at: Reals) -> Reals:
    """The polynomial of each row, values shape (m, count), at its own point, shape (m,)."""
    if len(at) <= ROWS_AT_ONCE:
        return np.asarray(np.einsum("ij,ij->i", evaluation(rows.shape[1], at), rows))
    blocks = (slice(first, first + ROWS_AT_ONCE) for first in range(0, len(at), ROWS_AT_ONCE))
    return np.concatenate([evaluate_rows(rows[block], at[block]) for block in blocks])


def zeros_of_rows(rows: Reals, noise: Reals) -> tuple[npt.NDArray[np.intp], Reals]:
    """Every sign change inside the rows, values shape (r, count): which row, and where on [0, 1]; ordered.

    Changes between two values that are both below `noise`, shape (r,), are rounding and left out.
    """
    if len(rows) <= ROWS_AT_ONCE:
        return _zeros_of_block(rows, noise)
    starts = range(0, len(rows), ROWS_AT_ONCE)
    blocks = [slice(start, start + ROWS_AT_ONCE) for start in starts]
    found = [_zeros_of_block(rows[block], noise[block]) for block in blocks]
    row = [start + of_block for start, (of_block, _) in zip(starts, found, strict=True)]
    return np.concatenate(row), np.concatenate([place for _, place in found])


def _zeros_of_block(rows: Reals, noise: Reals) -> tuple[npt.NDArray[np.intp], Reals]:
    count = rows.shape[1]
    # along the whole array, which is many times faster than along its short rows
    positive = (rows > 0).ravel()
    changes = (positive[:-1] != positive[1:]).nonzero()[0]
    row, node = np.divmod(changes[changes % count != count - 1], count)
    before, after, noise = np.abs(rows[row, node]), np.abs(rows[row, node + 1]), noise[row]
    told = np.maximum(before, after) > noise
    row, node, before, after, noise = (each[told] for each in (row, node, before, after, noise))
    # where one of the two values is rounding, the change is at that node
    place = points(count)[np.where(before <= after, node, node + 1)]
    between = (np.minimum(before, after) > noise).nonzero()[0]
    if between.size:
        place[between] = _zeros(rows[row[between]], node[between])
    return row, place


def _zeros(rows: Reals, node: npt.NDArray[np.intp]) -> Reals:
    """Of each row, shape (m, count), the zero between two of its nodes, shape (m,)."""
    nodes, every = points(rows.shape[1]), np.arange(len(rows))
    low, high, at_low, at_high = nodes[node], nodes[node + 1], rows[every, node], rows[every, node + 1]
    secant = low + (high - low) * (at_low / (at_low - at_high))
    return newton_zero(value_and_slope(rows), low, high, at_low, 1.0, secant)


def _frozen(array: Reals) -> Reals:
    array.flags.writeable = False
    return array
