"""Values that python-control's own tests assert (control/tests/margin_test.py, BSD-3-Clause). Read."""

from __future__ import annotations

import pytest

from tests.analysis.entered import ideal, ratio
from tests.published.reading import analysis, decimals, exact


def test_a_loop_that_never_reaches_a_gain_of_1() -> None:
    # 1/(s³ + 2s² + 3s + 4): the loop is told from memory, its values are the file's
    found = analysis(ratio([1.0], [1.0, 2.0, 3.0, 4.0]), ideal(1.0))
    assert found.margins is not None
    assert found.margins.gain_margin == pytest.approx(exact("B25")["GM"], rel=1e-13)
    assert found.crossovers.phase_crossovers[0].rad_s == decimals(exact("B25")["wg"], 4)
    assert found.margins.phase_margin_deg == "unbounded"
    assert found.margins.delay_margin_s == "unbounded"
    # the library tells the least distance to −1, which is 1/Ms
    assert isinstance(found.margins.max_sensitivity, float)
    assert 1.0 / found.margins.max_sensitivity == decimals(exact("B25")["Sm"], 3)
    assert found.margins.max_sensitivity_rad_s == decimals(exact("B25")["ws"], 3)
