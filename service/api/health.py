"""Whether the process lives, and whether it can do its work. Open to all: they say nothing else."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from flask import Blueprint, Response

from service.api import answers
from service.context import services
from service.records import history, migrating
from service.records.errors import StoreNotUsable

blueprint = Blueprint("health", __name__)


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
    """Say that the database answers, has the current schema and a history; 503 where not."""
    with services().database.reading() as session:
        if not migrating.is_current(session):
            raise StoreNotUsable("the database is not at the current schema: run gain-signoff migrate")
        history.head(session)
    return answers.response(answers.document(Health(status="ready")))
