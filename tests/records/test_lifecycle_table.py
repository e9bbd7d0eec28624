"""Who may take a step, what the clock makes of a state, and the words for both: the table without a store."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from typing import get_args

import pytest

from service.documents.submissions import KINDS, Kind
from service.records import lifecycle
from service.records.errors import NotAllowed, NotIndependent, WrongStep
from service.records.lifecycle import Action, Limits, State
from service.records.roles import ROLES, Actor, Role

STATES: tuple[State, ...] = get_args(State)
ACTIONS: tuple[Action, ...] = get_args(Action)
NOW = datetime(2026, 3, 2, 6, 0, tzinfo=UTC)
AN_INSTANT = timedelta(microseconds=1)
NO_LIMITS = Limits(install_by=None, temporary_until=None)


LEADS: dict[State, dict[Action, State]] = {
    "awaiting_review": {
        "approve_first": "awaiting_review",
        "approve": "approved",
        "reject": "rejected",
        "withdraw": "withdrawn",
    },
    "approved": {"install": "in_force", "install_otherwise": "approved", "revoke": "revoked"},
    "in_force": {
        "install": "in_force",
        "install_otherwise": "in_force",
        "revoke": "revoked",
        "supersede": "superseded",
    },
    "installed_awaiting_review": {
        "install": "installed_awaiting_review",
        "install_otherwise": "installed_awaiting_review",
        "approve_first": "installed_awaiting_review",
        "approve": "in_force",
        "reject": "rejected",
        "supersede": "superseded_awaiting_review",
    },
    "superseded_awaiting_review": {
        "approve_first": "superseded_awaiting_review",
        "approve": "superseded",
        "reject": "rejected",
    },
    "recorded": {"supersede": "superseded"},
    "lapsed": {"revoke": "revoked", "supersede": "superseded"},
}
"""Where each step leads, as the rules have it; whatever is not here is refused."""


def _actor(*roles: Role, account: str = "a") -> Actor:
    return Actor(account_id=account, name=account, full_name=account, roles=frozenset(roles))


@pytest.mark.parametrize("action", ACTIONS)
@pytest.mark.parametrize("state", STATES)
def test_a_step_leads_where_the_rules_say_and_nowhere_else(state: State, action: Action) -> None:
    target = LEADS.get(state, {}).get(action)
    assert lifecycle.allows(state, action) is (target is not None)
    if target is None:
        with pytest.raises(WrongStep):
            lifecycle.step(state, action)
    else:
        assert lifecycle.step(state, action).target == target


OTHERS, OWN = frozenset({"b"}), frozenset({"a", "b"})


@pytest.mark.parametrize("action", ["approve_first", "approve", "reject"])
@pytest.mark.parametrize("role", ROLES)
def test_a_reviewer_who_is_no_author_approves_and_rejects(action: Action, role: Role) -> None:
    if role != "reviewer":
        with pytest.raises(NotAllowed, match="role reviewer"):
            lifecycle.check_who(action, _actor(role), OTHERS)
        return
    lifecycle.check_who(action, _actor(role), OTHERS)
    with pytest.raises(NotIndependent):
        lifecycle.check_who(action, _actor(role), OWN)


@pytest.mark.parametrize("role", ROLES)
def test_an_author_withdraws_in_whatever_role(role: Role) -> None:
    lifecycle.check_who("withdraw", _actor(role), OWN)
    with pytest.raises(NotAllowed):
        lifecycle.check_who("withdraw", _actor(role), OTHERS)


@pytest.mark.parametrize(
    ("action", "role"), [("revoke", "reviewer"), ("install", "submitter"), ("install_otherwise", "submitter")]
)
@pytest.mark.parametrize("authors", [OTHERS, OWN], ids=["another's", "one's own"])
def test_a_reviewer_revokes_and_a_submitter_installs(
    action: Action, role: Role, authors: frozenset[str]
) -> None:
    lifecycle.check_who(action, _actor(role), authors)
    for other in set(ROLES) - {role}:
        with pytest.raises(NotAllowed, match=f"role {role}"):
            lifecycle.check_who(action, _actor(other), authors)


def test_what_follows_from_another_step_is_nobodys() -> None:
    with pytest.raises(NotAllowed, match="follows from another step"):
        lifecycle.check_who("supersede", _actor(*ROLES), OWN)


@pytest.mark.parametrize(
    ("state", "roles", "authors", "actions"),
    [
        ("awaiting_review", ("reviewer",), OTHERS, ("approve_first", "approve", "reject")),
        ("awaiting_review", ("reviewer",), OWN, ("withdraw",)),
        ("approved", ROLES, OTHERS, ("install", "install_otherwise", "revoke")),
        ("approved", ("auditor", "administrator"), OTHERS, ()),
        ("rejected", ROLES, OTHERS, ()),
    ],
)
def test_the_open_actions_are_those_that_the_table_and_the_person_allow(
    state: State, roles: tuple[Role, ...], authors: frozenset[str], actions: tuple[Action, ...]
) -> None:
    assert lifecycle.actions_open_to(state, _actor(*roles), authors) == actions


@pytest.mark.parametrize(
    ("stored", "limit", "reads", "overdue"),
    [
        ("approved", "install_by", "expired", False),
        ("approved", "temporary_until", "lapsed", False),
        ("in_force", "temporary_until", "lapsed", True),
        ("in_force", "install_by", "in_force", False),
        ("recorded", "temporary_until", "recorded", False),
        ("superseded", "temporary_until", "superseded", False),
    ],
)
def test_a_state_reads_otherwise_the_moment_after_its_limit(
    stored: State, limit: str, reads: State, overdue: bool
) -> None:
    limits = Limits(**({"install_by": None, "temporary_until": None} | {limit: NOW}))
    assert lifecycle.as_read(stored, limits, NOW) == stored
    assert not lifecycle.is_overdue(stored, limits, None, NOW)
    assert lifecycle.as_read(stored, limits, NOW + AN_INSTANT) == reads
    assert lifecycle.is_overdue(stored, limits, None, NOW + AN_INSTANT) is overdue


def test_gains_past_both_limits_were_never_installed() -> None:
    limits = Limits(install_by=NOW, temporary_until=NOW)
    assert lifecycle.as_read("approved", limits, NOW + AN_INSTANT) == "expired"


def test_a_review_is_overdue_the_moment_after_it_was_due() -> None:
    assert not lifecycle.is_overdue("installed_awaiting_review", NO_LIMITS, NOW, NOW)
    assert lifecycle.is_overdue("installed_awaiting_review", NO_LIMITS, NOW, NOW + AN_INSTANT)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("state", STATES)
def test_a_review_presses_within_three_days_where_the_gains_run_without_one(state: State, kind: Kind) -> None:
    owed = {"awaiting_review", "installed_awaiting_review", "superseded_awaiting_review"}
    due = NOW + timedelta(hours=72) if kind in ("emergency", "baseline") and state in owed else None
    assert lifecycle.review_due_at(state, kind, NOW) == due


def test_gains_that_run_without_approval_are_never_said_to_have_one() -> None:
    assert {"approved", "in_force"} == lifecycle.APPROVED_TO_RUN
    assert {kind for kind in KINDS if kind in lifecycle.IN_FORCE_FROM_THE_START} == {
        "emergency",
        "baseline",
    }


def test_a_step_that_leads_nowhere_is_refused_in_words() -> None:
    with pytest.raises(WrongStep, match="a submission that is rejected cannot be approved"):
        lifecycle.step("rejected", "approve")
    with pytest.raises(WrongStep, match="a submission that is recorded as found cannot be installed"):
        lifecycle.step("recorded", "install_otherwise")
    for action in ACTIONS:
        with pytest.raises(
            WrongStep, match=r"cannot be (approved|rejected|withdrawn|revoked|installed|super)"
        ):
            lifecycle.step("withdrawn", action)
    assert len({lifecycle.in_words(state) for state in STATES}) == len(STATES)
