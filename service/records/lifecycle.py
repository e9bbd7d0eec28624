"""The life cycle of a submission: the one place that knows what may follow on what, and by whom.

State × action → state. Two states, `expired` and `lapsed`, are never stored: the clock makes them as a
record is read. DEVELOPERS.md shows this table as a diagram, made by `diagram()`.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from datetime import datetime, timedelta
from typing import Literal

from service.documents.submissions import Kind
from service.records.errors import NotAllowed, NotIndependent, WrongStep
from service.records.roles import Actor

State = Literal[
    "awaiting_review",
    "approved",
    "in_force",
    "installed_awaiting_review",
    "superseded_awaiting_review",
    "recorded",
    "superseded",
    "rejected",
    "withdrawn",
    "revoked",
    "expired",
    "lapsed",
]
Action = Literal[
    "approve_first", "approve", "reject", "withdraw", "revoke", "install", "install_otherwise", "supersede"
]
Who = Literal["independent_reviewer", "author", "reviewer", "submitter", "service"]
"""`author`: whoever submitted or prepared it.

`independent_reviewer`: a reviewer who did neither. `service`: the service itself, as a consequence of
another step.
"""

START: dict[Kind, State] = {
    "planned": "awaiting_review",
    "return": "awaiting_review",
    "emergency": "installed_awaiting_review",
    "baseline": "recorded",
}
"""The state in which a submission of each kind begins."""

IN_FORCE_FROM_THE_START: frozenset[Kind] = frozenset({"emergency", "baseline"})
"""Kinds whose gains run in the controller when they are submitted."""

EMERGENCY_REVIEW_WITHIN = timedelta(hours=72)
"""Past this an emergency change is shown as overdue.

Common practice: the next working day, a weekend included.
"""


@dataclass(frozen=True, slots=True)
class Step:
    """One row of the table."""

    state: State
    action: Action
    target: State


WHO: dict[Action, Who] = {
    "approve_first": "independent_reviewer",
    "approve": "independent_reviewer",
    "reject": "independent_reviewer",
    "withdraw": "author",
    "revoke": "reviewer",
    "install": "submitter",
    "install_otherwise": "submitter",
    "supersede": "service",
}
"""Who may take an action, from whatever state."""

TABLE: tuple[Step, ...] = (
    Step("awaiting_review", "approve_first", "awaiting_review"),
    Step("awaiting_review", "approve", "approved"),
    Step("awaiting_review", "reject", "rejected"),
    Step("awaiting_review", "withdraw", "withdrawn"),
    Step("approved", "install", "in_force"),
    Step("approved", "install_otherwise", "approved"),
    Step("approved", "revoke", "revoked"),
    Step("in_force", "install", "in_force"),
    Step("in_force", "install_otherwise", "in_force"),
    Step("in_force", "revoke", "revoked"),
    Step("in_force", "supersede", "superseded"),
    # installed first, reviewed after: the review is still owed when other gains have taken its place
    Step("installed_awaiting_review", "install", "installed_awaiting_review"),
    Step("installed_awaiting_review", "install_otherwise", "installed_awaiting_review"),
    Step("installed_awaiting_review", "approve_first", "installed_awaiting_review"),
    Step("installed_awaiting_review", "approve", "in_force"),
    Step("installed_awaiting_review", "reject", "rejected"),
    Step("installed_awaiting_review", "supersede", "superseded_awaiting_review"),
    Step("superseded_awaiting_review", "approve_first", "superseded_awaiting_review"),
    Step("superseded_awaiting_review", "approve", "superseded"),
    Step("superseded_awaiting_review", "reject", "rejected"),
    Step("recorded", "supersede", "superseded"),
    Step("lapsed", "revoke", "revoked"),
    Step("lapsed", "supersede", "superseded"),
)


@dataclass(frozen=True, slots=True)
class ClockRule:
    """A stored state that reads as another once a time of the submission is past."""

    stored: State
    limit: Literal["install_by", "temporary_until"]
    reads: State
    overdue: bool
    """True where the gains still run past the time they are good for."""


CLOCK: tuple[ClockRule, ...] = (
    ClockRule("approved", "install_by", "expired", overdue=False),
    ClockRule("approved", "temporary_until", "lapsed", overdue=False),
    ClockRule("in_force", "temporary_until", "lapsed", overdue=True),
)
"""The first rule that applies holds."""

PAST_THEIR_TIME: frozenset[State] = frozenset(rule.reads for rule in CLOCK)
"""States that the clock alone leads to."""

REVIEW_OWED: frozenset[State] = frozenset(step.state for step in TABLE if step.action == "approve")
"""States in which a review is still owed."""

APPROVED_TO_RUN: frozenset[State] = frozenset(
    step.state for step in TABLE if (step.action, step.target) == ("install", "in_force")
)
"""States in which approved gains run, or are to be installed."""

_STEPS = {(step.state, step.action): step for step in TABLE}


@dataclass(frozen=True, kw_only=True, slots=True)
class Limits:
    """The times of a submission by which the clock changes how it reads."""

    install_by: datetime | None
    temporary_until: datetime | None


def clock_rule(stored: State, limits: Limits, now: datetime) -> ClockRule | None:
    """Return the rule by which the clock changes how a stored state reads at `now`: later than the limit."""
    for rule in CLOCK:
        limit: datetime | None = getattr(limits, rule.limit)
        if rule.stored == stored and limit is not None and now > limit:
            return rule
    return None


def as_read(stored: State, limits: Limits, now: datetime) -> State:
    """Return the state as it reads at `now`."""
    rule = clock_rule(stored, limits, now)
    return stored if rule is None else rule.reads


def step(state: State, action: Action) -> Step:
    """The row of the table for `action` from `state` as read; raise WrongStep where there is none."""
    found = _STEPS.get((state, action))
    if found is None:
        raise WrongStep(f"a submission that is {in_words(state)} cannot be {_PAST[action]}")
    return found


def allows(state: State, action: Action) -> bool:
    """True where the table has a row for `action` from `state`."""
    return (state, action) in _STEPS


def check_who(action: Action, actor: Actor, authors: frozenset[str]) -> None:
    """Raise NotAllowed unless `actor` may take `action` on what the accounts `authors` submitted and
    prepared.
    """
    is_author = actor.account_id in authors
    match WHO[action]:
        case "author" if not is_author:
            raise NotAllowed("only whoever submitted or prepared it withdraws it")
        case "independent_reviewer" | "reviewer" if "reviewer" not in actor.roles:
            raise NotAllowed("this needs the role reviewer")
        case "independent_reviewer" if is_author:
            raise NotIndependent("whoever submitted or prepared gains neither approves nor rejects them")
        case "submitter" if "submitter" not in actor.roles:
            raise NotAllowed("this needs the role submitter")
        case "service":
            raise NotAllowed("this follows from another step and is not asked for")


def actions_open_to(state: State, actor: Actor, authors: frozenset[str]) -> tuple[Action, ...]:
    """The actions that `actor` may take from `state`, in the table's order."""

    def open_steps() -> Iterator[Action]:
        for row in TABLE:
            if row.state != state:
                continue
            try:
                check_who(row.action, actor, authors)
            except NotAllowed:
                continue
            yield row.action

    return tuple(open_steps())


def review_due_at(state: State, kind: Kind, submitted_at: datetime) -> datetime | None:
    """The time until which a change that runs already has to be reviewed; None where no review presses."""
    if state in REVIEW_OWED and kind in IN_FORCE_FROM_THE_START:
        return submitted_at + EMERGENCY_REVIEW_WITHIN
    return None


def is_overdue(stored: State, limits: Limits, due_at: datetime | None, now: datetime) -> bool:
    """Say whether a review is owed past its time, or gains run past the time they are good for."""
    rule = clock_rule(stored, limits, now)
    return (rule is not None and rule.overdue) or (due_at is not None and now > due_at)


def in_words(state: State) -> str:
    """The state as it stands in a sentence."""
    return _WORDS[state]


def diagram() -> str:
    """The table as a Mermaid state diagram, clock rules included."""
    starts = [f"    [*] --> {state}: {kind}" for kind, state in START.items()]
    steps = [f"    {row.state} --> {row.target}: {row.action} ({WHO[row.action]})" for row in TABLE]
    clock = [f"    {rule.stored} --> {rule.reads}: past {rule.limit} (clock)" for rule in CLOCK]
    return "\n".join(["stateDiagram-v2", *starts, *steps, *clock])


_WORDS: dict[State, str] = {
    "awaiting_review": "awaiting review",
    "approved": "approved and not yet installed",
    "in_force": "in force",
    "installed_awaiting_review": "installed and awaiting its review",
    "superseded_awaiting_review": "no longer installed and still awaiting its review",
    "recorded": "recorded as found",
    "superseded": "superseded",
    "rejected": "rejected",
    "withdrawn": "withdrawn",
    "revoked": "revoked",
    "expired": "expired without being installed",
    "lapsed": "past the time it was approved for",
}

_PAST: dict[Action, str] = {
    "approve_first": "approved",
    "approve": "approved",
    "reject": "rejected",
    "withdraw": "withdrawn",
    "revoke": "revoked",
    "install": "installed",
    "install_otherwise": "installed",
    "supersede": "superseded",
}
