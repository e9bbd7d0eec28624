"""Examples of Routh's criterion, the source beside each."""

from __future__ import annotations

import pytest

from tests.analysis.entered import ideal, ratio
from tests.published.reading import analysis, decimals, exact


def characteristic(*coefficients: float) -> tuple[int | str | None, float | str | None]:
    """Unstable roots and decay rate of a loop that has this characteristic polynomial."""
    *higher, last = coefficients
    plant = ratio([1.0], [*higher, last - 1.0])
    stability = analysis(plant, ideal(1.0)).stability
    return stability.unstable_roots, stability.decay_rate_per_s


def test_a_cubic_with_two_roots_right_of_the_axis() -> None:
    # an exercise of Routh's array, s³ + 2s² + 4s + 9; read
    assert characteristic(1.0, 2.0, 4.0, 9.0) == (exact("B12")["rhp"], decimals(-0.0589, 4))


@pytest.mark.parametrize(("coefficients", "count"), list(zip("abc", exact("B18")["rhp"], strict=True)))
def test_root_counts_of_three_textbooks(coefficients: str, count: int) -> None:
    # K. Ogata, Modern Control Engineering; R. C. Dorf, R. H. Bishop, Modern Control Systems; N. S. Nise,
    # Control Systems Engineering; from memory
    polynomial = {"a": [1, 2, 3, 4, 5], "b": [1, 1, 2, 24], "c": [1, 10, 31, 1030]}[coefficients]
    assert characteristic(*map(float, polynomial))[0] == count


LARGEST_GAINS = [
    # an exercise of Routh's criterion, s³ + 60s² + 500s + K; read
    ("B15", [1.0, 60.0, 500.0, 0.0], 30000.0),
    # N. S. Nise, Control Systems Engineering, K/(s(s+7)(s+11)); from memory
    ("B16", [1.0, 18.0, 77.0, 0.0], 1386.0),
    # K. Ogata, Modern Control Engineering, K/(s(s²+s+1)(s+2)); from memory
    ("B17", [1.0, 3.0, 3.0, 2.0, 0.0], 14.0 / 9.0),
]


@pytest.mark.parametrize(("name", "denominator", "largest"), LARGEST_GAINS)
def test_the_largest_gain(name: str, denominator: list[float], largest: float) -> None:
    found = analysis(ratio([0.25 * largest], denominator), ideal(1.0))
    assert found.margins is not None
    assert found.margins.gain_margin == pytest.approx(4.0, rel=1e-13)
    assert largest == decimals(exact(name)["K_max"])
    assert found.crossovers.phase_crossovers[0].rad_s == decimals(exact(name)["w"])


@pytest.mark.parametrize(
    ("denominator", "least"), [([1.0, 0.0, -4.0], 4.0), ([1.0, -3.0, 2.0], 3.0)], ids=["±2", "1 and 2"]
)
def test_the_least_gain_of_a_plant_with_unstable_poles(denominator: list[float], least: float) -> None:
    # exercises beside the one above: K(s+1)/((s−2)(s+2)) needs K > 4, K(s+1)/((s−1)(s−2)) needs K > 3; read
    found = analysis(ratio([1.0, 1.0], denominator), ideal(2.0 * least))
    assert found.margins is not None
    assert found.margins.gain_reduction_margin == pytest.approx(0.5, rel=1e-13)
    assert found.margins.gain_margin == "unbounded"


def test_an_interval_polynomial_is_stable_at_each_of_its_four_corners() -> None:
    # B. R. Barmish, New Tools for Robustness of Linear Systems, 1994; from memory. Highest power first
    corners = [
        (1.25, 2.75, 0.75, 1.25),
        (0.25, 3.25, 1.25, 0.25),
        (1.25, 3.25, 0.75, 0.25),
        (0.25, 2.75, 1.25, 1.25),
    ]
    assert_corners(corners, exact("H01")["max_re_of_4"])


def test_the_corner_that_governs_an_uncertain_third_order_example() -> None:
    # R. C. Dorf, R. H. Bishop, Modern Control Systems, a0 in 8…60, a1 in 12…100, a2 in 7…25; from memory
    corners = [
        (1.0, 7.0, 12.0, 60.0),
        (1.0, 25.0, 100.0, 8.0),
        (1.0, 25.0, 12.0, 8.0),
        (1.0, 7.0, 100.0, 60.0),
    ]
    assert_corners(corners, exact("H02")["max_re"])


def assert_corners(corners: list[tuple[float, ...]], rightmost: list[float]) -> None:
    found = [characteristic(*corner) for corner in corners]
    assert {count for count, _ in found} == {0}
    rates = sorted(rate for _, rate in found if isinstance(rate, float))
    assert rates == [decimals(value) for value in sorted(-value for value in rightmost)]
