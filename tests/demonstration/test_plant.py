"""The invented plant as data: what it promises to show is there, and its year moves without being bent."""

from __future__ import annotations

import math
from datetime import UTC, datetime, timedelta

import pytest

from service.demonstration.plant import Change, Plant, invented_plant

PLANT = invented_plant()


def controllers(plant: Plant, **said: str) -> list[str]:
    return [name for name, gains in plant.gains.items() if said.items() <= gains.items()]


def test_the_plant_has_loops_of_every_kind() -> None:
    assert len(PLANT.loops) >= 12
    assert {"F", "L", "P", "T", "A"} <= {tag[0] for tag in PLANT.loops}
    kinds = {loop.model["plant_model"]["kind"] for loop in PLANT.loops.values()}
    assert kinds == {"first_order", "second_order", "integrating", "transfer_function"}


def test_the_plant_has_an_inverse_response_and_a_dead_time_that_is_longer_than_the_lag() -> None:
    models = [loop.model["plant_model"] for loop in PLANT.loops.values()]
    numerators = [model["numerator"] for model in models if "numerator" in model]
    assert any(high * low < 0 for high, low in numerators)  # a zero right of the axis
    assert any(
        model.get("dead_time_s", 0) > 2 * abs(model.get("time_constant_s", math.inf)) for model in models
    )


def test_the_plant_has_a_cascade_and_a_process_that_does_not_hold_itself() -> None:
    registrations = [loop.registration for loop in PLANT.loops.values()]
    inner = [r["inner_loop"]["tag"] for r in registrations if "inner_loop" in r]
    assert inner == ["TIC-2241"]
    assert any(loop.model["plant_model"].get("time_constant_s", 1) < 0 for loop in PLANT.loops.values())


@pytest.mark.parametrize("form", ["ideal", "series", "parallel", "two_zeros"])
def test_gains_of_every_form_are_shown(form: str) -> None:
    assert controllers(PLANT, form=form)


def test_scanned_controllers_and_an_uncertain_model_are_shown() -> None:
    assert len([gains for gains in PLANT.gains.values() if gains["scan"]]) >= 4
    assert any("uncertainty" in loop.model["plant_model"] for loop in PLANT.loops.values())


def test_both_actions_are_shown() -> None:
    assert controllers(PLANT, action="direct")
    assert controllers(PLANT, action="reverse")


def test_gains_of_a_loop_belong_to_a_loop_that_is_there() -> None:
    assert {name.split()[0] for name in PLANT.gains} == set(PLANT.loops)


def test_everyone_who_acts_has_an_account_and_a_long_password_of_their_own() -> None:
    assert {change.who for change in PLANT.year} <= {person.name for person in PLANT.people}
    passwords = {person.password for person in PLANT.people}
    assert len(passwords) == len(PLANT.people)
    assert min(map(len, passwords)) >= 15


def test_changes_follow_each_other_in_time_over_about_a_year() -> None:
    times = [change.time for change in PLANT.year]
    assert times == sorted(times)
    assert timedelta(days=330) < times[-1] - times[0] < timedelta(days=370)


@pytest.mark.parametrize("days", [0, 6, 7, 400, -30])
def test_the_year_ends_in_the_week_before_it_is_shown_and_keeps_its_weekdays(days: int) -> None:
    now = datetime(2026, 12, 1, 12, tzinfo=UTC) + timedelta(days=days)
    moved = PLANT.ending_before(now)
    assert timedelta(0) <= now - moved.year[-1].time < timedelta(weeks=1)
    for before, after in zip(PLANT.year, moved.year, strict=True):
        assert (after.time - before.time) % timedelta(weeks=1) == timedelta(0)


def test_the_times_that_a_change_names_move_with_it() -> None:
    time = datetime(2026, 3, 2, 9, tzinfo=UTC)
    change = Change(
        time=time, who="a", call="submit", body={"install_by": "2026-03-09T16:00:00Z", "kind": "planned"}
    )
    assert change.later(timedelta(weeks=2)).body == {"install_by": "2026-03-23T16:00:00Z", "kind": "planned"}
