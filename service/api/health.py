"""Whether the process lives, and whether it can do its work. Open to all: they say nothing else."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime, timedelta
from typing import Literal

from flask import Blueprint, Response
from sqlalchemy.exc import SQLAlchemyError

from service.api import answers
from service.context import services
from service.records import history, migrating
from service.records.database import Database
from service.records.errors import StoreNotUsable
from service.records.views import HeadView

blueprint = Blueprint("health", __name__)

CLOCK_BEHIND_MAX = timedelta(minutes=5)
"""How far the clock may be behind the last entry of the history, since servers' clocks differ.

Common practice."""


@dataclass(frozen=True, kw_only=True)
class Health:
    """The one word that a supervisor of the service needs."""

    status: Literal["alive", "ready"]


@blueprint.get("/livez")
def livez() -> Response:
    """Say that the process answers; depends on nothing."""
    return answers.response(answers.document(Health(status="alive")))


@blueprint.get("/readyz")
def readyz() -> Response:
    """Say that the database answers, has the current schema and a history, and that no clock was set back.

    503 where not; which of them it is stands in the log.
    """
    try:
        _check_store(services().database)
    except SQLAlchemyError as failed:
        # whatever it is, and be it a file that is no database any more: no request would do better
        raise StoreNotUsable("the database cannot be used") from failed
    return answers.response(answers.document(Health(status="ready")))


def _check_store(database: Database) -> None:
    with database.reading() as session:
        if not migrating.is_current(session):
            raise StoreNotUsable("the database is not at the current schema: run gain-signoff migrate")
        _check_clock(history.head(session), database.now())


def _check_clock(head: HeadView, now: datetime) -> None:
    # what lapses or expires does so by the clock: one that was set back would show it as running
    if head.time is None:
        raise StoreNotUsable("the history has no entry: run gain-signoff migrate")
    if now < head.time - CLOCK_BEHIND_MAX:
        raise StoreNotUsable(f"the clock says {now:%Y-%m-%d %H:%M} UTC, before the last entry of the history")
