"""What every signature has in common, whatever it is given on: how its person is named, and a refused one."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import datetime

from sqlalchemy.orm import Session

from service.records import history, loops, throttles
from service.records.content import Person
from service.records.errors import NotIndependent, SigningRefused, WrongPassword
from service.records.roles import Actor


def person(actor: Actor) -> Person:
    """Return the actor as named now; a later change of name does not reach the signature."""
    return Person(name=actor.name, full_name=actor.full_name)


def record_refused(
    session: Session,
    actor: Actor,
    loop_id: str,
    what: Mapping[str, str],
    refusal: SigningRefused | NotIndependent,
    now: datetime,
) -> None:
    """Leave the trace of a signing on `what` that was refused, and count a wrong password.

    In a transaction of its own, after what was begun has been rolled back.
    """
    if isinstance(refusal, WrongPassword):
        throttles.count(session, throttles.of_account(actor.name), now)
    history.append(
        session,
        kind="signing_refused",
        actor=actor,
        about=loops.about(*loops.present(session, loop_id)),
        content={**what, "reason": refusal.detail},
        now=now,
    )
