"""J. G. Ziegler, N. B. Nichols, Optimum settings for automatic controllers, Trans. ASME 64 (1942) 759-768.

Read, with the constants as corrected in the errata of K. J. Åström, R. M. Murray, Feedback Systems, 2nd
edition.
"""

from __future__ import annotations

import math

import pytest

from tests.analysis.entered import ideal, lags
from tests.published.reading import analysis, assert_margins, decimals, exact


def ultimate(order: int) -> tuple[float, float]:
    """Ultimate gain and period of so many equal lags of 1 s, as the service finds them."""
    found = analysis(lags(1.0, [1.0] * order), ideal(1.0))
    assert found.margins is not None
    assert isinstance(found.margins.gain_margin, float)
    rad_s = found.crossovers.phase_crossovers[0].rad_s
    assert isinstance(rad_s, float)
    return found.margins.gain_margin, 2.0 * math.pi / rad_s


def test_the_frequency_method_for_pi_on_three_equal_lags() -> None:
    gain, period_s = ultimate(3)
    # kp = 0.45·kc, Ti = Tc/1.2
    assert 0.45 * gain == pytest.approx(exact("A24")["freq_PI"]["kp"], rel=1e-12)
    assert period_s / 1.2 == decimals(exact("A24")["freq_PI"]["Ti"], 4)


def test_the_frequency_method_for_pid_on_four_equal_lags() -> None:
    gain, period_s = ultimate(4)
    settings = {"Kc": 0.6 * gain, "Ti": period_s / 2.0, "Td": period_s / 8.0}
    assert settings == {name: decimals(exact("A25")[name]) for name in settings}
    # the margins of those settings: an independent recomputation, ideal form, no filter
    found = analysis(lags(1.0, [1.0] * 4), ideal(settings["Kc"], settings["Ti"], settings["Td"]))
    assert_margins(found, {name: exact("A25")[name] for name in ("GM", "PM_deg", "Ms", "DM")})
