"""The second opinion: what python-control says beside ours, and when it is a difference."""

from __future__ import annotations

import subprocess
import sys
from dataclasses import replace
from typing import Any

import control
import pytest

from service.analysis.controller import (
    IdealController,
    IntegralTime,
    Proportional,
    Scan,
    TwoZerosController,
)
from service.analysis.loop import ClosedLoopParts, form_loop
from service.analysis.plant import FirstOrder, PlantModel, TransferFunction
from service.analysis.recomputation import recompute
from service.analysis.results import Analysis, Crossovers, Margins, SecondOpinion, SetpointStep, Stability
from service.analysis.second_opinion import second_opinion
from tests.checks.loops import CheckLoop, read

LOOPS = {loop.name: loop for loop in read("fifty_digits.json")}

# what the library reads off its grid is known to be wrong by more than a point here: near the boundary the
# highest of many peaks, or a kink of the response, falls between two points
OVERSHOOT_OFF = {"sopdt_over_16", "ipdt_00", "ipdt_20", "zero_20", "fopdt_38", "reso_18"}


def recomputed(loop: CheckLoop, **changed: Any) -> Analysis:
    """The analysis that a loop's truth makes, as far as the truth goes."""
    truth = {**loop.expected, **loop.expected.get("step", {}), **changed}

    def quantity(name: str) -> Any:
        return truth[name] if truth[name] is not None else "unbounded"

    unknown = dict.fromkeys(Margins.__dataclass_fields__, None)
    names = ("gain_margin", "gain_reduction_margin", "phase_margin_deg", "max_sensitivity")
    stability = Stability(
        verdict="stable" if truth["stable"] else "unstable", unstable_roots=truth["unstable_roots"], routes=()
    )
    margins = Margins(**{**unknown, **{name: quantity(name) for name in names}}) if truth["stable"] else None
    step = None
    if truth["stable"]:
        step = SetpointStep(
            **{
                **dict.fromkeys(SetpointStep.__dataclass_fields__, None),
                "overshoot_percent": truth["overshoot_percent"],
                "settling_time_s": truth.get("settling_time_s"),
                "settling_time_sensitive": "settling_time_s" not in truth,
            }
        )
    return Analysis(
        stability=stability,
        crossovers=Crossovers(gain_crossovers=(), phase_crossovers=()),
        margins=margins,
        setpoint_step=step,
        load_step=None,
        noise=None,
    )


def parts_of(loop: CheckLoop, time_scale: float = 1.0) -> ClosedLoopParts:
    return form_loop(loop.plant_model(time_scale), loop.controller(time_scale), None)


@pytest.mark.parametrize("name", sorted(set(LOOPS) - OVERSHOOT_OFF))
def test_on_ordinary_loops_the_library_agrees(name: str) -> None:
    opinion = second_opinion(parts_of(LOOPS[name]), None, recomputed(LOOPS[name]), 2.0)
    assert opinion.outcome == "agrees", opinion.note


def test_a_library_wrong_by_its_grid_differs_and_the_note_says_where_and_why() -> None:
    opinion = second_opinion(parts_of(LOOPS["ipdt_00"]), None, recomputed(LOOPS["ipdt_00"]), 2.0)
    assert opinion.outcome == "differs"
    assert "differs in overshoot" in opinion.note
    assert "grid of times" in opinion.note


@pytest.mark.parametrize("time_scale", [1e3, 1.0 / 3600.0])
def test_the_unit_of_time_does_not_change_the_opinion(time_scale: float) -> None:
    in_seconds = second_opinion(parts_of(LOOPS["fopdt_08"]), None, recomputed(LOOPS["fopdt_08"]), 2.0)
    told_otherwise = second_opinion(
        parts_of(LOOPS["fopdt_08"], time_scale), None, recomputed(LOOPS["fopdt_08"]), 2.0
    )
    for name in ("gain_margin", "phase_margin_deg", "max_sensitivity", "overshoot_percent"):
        assert told_otherwise.values[name] == pytest.approx(in_seconds.values[name], rel=1e-6)
    assert told_otherwise.values["settling_time_s"] == pytest.approx(
        time_scale * in_seconds.values["settling_time_s"], rel=1e-6
    )


@pytest.mark.parametrize(
    ("name", "factor", "words"),
    [
        ("gain_margin", 1.03, "gain margin"),
        ("phase_margin_deg", 1.05, "phase margin"),
        ("max_sensitivity", 0.97, "maximum sensitivity"),
        ("overshoot_percent", 1.1, "overshoot"),
        ("settling_time_s", 0.97, "settling time"),
    ],
)
def test_each_value_that_is_not_ours_is_a_difference(name: str, factor: float, words: str) -> None:
    loop = LOOPS["fopdt_08"]
    truth = {**loop.expected, **loop.expected["step"]}
    opinion = second_opinion(parts_of(loop), None, recomputed(loop, **{name: truth[name] * factor}), 2.0)
    assert opinion.outcome == "differs"
    assert f"differs in {words} (" in opinion.note


def test_a_verdict_that_is_not_ours_is_a_difference() -> None:
    loop = LOOPS["fopdt_00"]
    opinion = second_opinion(parts_of(loop), None, recomputed(loop, stable=False, unstable_roots=0), 2.0)
    assert opinion.outcome == "differs"
    assert "differs in the number of unstable roots (" in opinion.note


def test_infinitely_many_roots_are_no_difference_where_the_library_finds_any() -> None:
    loop = LOOPS["fopdt_00"]
    ours = recomputed(loop)
    many = replace(ours, stability=replace(ours.stability, unstable_roots="unbounded"))
    assert second_opinion(parts_of(loop), None, many, 2.0).outcome == "agrees"


def test_a_settling_time_near_an_extremum_is_not_compared() -> None:
    loop = LOOPS["fopdt_08"]
    ours = recomputed(loop, settling_time_s=1.0)
    assert ours.setpoint_step is not None
    sensitive = replace(ours, setpoint_step=replace(ours.setpoint_step, settling_time_sensitive=True))
    assert second_opinion(parts_of(loop), None, sensitive, 2.0).outcome == "agrees"


def test_the_settling_band_is_the_one_asked_for() -> None:
    loop = LOOPS["fopdt_08"]
    two, five = (second_opinion(parts_of(loop), None, recomputed(loop), band).values for band in (2.0, 5.0))
    assert five["settling_time_s"] < two["settling_time_s"]  # type: ignore[operator]


def test_without_dead_time_nothing_is_approximated() -> None:
    opinion = second_opinion(parts_of(LOOPS["zero_04"]), None, recomputed(LOOPS["zero_04"]), 2.0)
    assert opinion.approximation is None


def test_with_dead_time_the_approximation_is_named() -> None:
    opinion = second_opinion(parts_of(LOOPS["fopdt_08"]), None, recomputed(LOOPS["fopdt_08"]), 2.0)
    assert opinion.approximation == "dead time by a Padé approximation of order 10"
    assert (opinion.library, opinion.version) == ("python-control", control.__version__)


def proportional_loop(plant: PlantModel, **terms: Any) -> ClosedLoopParts:
    controller = IdealController(
        form="ideal", action="reverse", proportional=Proportional(value=1.0, unit="gain"), **terms
    )
    return form_loop(plant, controller, None)


def anything(verdict: str = "stable") -> Analysis:
    return Analysis(
        stability=Stability(verdict=verdict, unstable_roots=None, routes=()),  # type: ignore[arg-type]
        crossovers=Crossovers(gain_crossovers=(), phase_crossovers=()),
        margins=None,
        setpoint_step=None,
        load_step=None,
        noise=None,
    )


def test_a_loop_that_never_crosses_comes_back_without_inf_or_nan() -> None:
    plant = FirstOrder(kind="first_order", gain=0.5, time_constant_s=4.0)
    values = second_opinion(proportional_loop(plant), None, anything(), 2.0).values
    assert values["gain_margin"] == values["phase_margin_deg"] == "unbounded"
    assert values["max_sensitivity"] is None


def test_a_loop_on_which_the_library_fails_is_not_available_and_raises_nothing() -> None:
    plant = FirstOrder(kind="first_order", gain=1e300, time_constant_s=1.0, dead_time_s=1e-60)
    opinion = second_opinion(proportional_loop(plant), None, anything("unstable"), 2.0)
    assert (opinion.outcome, opinion.values) == ("not_available", {})
    assert "could not analyse this loop" in opinion.note


def test_a_response_without_a_final_value_has_no_step_metrics() -> None:
    washout = TransferFunction(kind="transfer_function", numerator=(1.0, 0.0), denominator=(1.0, 1.0, 2.0))
    values = second_opinion(proportional_loop(washout), None, anything(), 2.0).values
    assert values["verdict"] == "stable"
    assert values["settling_time_s"] is None


def test_where_the_peak_sensitivity_differs_the_ends_of_the_axis_are_named() -> None:
    loop = LOOPS["fopdt_08"]
    ours = recomputed(loop, max_sensitivity=2.0 * loop.expected["max_sensitivity"])
    assert "here its ends count" in second_opinion(parts_of(loop), None, ours, 2.0).note


def test_an_integrator_hidden_by_a_zero_counts_as_a_pole() -> None:
    hiding = TwoZerosController(form="two_zeros", action="reverse", gain=1.0, zeros_rad_s=(0.0,))
    plant = FirstOrder(kind="first_order", gain=1.0, time_constant_s=3.0)
    values = second_opinion(form_loop(plant, hiding, None), None, anything("unstable"), 2.0).values
    assert values["verdict"] == "unstable"


def test_the_library_is_imported_only_with_this_module() -> None:
    script = (
        "import sys, service.analysis.recomputation; assert 'control' not in sys.modules;"
        "import service.analysis.second_opinion; assert 'control' in sys.modules"
    )
    subprocess.run([sys.executable, "-c", script], check=True)


def scanned(gain: float, integral_s: float | None = None, **scan: Any) -> SecondOpinion:
    plant = FirstOrder(
        kind="first_order", gain=1.2, time_constant_s=30.0, dead_time_s=scan.pop("dead_time_s", 5.0)
    )
    controller = IdealController(
        form="ideal",
        action="reverse",
        proportional=Proportional(value=gain, unit="gain"),
        integral=None if integral_s is None else IntegralTime(value=integral_s, unit="seconds"),
        scan=Scan(**scan),
    )
    opinion = recompute(plant, controller, with_second_opinion=True).second_opinion
    assert opinion is not None
    return opinion


@pytest.mark.parametrize("method", ["backward_difference", "trapezoidal"])
@pytest.mark.parametrize("dead_time_s", [0.0, 5.0, 6.3])
def test_on_an_ordinary_scanned_loop_the_library_agrees(method: str, dead_time_s: float) -> None:
    opinion = scanned(2.0, 40.0, interval_s=1.0, method=method, dead_time_s=dead_time_s)
    assert opinion.outcome == "agrees", opinion.note
    assert opinion.values["gain_margin"] != "unbounded"
    assert opinion.approximation is not None
    assert ("Padé" in opinion.approximation) == (dead_time_s == 6.3)


def test_on_a_loop_that_its_scan_destabilises_the_library_agrees() -> None:
    opinion = scanned(5.0, 40.0, interval_s=20.0)
    assert (opinion.outcome, opinion.values["verdict"]) == ("agrees", "unstable")


def test_a_dead_time_of_very_many_scans_is_not_available() -> None:
    opinion = scanned(2.0, 40.0, interval_s=0.1)
    assert opinion.outcome == "not_available"
    assert "too many scans" in opinion.note


def test_a_scan_that_leaves_float64_is_not_available_and_raises_nothing() -> None:
    plant = FirstOrder(kind="first_order", gain=1.0, time_constant_s=1e-4)
    opinion = second_opinion(proportional_loop(plant), Scan(interval_s=1.7e308), anything(), 2.0)
    assert (opinion.outcome, opinion.approximation) == ("not_available", None)
    assert "leaves the range of float64" in opinion.note
