"""Equal lags under proportional control: Ku = sec(π/n)^n at ω = tan(π/n).

For example K. Ogata, Modern Control Engineering; K. J. Åström, T. Hägglund, PID Controllers, 1995. From
memory.
"""

from __future__ import annotations

import math

import pytest

from tests.analysis.entered import ideal, lags
from tests.published.reading import analysis, decimals, exact


@pytest.mark.parametrize(("order", "name"), [(3, "B01"), (4, "B02")])
def test_the_ultimate_gain_that_textbooks_print(order: int, name: str) -> None:
    found = analysis(lags(1.0, [1.0] * order), ideal(1.0))
    assert found.margins is not None
    assert found.margins.gain_margin == pytest.approx(exact(name)["Ku"], rel=1e-13)
    assert found.crossovers.phase_crossovers[0].rad_s == decimals(exact(name)["wu"])


@pytest.mark.parametrize("order", [3, 4, 5, 6, 8, 10])
def test_the_closed_form_for_any_number_of_lags(order: int) -> None:
    found = analysis(lags(1.0, [7.0] * order), ideal(0.5))
    assert found.margins is not None
    assert found.margins.gain_margin == pytest.approx(2.0 / math.cos(math.pi / order) ** order, rel=1e-12)
    ultimate = found.crossovers.phase_crossovers[0].rad_s
    assert ultimate == pytest.approx(math.tan(math.pi / order) / 7.0, rel=1e-12)
