"""The table of what may become of a proposed change, and by whom."""

from __future__ import annotations

from itertools import product
from typing import get_args

import pytest

from service.records import change_lifecycle
from service.records.change_lifecycle import ChangeAction, ChangeState
from service.records.errors import NotAllowed, NotIndependent, WrongStep
from service.records.roles import ROLES, Actor, Role

STATES: tuple[ChangeState, ...] = get_args(ChangeState)
ACTIONS: tuple[ChangeAction, ...] = get_args(ChangeAction)
OPEN = {
    "awaiting_confirmation": {"confirm", "reject", "withdraw"},
    "overtaken": {"reject", "withdraw"},
}


def actor(*roles: Role, account: str = "a") -> Actor:
    return Actor(account_id=account, name=account, full_name=account, roles=frozenset(roles))


@pytest.mark.parametrize(("state", "action"), list(product(STATES, ACTIONS)))
def test_a_step_is_open_where_the_rules_say_so_and_nowhere_else(
    state: ChangeState, action: ChangeAction
) -> None:
    allowed = action in OPEN.get(state, set())
    assert change_lifecycle.allows(state, action) is allowed
    if allowed:
        change_lifecycle.check(state, action)
    else:
        with pytest.raises(WrongStep):
            change_lifecycle.check(state, action)


@pytest.mark.parametrize("role", ROLES)
def test_only_another_reviewer_confirms_or_rejects(role: Role) -> None:
    for action in ("confirm", "reject"):
        if role == "reviewer":
            change_lifecycle.check_who(action, actor(role), "b")
            with pytest.raises(NotIndependent):
                change_lifecycle.check_who(action, actor(role), "a")
        else:
            with pytest.raises(NotAllowed):
                change_lifecycle.check_who(action, actor(role), "b")


@pytest.mark.parametrize("role", ROLES)
def test_only_the_author_withdraws_in_whatever_role(role: Role) -> None:
    change_lifecycle.check_who("withdraw", actor(role), "a")
    with pytest.raises(NotAllowed):
        change_lifecycle.check_who("withdraw", actor(role), "b")


def test_a_decision_stands_whatever_moves_afterwards() -> None:
    for moved in (False, True):
        assert change_lifecycle.as_read("confirm", moved=moved) == "confirmed"
    assert change_lifecycle.as_read(None, moved=True) == "overtaken"
    assert [state for state in STATES if change_lifecycle.is_overtaken(state)] == ["overtaken"]


def test_every_state_has_its_words() -> None:
    assert len({change_lifecycle.in_words(state) for state in STATES}) == len(STATES)


def test_a_change_that_nothing_has_moved_under_awaits_its_second_person() -> None:
    assert change_lifecycle.as_read(None, moved=False) == "awaiting_confirmation"


@pytest.mark.parametrize(
    ("state", "roles", "account", "actions"),
    [
        ("awaiting_confirmation", ("reviewer",), "b", ("confirm", "reject")),
        ("awaiting_confirmation", ("reviewer",), "a", ("withdraw",)),
        ("awaiting_confirmation", ("administrator",), "b", ()),
        ("overtaken", ("reviewer",), "b", ("reject",)),
        ("overtaken", ("submitter",), "a", ("withdraw",)),
        ("confirmed", ROLES, "b", ()),
    ],
)
def test_what_is_open_is_what_the_table_and_the_person_allow(
    state: ChangeState, roles: tuple[Role, ...], account: str, actions: tuple[ChangeAction, ...]
) -> None:
    assert change_lifecycle.open_to(state, actor(*roles, account=account), "a") == actions


@pytest.mark.parametrize(
    ("state", "told"),
    [
        ("overtaken", r"overtaken by another change; propose it again from the loop as it is$"),
        ("confirmed", r"this change is confirmed$"),
    ],
)
def test_a_refused_step_says_what_is_left_to_do(state: ChangeState, told: str) -> None:
    with pytest.raises(WrongStep, match=told):
        change_lifecycle.check(state, "confirm")
