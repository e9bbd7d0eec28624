"""Matrix exponentials at several times at once, without the one, beside which small changes lose their
digits.
"""

from __future__ import annotations

import math

import numpy as np

from service.analysis.loop import Reals

GROUP, GROUPS = 4, 4
"""Taylor's series to the order 16 in four groups of four powers."""

LARGEST_NORM = 0.5
"""Up to this norm the series leaves out less than 1e-18."""

COEFFICIENTS = np.array([1.0 / math.factorial(order) for order in range(1, GROUP * GROUPS + 1)])


def exponentials_less_one(matrix: Reals, times: Reals) -> Reals:
    """e^(matrix·t) − 1 for each t, shape (m, n, n): Taylor's series on a small part of each, squared.

    The series is summed as a polynomial in the fourth power, which takes six products of matrices.
    C. Moler, C. Van Loan, Nineteen dubious ways to compute the exponential of a matrix, SIAM Review 45
    (2003); M. S. Paterson, L. J. Stockmeyer, On the number of nonscalar multiplications necessary to evaluate
    polynomials, SIAM Journal on Computing 2 (1973). From memory.
    """
    norm = float(np.abs(matrix).sum(axis=0).max(initial=0.0)) * float(np.abs(times).max(initial=0.0))
    squarings = max(0, math.ceil(math.log2(norm / LARGEST_NORM))) if norm > LARGEST_NORM else 0
    first = matrix * (times / 2.0**squarings)[:, None, None]
    second = first @ first
    fourth = second @ second
    powers = np.array([first, second, second @ first, fourth])
    groups = (COEFFICIENTS.reshape(GROUPS, GROUP) @ powers.reshape(GROUP, -1)).reshape(GROUPS, *first.shape)
    less_one = groups[-1]
    for group in groups[-2::-1]:
        less_one = group + fourth @ less_one
    for _ in range(squarings):
        less_one = 2.0 * less_one + less_one @ less_one
    return np.asarray(less_one)
