"""G. C. Newton, L. A. Gould, J. F. Kaiser, Analytical Design of Linear Feedback Controls, 1957, appendix E.

The integrals J2, J3, J4 of a squared signal b(s)/a(s) by the coefficients; also E. I. Jury 1964. From
memory.
"""

from __future__ import annotations

import numpy as np
import pytest

from tests.analysis.entered import ideal, ratio
from tests.published.reading import analysis, exact

SIGNALS = {
    # b and a, highest power first
    "J2": ([3.0, 2.0], [5.0, 7.0, 4.0]),
    "J3": ([1.0, 3.0, 2.0], [1.0, 5.0, 7.0, 4.0]),
    "J4": ([0.5, 3.0, 2.0, 1.0], [1.0, 4.0, 9.0, 12.0, 10.0]),
}


@pytest.mark.parametrize("name", SIGNALS)
def test_the_integral_of_the_squared_error_is_the_tabulated_integral(name: str) -> None:
    # the error of a unit step is b/a where 1/(1+L) = s·b/a, that is L = (a − s·b)/(s·b)
    b, a = SIGNALS[name]
    sb = np.append(b, 0.0)
    step = analysis(ratio(np.trim_zeros(np.subtract(a, sb), "f"), sb), ideal(1.0)).setpoint_step
    assert step is not None
    assert step.ise == pytest.approx(exact("C06")[name], rel=1e-10)
