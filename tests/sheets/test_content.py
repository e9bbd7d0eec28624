"""What a sheet says of a record: the gains as entered, the state, what was computed, who signed."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import get_args

import pytest

from service.analysis.controller import IntegralTime, Proportional
from service.analysis.plant import Range, Ranges
from service.analysis.results import DominantRoot
from service.records import comparison
from service.records.lifecycle import START, State
from service.sheets import assessments
from service.sheets.content import KINDS, SheetContent, content_of
from service.sheets.states import STATES
from tests.sheets.conftest import Printed
from tests.sheets.records_to_print import EARLIER, LAG, LOOP, NOON, TUNED, decided, gains, submission

PrintCase = Callable[[str], Printed]
RANGES = Ranges(pv=Range(low=0, high=120), output=Range(low=0, high=100))


@pytest.fixture
def ordinary(print_case: PrintCase) -> SheetContent:
    return print_case("ordinary").content


def test_gains_stand_as_the_controller_shows_them(ordinary: SheetContent) -> None:
    lines = [(line.name, line.value, line.unit) for line in ordinary.tables[0].gains]
    assert lines == [
        ("Proportional (Kc)", "1.80", "gain"),
        ("Integral (Ti)", "1.50", "minutes"),
        ("Derivative (Td)", "7", "seconds"),
        ("Derivative filter (Td/Tf)", "10", "ratio of derivative time to filter time"),
    ]


def test_the_way_back_stands_beside_them(ordinary: SheetContent) -> None:
    before = [(line.before, line.before_unit) for line in ordinary.tables[0].gains]
    assert before[:2] == [("80.0", "per cent proportional band"), ("0.5", "repeats per minute")]
    assert before[2:] == [("none", ""), ("none", "")]


def test_another_unit_than_before_is_said_aloud(ordinary: SheetContent) -> None:
    assert [line.change for line in ordinary.tables[0].gains] == ["NOT IN THE SAME UNIT"] * 2 + ["", ""]


def test_a_change_in_the_same_unit_is_told_in_per_cent() -> None:
    earlier = replace(
        TUNED,
        proportional=Proportional(value=1.2, unit="gain"),
        integral=IntegralTime(value=2.0, unit="minutes"),
    )
    view, *_ = submission(earlier=earlier)
    compared = replace(view, comparisons=(comparison.compare(earlier, TUNED, RANGES),))
    changes = [line.change for line in content_of(compared).tables[0].gains]
    assert changes[:2] == ["change +50.0 %", "change −25.0 %"]


def test_another_form_shows_both(print_case: PrintCase) -> None:
    table = print_case("two_zeros").content.tables[0]
    assert [(line.name, line.value, line.before) for line in table.gains] == [
        ("Gain k", "12.6", "none"),
        ("Zero z1", "−0.03 + 0.01j", "none"),
        ("Zero z2", "−0.03 − 0.01j", "none"),
        ("Derivative filter (Tf)", "2.000", "none"),
        ("Proportional (100/Kc)", "none", "80.0"),
        ("Integral (1/Ti)", "none", "0.5"),
    ]
    form = next(line for line in table.settings if line.name == "Form")
    assert form.before.startswith("ideal")


def test_only_settings_that_differ_tell_what_was_before(print_case: PrintCase) -> None:
    settings = {line.name: line for line in print_case("unknowns").content.tables[0].settings}
    assert settings["Set-point weights"].before == "proportional 0.5, derivative 0"
    assert settings["Filter on PV"].before == "first-order lag of 2 seconds"
    assert settings["Scan"].value.startswith("unknown")
    assert settings["Action"].before == ""


def test_recorded_settings_are_told(ordinary: SheetContent) -> None:
    assert [(told.name, told.value, told.unit) for told in ordinary.tables[0].recorded] == [
        ("output high limit", "95", "%"),
        ("anti-windup", "back calculation", ""),
    ]


def test_scheduled_gains_find_what_they_replace(print_case: PrintCase) -> None:
    tables = print_case("gain_sets").content.tables
    assert [table.gains[0].value for table in tables] == ["1.80", "0.90"]
    assert [table.gains[0].before for table in tables] == ["80.0", "80.0"]


def test_a_set_for_a_condition_that_is_new_has_no_way_back() -> None:
    view, *_ = submission(gain_sets=(gains(TUNED, "high", "normal throughput"),))
    in_force = view.content.gains_in_force
    assert in_force
    other = replace(in_force, gain_sets=(gains(EARLIER, "low", "normal throughput"),))
    table = content_of(replace(view, content=replace(view.content, gains_in_force=other))).tables[0]
    assert table.before_heading == "BEFORE: not on record"
    assert {line.before for line in table.gains} == {""}


def test_every_state_and_kind_has_its_words() -> None:
    assert set(STATES) == set(get_args(State))
    assert set(KINDS) == set(START)


def test_only_approved_gains_and_those_in_force_may_be_entered() -> None:
    assert {state for state, words in STATES.items() if words.entry} == {"approved", "in_force"}


@pytest.mark.parametrize("state", [state for state, words in STATES.items() if not words.entry])
def test_every_other_state_forbids_it_or_says_that_nobody_approved(state: State) -> None:
    words = STATES[state]
    assert "do not enter" in words.column or "not approved" in words.column
    assert words.heading == words.heading.upper()


@pytest.mark.parametrize(
    ("name", "summary"),
    [
        ("ordinary", "The recomputed loop is stable. Limits: all 6 met."),
        ("gain_sets", "The recomputed loop is stable. Limits: 1 NOT MET, of 6."),
        ("unstable", "The recomputed loop is UNSTABLE. Limits: 6 NOT ASSESSED, of 6."),
        ("undecided", "It could NOT BE SHOWN that the loop is stable. Limits: 6 NOT ASSESSED, of 6."),
        ("no_model", "Nothing was recomputed: there is no model of this process on record."),
        ("no_earlier_gains", "The recomputed loop is stable. It was held against NO LIMIT."),
    ],
)
def test_one_line_says_what_came_out(print_case: PrintCase, name: str, summary: str) -> None:
    content = print_case(name).content
    assert content.summary == summary
    assert content.summary_good is (name == "ordinary")


def test_no_margin_stands_where_the_loop_was_not_shown_stable(print_case: PrintCase) -> None:
    for name in ("unstable", "undecided"):
        told = print_case(name).content.assessments[0]
        assert told.no_margins
        assert (told.setpoint, told.load) == ((), ())
    unstable = print_case("unstable").content
    assert {row.outcome for row in unstable.assessments[0].limits} == {"? not assessed"}
    assert unstable.assessments[0].responses == ()


def test_what_no_deviation_makes_good_is_told_of_a_stable_loop_only(print_case: PrintCase) -> None:
    assert [print_case(name).content.hard_limits for name in ("ordinary", "unstable", "undecided")] == 3 * [
        ()
    ]
    gain_margin, sensitivity = print_case("below_the_hard_floor").content.hard_limits
    assert gain_margin.startswith("Gain margin at least 1.3: 1.")
    assert sensitivity.startswith("Maximum sensitivity at most 4: ")
    assert all(sentence.endswith(", not met.") for sentence in (gain_margin, sensitivity))


def test_of_a_root_on_the_axis_no_rounding_is_told() -> None:
    root = DominantRoot(root=(-2.2e-19, 0.00365), damping_ratio=6.1e-17)
    assert assessments.dominant_root(root) == "0 + 0.00365j rad/s (damping 0)"
    growing = DominantRoot(root=(0.00159, 0.0106), damping_ratio=-0.148)
    assert assessments.dominant_root(growing) == "0.00159 + 0.0106j rad/s (damping −0.148)"


def test_margins_carry_limit_outcome_and_three_digits(ordinary: SheetContent) -> None:
    rows = {row.name: row for row in ordinary.assessments[0].limits}
    assert rows["Gain margin"].limit == "≥ 2.5"
    assert rows["Gain margin"].outcome == "✓ met"
    assert rows["Gain reduction margin"].value == "without limit"
    assert rows["Disk margin"].limit == ""
    assert len(rows["Gain margin"].value.replace(".", "")) == 3


def test_claims_stand_beside_what_was_recomputed(ordinary: SheetContent) -> None:
    outcomes = {row.name: row.outcome for row in ordinary.assessments[0].claims}
    assert outcomes["Gain margin"] == "= agrees (tolerance 2 per cent)"
    assert outcomes["Phase margin"] == "≠ DIFFERS (tolerance 1 degree)"


def test_the_model_is_told_in_full(print_case: PrintCase) -> None:
    told = {each.name: each for each in print_case("unknowns").content.models[0].parameters}
    assert (told["Gain"].value, told["Dead time"].value, told["Time constant"].value) == ("1.6", "18", "95")
    assert told["Uncertainty of gain"].value == "factor 0.8 to 1.25"
    assert told["Found through a filter of"].value == "1"


def test_signatures_tell_who_when_what_it_means_and_why(ordinary: SheetContent) -> None:
    signature = ordinary.signatures[0]
    assert signature.heading == "Approved by Lena Brandt (l.brandt), 2031-03-14 13:00:00 UTC"
    assert signature.meaning == "I have reviewed these gains and approve them for entry."
    assert [told.name for told in signature.deviations] == ["overshoot (overshoot_percent_max)"]
    assert signature.entry == f"History entry 421, digest {'b7' * 32}"


def test_a_record_without_a_signature_says_so(print_case: PrintCase) -> None:
    assert print_case("unstable").content.no_signature == "Nobody has signed this record."
    assert print_case("ordinary").content.no_signature == ""


def test_the_sheet_says_its_version_and_what_it_replaces(ordinary: SheetContent) -> None:
    told = {each.name: each.value for each in ordinary.version}
    assert told["Last history entry of this record"] == "421 (2031-03-14 13:00:00 UTC)"
    assert told["Takes the place of record"] == "01JK2"


def test_times_and_approvals_that_limit_the_state_are_said(print_case: PrintCase) -> None:
    content = print_case("in_force").content
    assert content.conditions == (
        "TEMPORARY: valid until 2031-03-14 12:00:00 UTC.",
        "The review is due at 2031-03-14 12:00:00 UTC.",
        "OVERDUE.",
    )
    view, *_ = submission(install_by=NOON)
    assert content_of(replace(view, approvals_needed=2)).conditions == (
        "To be installed by 2031-03-14 12:00:00 UTC.",
        "2 approvals by different people are needed, 0 given.",
    )


def test_a_basis_that_changed_is_said_while_the_review_is_owed() -> None:
    view, *_ = submission()
    changed = replace(view, changed_basis=("the loop has a new revision", "a model was added"))
    said = "Changed since this was recomputed: the loop has a new revision; a model was added."
    assert content_of(changed).conditions == (said,)
    assert content_of(replace(changed, state="in_force")).conditions == ()


def test_an_installation_names_what_was_left_otherwise(print_case: PrintCase) -> None:
    told = print_case("in_force").content.installations[0].value
    assert "AS LEFT IS NOT AS APPROVED; left: integral 0.0190 gain per second, on record 0.0200" in told
    assert "typed by M. Sato" in told


def test_curves_of_another_model_are_not_drawn_beside() -> None:
    view, curves, before = submission(plants=(LAG,), loop=LOOP)
    other = tuple(replace(each, model_id="another version") for each in before)
    drawn = content_of(decided(view), curves, curves_in_force=other).assessments[0].responses
    assert [response.earlier for response in drawn] == [None, None]
    drawn = content_of(decided(view), curves, curves_in_force=before).assessments[0].responses
    assert all(response.earlier for response in drawn)
