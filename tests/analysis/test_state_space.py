"""A plant entered as a state space is the plant that its transfer function is, every mode included."""

from __future__ import annotations

from typing import Any

import control
import numpy as np
import pytest

from service.analysis.controller import Scan
from service.analysis.errors import FieldError
from service.analysis.plant import PlantModel, StateSpace
from service.analysis.rational import rational
from service.analysis.recomputation import recompute
from tests.analysis.entered import factors, first_order, ideal, integrating, ratio, resonant


def state_space(a: Any, b: Any, c: Any, d: float = 0.0, dead_time_s: float = 0.0) -> StateSpace:
    rows = tuple(tuple(float(value) for value in row) for row in np.asarray(a))
    return StateSpace(
        kind="state_space",
        a=rows,
        b=tuple(float(value) for value in np.ravel(b)),
        c=tuple(float(value) for value in np.ravel(c)),
        d=d,
        dead_time_s=dead_time_s,
    )


def realised(plant: PlantModel, seed: int | None = None) -> StateSpace:
    """python-control's realisation of a plant, its states mixed at random where a seed is given."""
    told = rational(plant)
    numerator = told.gain * np.real(np.poly(np.array(told.zeros_rad_s)))
    system = control.tf2ss(control.tf(np.atleast_1d(numerator), np.real(np.poly(np.array(told.poles_rad_s)))))
    a, b, c = system.A, system.B, system.C
    if seed is not None:
        mix = np.linalg.qr(np.random.default_rng(seed).normal(size=a.shape))[0]
        a, b, c = mix @ a @ mix.T, mix @ b, c @ mix.T
    return state_space(a, b, c, float(system.D[0, 0]), plant.dead_time_s)


PLANTS: dict[str, PlantModel] = {
    "a lag": first_order(2.0, 10.0, 3.0),
    "an integrator with a lag": integrating(0.1, 2.0, 0.5),
    "four lags": factors(0.01875, [], [-0.1, -0.25, -0.5, -1.0], 1.0),
    "a light resonance": resonant(1.0, 2.0, 0.02, 0.2),
    "an inverse response": factors(-0.1, [0.5], [-0.2, -0.7], 0.4),
    "a proper plant": ratio([0.6, 1.0], [2.0, 1.0], 1.0),
    "a double integrator": factors(0.02, [-0.1], [0.0, 0.0, -3.0], 0.2),
    "an unstable lag": factors(0.6, [], [0.1, -2.0], 0.1),
}


@pytest.mark.parametrize("seed", [None, 1, 2])
@pytest.mark.parametrize("name", PLANTS)
def test_the_same_plant_gives_the_same_result(name: str, seed: int | None) -> None:
    controller = ideal(0.8, 20.0, 1.0, 0.1, scan=Scan(interval_s=0.25))
    told, entered = (recompute(plant, controller) for plant in (PLANTS[name], realised(PLANTS[name], seed)))
    assert entered.verdict == told.verdict
    assert entered.loop_type == told.loop_type
    for expected, found in ((told.continuous, entered.continuous), (told.sampled, entered.sampled)):
        assert expected is not None
        assert found is not None
        assert found.stability.unstable_roots == expected.stability.unstable_roots
        if expected.margins is None:
            continue
        assert found.margins is not None
        for margin in ("gain_margin", "phase_margin_deg", "delay_margin_s", "max_sensitivity"):
            value = getattr(expected.margins, margin)
            assert getattr(found.margins, margin) == (
                value if isinstance(value, str) else pytest.approx(value, rel=1e-7)
            )


def test_the_unit_of_time_changes_nothing() -> None:
    lag = realised(PLANTS["four lags"], 1)
    slow = state_space(np.array(lag.a) / 3.6e6, np.array(lag.b) / 3.6e6, lag.c, lag.d)
    poles, expected = rational(slow).poles_rad_s, rational(lag).poles_rad_s
    assert sorted(pole.real for pole in poles) == pytest.approx(
        sorted(pole.real / 3.6e6 for pole in expected)
    )


def test_integrators_are_at_the_origin_exactly_whatever_the_states() -> None:
    for seed in range(20):
        poles = rational(realised(PLANTS["a double integrator"], seed)).poles_rad_s
        assert sum(pole == 0 for pole in poles) == 2


@pytest.mark.parametrize(("b", "c"), [([1.0, 0.0], [1.0, 1.0]), ([1.0, 1.0], [1.0, 0.0])])
def test_a_mode_that_is_not_reached_or_not_seen_counts_where_it_lies(b: Any, c: Any) -> None:
    controller = ideal(1.0, 20.0)
    dying = recompute(state_space([[-0.1, 0.0], [0.0, -0.02]], b, c), controller)
    growing = recompute(state_space([[-0.1, 0.0], [0.0, 0.02]], b, c), controller)
    assert dying.verdict == "stable"
    assert growing.verdict == "unstable"
    assert growing.continuous.stability.unstable_roots == 1
    assert growing.facts.plant_unstable


def test_a_hidden_integrator_is_never_called_stable() -> None:
    hidden = state_space([[-0.1, 0.0], [0.0, 0.0]], [1.0, 0.0], [1.0, 1.0])
    assert recompute(hidden, ideal(1.0, 20.0)).verdict == "undecided"


def test_a_plant_that_lets_nothing_through_is_an_open_loop() -> None:
    silent = recompute(state_space([[-0.1]], [0.0], [1.0]), ideal(1.0))
    assert silent.verdict == "stable"


def test_sides_that_are_out_of_all_proportion_change_nothing() -> None:
    same = recompute(state_space([[-1.0]], [1e-150], [1e150]), ideal(1.0))
    assert same.continuous.margins == recompute(first_order(1.0, 1.0), ideal(1.0)).continuous.margins


def test_modes_that_float64_does_not_hold_apart_are_never_called_stable() -> None:
    spread = state_space(np.diag([-1e-200, -1e200]), [1.0, 1.0], [1.0, 1e-300])
    assert recompute(spread, ideal(1.0)).verdict == "undecided"


def test_zeros_that_float64_does_not_give_are_refused_by_name() -> None:
    with pytest.raises(FieldError, match="zeros of this state space") as refused:
        recompute(state_space(np.diag([-1e-8, -1e8, -1.0]), [1.0, 1e-12, 1.0], [1.0, 1e12, -1.0]), ideal(1.0))
    assert refused.value.path == ("plant_model", "a")
