"""What may become of a proposed change of a loop, and by whom: the one place that knows.

A change is decided once and for good. One that nobody has decided reads as `overtaken` when what it was made
from has moved: then it can be rejected or withdrawn, and is proposed again from what is.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import Literal

from service.records.errors import NotAllowed, NotIndependent, WrongStep
from service.records.roles import Actor

ChangeState = Literal["awaiting_confirmation", "overtaken", "confirmed", "rejected", "withdrawn"]
ChangeAction = Literal["confirm", "reject", "withdraw"]

TABLE: dict[tuple[ChangeState, ChangeAction], ChangeState] = {
    ("awaiting_confirmation", "confirm"): "confirmed",
    ("awaiting_confirmation", "reject"): "rejected",
    ("awaiting_confirmation", "withdraw"): "withdrawn",
    ("overtaken", "reject"): "rejected",
    ("overtaken", "withdraw"): "withdrawn",
}

_DECIDED: dict[ChangeAction, ChangeState] = {
    action: target for (state, action), target in TABLE.items() if state == "awaiting_confirmation"
}
"""The state that each decision leaves for good."""

_WHO: dict[ChangeAction, str] = {
    "confirm": "another reviewer",
    "reject": "another reviewer",
    "withdraw": "author",
}

_WORDS: dict[ChangeState, str] = {
    "awaiting_confirmation": "awaiting a second person",
    "overtaken": "overtaken by another change",
    "confirmed": "confirmed",
    "rejected": "rejected",
    "withdrawn": "withdrawn",
}


def as_read(decision: ChangeAction | None, *, moved: bool) -> ChangeState:
    """Return the state of a change: by its decision, else by whether what it was made from has moved."""
    if decision is not None:
        return _DECIDED[decision]
    return "overtaken" if moved else "awaiting_confirmation"


def is_overtaken(state: ChangeState) -> bool:
    """Say whether something is left to decide, and it is not the change itself."""
    return allows(state, "reject") and not allows(state, "confirm")


def allows(state: ChangeState, action: ChangeAction) -> bool:
    """Say whether the table has a row for `action` from `state`."""
    return (state, action) in TABLE


def check(state: ChangeState, action: ChangeAction) -> None:
    """Raise WrongStep where `action` leads nowhere from `state`."""
    if not allows(state, action):
        again = "; propose it again from the loop as it is" if state == "overtaken" else ""
        raise WrongStep(f"this change is {in_words(state)}{again}")


def check_who(action: ChangeAction, actor: Actor, proposed_by: str) -> None:
    """Raise NotAllowed unless `actor` may take `action` on what the account `proposed_by` proposed."""
    own = actor.account_id == proposed_by
    if action == "withdraw":
        if not own:
            raise NotAllowed("only whoever proposed a change withdraws it")
        return
    if "reviewer" not in actor.roles:
        raise NotAllowed("this needs the role reviewer")
    if own:
        raise NotIndependent("whoever proposed a change neither confirms nor rejects it")


def open_to(state: ChangeState, actor: Actor, proposed_by: str) -> tuple[ChangeAction, ...]:
    """Return what `actor` may decide, in the table's order."""

    def possible() -> Iterator[ChangeAction]:
        for origin, action in TABLE:
            if origin != state:
                continue
            try:
                check_who(action, actor, proposed_by)
            except NotAllowed:
                continue
            yield action

    return tuple(possible())


def diagram() -> str:
    """The table as a Mermaid state diagram, and what the loop's own movement makes of a change."""
    start, moved = as_read(None, moved=False), as_read(None, moved=True)
    steps = [
        f"    {state} --> {target}: {action} ({_WHO[action]})" for (state, action), target in TABLE.items()
    ]
    clock = f"    {start} --> {moved}: the loop or the model has moved (as read)"
    return "\n".join(
        ["stateDiagram-v2", f"    [*] --> {start}: propose (submitter, administrator)", *steps, clock]
    )


def in_words(state: ChangeState) -> str:
    """The state as it stands in a sentence."""
    return _WORDS[state]
