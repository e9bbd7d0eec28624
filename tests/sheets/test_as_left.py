"""What is said of gains that were left otherwise: the verdict first, and never more than was computed."""

from __future__ import annotations

from dataclasses import replace

import pytest

from service.analysis.controller import Controller
from service.analysis.plant import FirstOrder, TransferFunction
from service.judgement.criteria import Criteria
from service.records import as_left
from service.records.content import RecomputedAsLeft, SetLeftOtherwise, SignedModel
from service.records.views import EntryReference, LoopView
from service.sheets.as_left import assessments, in_one_line, told_as_left
from service.sheets.content import content_of
from tests.sheets.records_to_print import (
    LAG,
    LOOP,
    NEAR_THE_LIMIT,
    NOON,
    RUNS_AWAY,
    TUNED,
    decided,
    installed,
    models,
    submission,
)

DIRECT = TransferFunction(kind="transfer_function", numerator=(-1.0, -0.5), denominator=(1.0, 1.0))
CLOSES_NO_LOOP = replace(TUNED, proportional=replace(TUNED.proportional, value=1.0), integral=None)
CLOSES_NO_LOOP = replace(CLOSES_NO_LOOP, derivative=None, derivative_filter=None)
"""With the plant above 1 + L(∞) = 0."""
EASY = replace(LOOP, criteria=Criteria(gain_margin_min=1.05))
EASIER = FirstOrder(kind="first_order", gain=0.4, time_constant_s=95.0, dead_time_s=18.0)


def left(*sets: SetLeftOtherwise, at: tuple[SignedModel, ...], loop: object = LOOP) -> RecomputedAsLeft:
    entry = EntryReference(number=1, digest="a1" * 32, time=NOON)
    view = LoopView(id="01JPA0", revision=3, loop=loop, digest="", changed_by="", entry=entry)  # type: ignore[arg-type]
    return as_left.recomputed(view, at, sets)


def alone(controller: Controller) -> SetLeftOtherwise:
    return SetLeftOtherwise(gain_set=0, condition=None, operating_points=(), controller=controller)


def test_an_unstable_loop_is_told_first_and_the_operator_is_to_be_told() -> None:
    told = told_as_left(left(alone(RUNS_AWAY), at=models(LAG)))
    assert told.sentence.startswith("Unstable with the gains as left: the loop does not come to rest")
    assert told.summary == "The recomputed loop is UNSTABLE. Limits: 6 NOT ASSESSED, of 6."
    assert told.missed == ()
    assert "approved" not in told.sentence
    assert told.caution.startswith(
        "Tell the operator of this loop now. These gains were computed, not approved."
    )
    assert told.caution.endswith("for site procedure and licensed practice to say.")


def test_a_stable_loop_within_its_limits_is_calm_and_still_not_approved() -> None:
    told = told_as_left(left(alone(TUNED), at=models(EASIER), loop=EASY))
    assert (told.verdict, told.calm, told.missed) == ("stable", True, ())
    assert told.sentence.endswith("the loop comes to rest. Computed, not approved.")
    assert "Tell the operator" not in told.caution
    assert "computed, not approved" in told.caution


def test_limits_that_a_stable_loop_misses_are_named_those_of_no_deviation_too() -> None:
    told = told_as_left(left(alone(NEAR_THE_LIMIT), at=models(LAG)))
    assert (told.verdict, told.calm) == ("stable", False)
    assert any(sentence.startswith("Gain margin at least 2.5: 1.") for sentence in told.missed)
    assert not any("Worst at" in sentence for sentence in told.missed)
    assert "NOT MET" in told.summary
    assert any(sentence.startswith("Nobody could approve this: gain margin") for sentence in told.missed)
    assert told.caution.startswith("Tell the operator")


def test_a_loop_past_the_hard_floors_alone_is_not_calm() -> None:
    told = told_as_left(left(alone(NEAR_THE_LIMIT), at=models(LAG), loop=EASY))
    assert told.summary == "The recomputed loop is stable. Limits: all 1 met."
    assert not told.calm
    assert all(sentence.startswith("Nobody could approve this") for sentence in told.missed)


def test_at_several_points_the_worst_one_is_named() -> None:
    told = told_as_left(left(alone(NEAR_THE_LIMIT), at=models(LAG, EASIER)))
    assert any(sentence.endswith("Worst at: normal throughput.") for sentence in told.missed)


def test_where_one_point_is_unstable_no_limit_of_another_is_told() -> None:
    told = told_as_left(left(alone(RUNS_AWAY), at=models(LAG, EASIER)))
    assert (told.verdict, told.calm) == ("unstable", False)
    assert not any(sentence.startswith("Gain margin at least 2.5") for sentence in told.missed)


@pytest.mark.parametrize(
    ("what", "why"),
    [(None, "this was recorded before"), (left(alone(TUNED), at=()), "no model in force")],
    ids=["recorded before", "no model"],
)
def test_where_nothing_was_computed_nothing_is_said_to_have_been(
    what: RecomputedAsLeft | None, why: str
) -> None:
    told = told_as_left(what)
    assert told.sentence.startswith(f"Not recomputed with the gains as left: {why}")
    assert told.missed == ()
    assert told.summary == ""
    assert "nothing was computed of them" in told.caution
    assert "were computed" not in told.caution
    assert not told.calm


def test_gains_that_form_no_loop_are_undecided_with_the_reason() -> None:
    found = left(alone(CLOSES_NO_LOOP), at=models(DIRECT))
    told = told_as_left(found)
    assert told.sentence.startswith("Undecided with the gains as left")
    assert told.summary == "It could NOT BE SHOWN that the loop is stable."
    (reason,) = told.missed
    assert reason.startswith("Operating point: normal throughput: could NOT be recomputed, ")
    assert "could NOT be recomputed" in in_one_line(found)


def test_a_set_without_a_model_is_named_beside_what_was_recomputed() -> None:
    sets = (
        SetLeftOtherwise(
            gain_set=0, condition="one pump", operating_points=("normal throughput",), controller=TUNED
        ),
        SetLeftOtherwise(gain_set=1, condition="two pumps", operating_points=("at night",), controller=TUNED),
    )
    found = left(*sets, at=models(LAG))
    told = told_as_left(found)
    assert (told.verdict, told.summary[:36]) == ("not_assessed", "NOT ALL of the loop was recomputed. ")
    assert told.missed == ("Gains for: two pumps: NOT recomputed, no model is in force at at night.",)
    (shown,) = assessments(found)
    assert shown.title == "Operating point: normal throughput, gains for: one pump"
    formless = told_as_left(left(replace(sets[0], controller=CLOSES_NO_LOOP), sets[1], at=models(DIRECT)))
    assert formless.verdict == "undecided"
    assert [sentence.partition(":")[0] for sentence in formless.missed] == ["Operating point", "Gains for"]


def test_nobody_is_told_not_to_enter_what_has_been_entered() -> None:
    found = left(alone(replace(RUNS_AWAY, action="direct")), at=models(LAG))
    (shown,) = assessments(found)
    said = " ".join(finding.sentence for finding in shown.findings)
    assert "Do not enter" not in said
    assert not shown.stable
    (shown,) = assessments(left(alone(replace(TUNED, action="direct")), at=models(LAG)))
    assert any("the wrong way round" in finding.sentence for finding in shown.findings)


def test_the_sheet_says_what_was_computed_and_that_nobody_approved_it() -> None:
    view, curves, _ = submission()
    view = installed(decided(view), RUNS_AWAY)
    (done,) = view.installations
    otherwise = replace(
        done.installation, as_approved=False, as_left_recomputed=left(alone(RUNS_AWAY), at=models(LAG))
    )
    view = replace(view, installations=(replace(done, installation=otherwise),))
    told = content_of(view, curves).installations[0].value
    assert "AS LEFT IS NOT AS APPROVED; the gains as left are NOT APPROVED; computed of them: " in told
    assert "The recomputed loop is UNSTABLE." in told
    nothing = replace(otherwise, as_left_recomputed=left(alone(RUNS_AWAY), at=()))
    view = replace(view, installations=(replace(done, installation=nothing),))
    assert "computed of them: nothing, no model in force" in content_of(view, curves).installations[0].value
