"""D. E. Seborg, T. F. Edgar, D. A. Mellichamp, Process Dynamics and Control: examples of limits. From memory.

The settings of B. D. Tyreus, W. L. Luyben, Tuning PI controllers for integrator/dead time processes, IEC
Research 31 (1992) 2625-2628, are those that the book tabulates beside the second example (from memory).
"""

from __future__ import annotations

import math

import pytest

from service.analysis.results import Analysis
from tests.analysis.entered import first_order, ideal, ratio
from tests.published.reading import analysis, decimals, exact, printed


def test_routh_example_of_three_lags() -> None:
    # 10s³ + 17s² + 8s + 1 + Kc: stable up to Kc = 12.6
    found = analysis(ratio([1.0], [10.0, 17.0, 8.0, 1.0]), ideal(1.0))
    assert found.margins is not None
    assert found.margins.gain_margin == pytest.approx(exact("B05")["Kc_max"], rel=1e-13)
    assert found.crossovers.phase_crossovers[0].rad_s == decimals(exact("B05")["wu"])


def bode_example(kc: float) -> Analysis:
    """Valve 2, transmitter 0.25, process 4·e^(−s)/(5s+1)."""
    return analysis(first_order(2.0 * 0.25 * 4.0, 5.0, 1.0), ideal(kc))


def test_bode_example_with_its_dead_time() -> None:
    found = bode_example(1.0)
    assert found.margins is not None
    assert found.margins.gain_margin == pytest.approx(exact("B06")["Kcu"], rel=1e-9)
    assert found.margins.gain_margin == decimals(printed("B06")["Kcu"], 2)
    assert found.crossovers.phase_crossovers[0].rad_s == pytest.approx(exact("B06")["wc"], rel=1e-8)


def test_the_settings_read_off_the_bode_example() -> None:
    found = bode_example(1.0)
    assert found.margins is not None
    assert isinstance(found.margins.gain_margin, float)
    rad_s = found.crossovers.phase_crossovers[0].rad_s
    assert isinstance(rad_s, float)
    gain, period_s = found.margins.gain_margin, 2.0 * math.pi / rad_s
    assert [0.45 * gain, period_s / 1.2] == [decimals(value) for value in exact("B06")["ZN_PI"]]
    assert [gain / 3.2, 2.2 * period_s] == [decimals(exact("A30")[name]) for name in ("Kc", "Ti")]


@pytest.mark.parametrize("approximation", ["pade1", "pade2"])
def test_between_the_limit_and_what_a_rational_dead_time_makes_of_it_the_loop_is_unstable(
    approximation: str,
) -> None:
    # a first-order Padé approximation puts the limit at 5.5, a second-order one at 4.2898: both too high
    true, approximated = exact("E14")["exact"], exact("E14")[approximation]
    assert bode_example(0.999999 * true).stability.verdict == "stable"
    assert bode_example(0.5 * (true + approximated)).stability.verdict == "unstable"
