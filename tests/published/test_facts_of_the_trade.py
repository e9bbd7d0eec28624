"""What every engineer of the trade expects of a term, over ranges of gains. Common practice throughout.

Beside each stands the closed form that it follows from, for the loops that have one.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from service.analysis.plant import PlantModel
from service.analysis.recomputation import recompute
from service.analysis.results import LoadStep, Margins, Noise, SetpointStep
from tests.analysis.entered import first_order, ideal, lags
from tests.published.reading import analysis

GAINS = (0.5, 1.0, 2.0, 4.0, 8.0)

LAG = first_order(2.0, 10.0)
SECOND_ORDER = lags(1.0, [10.0, 4.0])
WITH_DEAD_TIME = lags(1.0, [10.0, 4.0], (), 1.5)


def setpoint(plant: PlantModel, kc: float, ti: float | None = None) -> SetpointStep:
    found = analysis(plant, ideal(kc, ti)).setpoint_step
    assert found is not None
    return found


def load(plant: PlantModel, kc: float, ti: float | None = None) -> LoadStep:
    found = analysis(plant, ideal(kc, ti)).load_step
    assert found is not None
    return found


def margins(plant: PlantModel, kc: float, ti: float | None = None) -> Margins:
    found = analysis(plant, ideal(kc, ti)).margins
    assert found is not None
    return found


def least_damping(kc: float, td: float | None = None, tf: float | None = None) -> float:
    roots = analysis(SECOND_ORDER, ideal(kc, None, td, tf)).stability.dominant_roots
    return min(root.damping_ratio for root in roots)


def noise(td: float, tf: float) -> Noise:
    found = analysis(SECOND_ORDER, ideal(2.0, None, td, tf)).noise
    assert found is not None
    return found


def test_more_proportional_gain_shortens_the_rise_of_a_lag() -> None:
    rises = [setpoint(LAG, kc).rise_time_s for kc in GAINS]
    # the closed loop is a lag of T/(1 + K·Kc), which rises from 10 to 90 % in T·ln 9
    closed = [10.0 / (1.0 + 2.0 * kc) * math.log(9.0) for kc in GAINS]
    assert rises == pytest.approx(closed, rel=1e-9)
    assert closed == sorted(closed, reverse=True)


def test_more_proportional_gain_lowers_the_damping_of_a_second_order_plant() -> None:
    damping = [least_damping(kc) for kc in GAINS]
    # T1·T2·s² + (T1 + T2)·s + 1 + Kc
    closed = [14.0 / (2.0 * math.sqrt(40.0 * (1.0 + kc))) for kc in GAINS]
    assert damping == pytest.approx(closed, rel=1e-9)
    assert closed == sorted(closed, reverse=True)


def test_derivative_action_adds_damping_and_multiplies_noise() -> None:
    kc, tf = 8.0, 0.05
    times = (0.5, 1.0, 2.0)
    without = least_damping(kc)
    damping = [least_damping(kc, td, tf) for td in times]
    assert [without, *damping] == sorted([without, *damping])
    # of the loop without its filter: T1·T2·s² + (T1 + T2 + Kc·Td)·s + 1 + Kc
    closed = [(14.0 + kc * td) / (2.0 * math.sqrt(40.0 * (1.0 + kc))) for td in times]
    assert damping == pytest.approx(closed, rel=0.03)
    gains = [noise(td, tf).output_gain_high_frequency for td in times]
    assert gains == pytest.approx([2.0 * (1.0 + td / tf) for td in times], rel=1e-12)


def test_integral_action_takes_the_lasting_offset_away() -> None:
    for kc in GAINS:
        # 1/(1 + K·Kc) of the step is left
        assert setpoint(LAG, kc).final_value == pytest.approx(1.0 - 1.0 / (1.0 + 2.0 * kc), rel=1e-12)
        assert load(LAG, kc).final_value == pytest.approx(2.0 / (1.0 + 2.0 * kc), rel=1e-12)
        assert setpoint(LAG, kc, 10.0).final_value == pytest.approx(1.0, rel=1e-12)
        assert load(LAG, kc, 10.0).final_value == 0.0


def test_integral_action_raises_the_loop_type_by_one() -> None:
    assert recompute(LAG, ideal(1.0)).loop_type == 0
    assert recompute(LAG, ideal(1.0, 10.0)).loop_type == 1


def test_integral_action_costs_phase_and_the_more_the_shorter_its_time() -> None:
    without = margins(WITH_DEAD_TIME, 3.0).phase_margin_deg
    times = (200.0, 50.0, 20.0, 10.0)
    found = [margins(WITH_DEAD_TIME, 3.0, ti).phase_margin_deg for ti in times]
    assert [without, *found] == sorted([without, *found], reverse=True)
    # with a long integral time the crossover hardly moves, and the cost is arctan(1/(ω·Ti))
    omega = analysis(WITH_DEAD_TIME, ideal(3.0)).crossovers.gain_crossovers[0].rad_s
    assert without - found[0] == pytest.approx(math.degrees(math.atan(1.0 / (omega * times[0]))), rel=0.02)


def test_more_dead_time_costs_phase_in_proportion() -> None:
    omega = analysis(SECOND_ORDER, ideal(3.0)).crossovers.gain_crossovers[0].rad_s
    found = [
        margins(lags(1.0, [10.0, 4.0], (), dead_time), 3.0).phase_margin_deg for dead_time in (0.0, 0.5, 1.0)
    ]
    assert np.diff(found) == pytest.approx(-math.degrees(0.5 * omega), rel=1e-9)


def test_a_lasting_load_leaves_an_integrated_error_of_minus_ti_over_kc() -> None:
    for kc in (0.5, 1.0, 2.0):
        assert load(WITH_DEAD_TIME, kc, 12.0).integrated_error == pytest.approx(-12.0 / kc, rel=1e-9)


def test_a_pid_without_a_filter_pole_is_not_realisable() -> None:
    assert not recompute(SECOND_ORDER, ideal(2.0, 10.0, 1.0)).facts.realisable
    assert recompute(SECOND_ORDER, ideal(2.0, 10.0, 1.0, 0.1)).facts.realisable
    assert recompute(SECOND_ORDER, ideal(2.0, 10.0)).facts.realisable
