"""What a tool claims is held against what was recomputed."""

from __future__ import annotations

from dataclasses import fields, replace

import pytest

from service.analysis.results import Quantity
from service.judgement.claims import ClaimFinding, Claims, compare
from service.judgement.quantities import QUANTITIES
from tests.judgement.loops import LAG, ideal, recomputed, with_part


def only(recomputation: object, **claim: Quantity) -> ClaimFinding:
    (found,) = compare(recomputation, Claims(**claim))  # type: ignore[arg-type]
    return found


def test_every_quantity_can_be_claimed_and_nothing_else() -> None:
    assert [field.name for field in fields(Claims)] == list(QUANTITIES)


def test_what_is_not_claimed_is_not_compared() -> None:
    assert compare(recomputed(), Claims()) == ()


@pytest.mark.parametrize("name", list(QUANTITIES))
def test_a_claim_that_is_what_was_recomputed_agrees(name: str) -> None:
    value = QUANTITIES[name].of(recomputed().continuous)
    if value is not None:
        assert only(recomputed(), **{name: value}).outcome == "agrees"


@pytest.mark.parametrize(
    ("claimed", "outcome"), [(1.961, "agrees"), (1.959, "differs"), (2.04, "agrees"), (2.041, "differs")]
)
def test_two_per_cent_agree(claimed: float, outcome: str) -> None:
    loop = with_part(recomputed(), "margins", gain_margin=2.0)
    assert only(loop, gain_margin=claimed).outcome == outcome


@pytest.mark.parametrize(("claimed", "outcome"), [(4.0, "agrees"), (6.0, "agrees"), (6.1, "differs")])
def test_one_degree_agrees(claimed: float, outcome: str) -> None:
    loop = with_part(recomputed(), "margins", phase_margin_deg=5.0)
    found = only(loop, phase_margin_deg=claimed)
    assert (found.outcome, found.tolerance) == (outcome, "1 degree")


@pytest.mark.parametrize(
    ("claimed", "recomputed_value", "outcome"),
    [
        ("unbounded", "unbounded", "agrees"),
        (3.0, "unbounded", "differs"),
        ("unbounded", 3.0, "differs"),
        ("unbounded", None, "not_comparable"),
        (3.0, None, "not_comparable"),
    ],
)
def test_no_limit_agrees_with_no_limit_only(
    claimed: Quantity, recomputed_value: Quantity, outcome: str
) -> None:
    loop = with_part(recomputed(), "margins", gain_margin=recomputed_value)
    assert only(loop, gain_margin=claimed).outcome == outcome


def test_a_margin_of_an_unstable_loop_cannot_be_compared() -> None:
    assert only(recomputed(LAG, ideal(action="direct")), gain_margin=3.0).outcome == "not_comparable"


def test_a_settling_time_that_hangs_by_a_hair_cannot_be_compared() -> None:
    loop = with_part(recomputed(), "setpoint_step", settling_time_sensitive=True, settling_time_s=100.0)
    assert only(loop, settling_time_s=100.0).outcome == "not_comparable"


def test_a_rise_time_is_compared_though_the_settling_time_is_not() -> None:
    loop = with_part(recomputed(), "setpoint_step", settling_time_sensitive=True, rise_time_s=10.0)
    assert only(loop, rise_time_s=10.0).outcome == "agrees"


def test_names_that_both_steps_have_mean_the_setpoint_step() -> None:
    continuous = recomputed().continuous
    assert continuous.setpoint_step is not None
    assert continuous.load_step is not None
    assert only(recomputed(), iae=1.0).recomputed == continuous.setpoint_step.iae
    assert only(recomputed(), load_iae=1.0).recomputed == continuous.load_step.iae


def test_a_claim_on_a_scanned_loop_is_held_against_the_scanned_loop() -> None:
    sampled = with_part(recomputed(), "margins", gain_margin=1.4).continuous
    loop = replace(recomputed(), judged_on="sampled", sampled=sampled)
    assert only(loop, gain_margin=1.4).outcome == "agrees"


def test_a_claim_leaves_the_verdict() -> None:
    assert only(recomputed(), gain_margin=99.0).outcome == "differs"
    assert recomputed().verdict == "stable"
