"""Loops with their revisions, and their models by operating point.

Each change is a new revision or version.
"""

from __future__ import annotations

from datetime import datetime

from sqlalchemy.orm import Session

from service.documents.loops import LoopRegistration, ModelVersion
from service.records.roles import Actor
from service.records.views import LoopView, ModelView


def check_may_change(actor: Actor) -> None:
    """Raise NotAllowed unless the actor may register and change loops and add models."""
    raise NotImplementedError


def register(session: Session, actor: Actor, document: LoopRegistration, now: datetime) -> LoopView:
    """Register a loop.

    Raises NotAllowed, FieldErrors (an area outside the actor's, an unknown inner loop), AlreadyExists.
    """
    raise NotImplementedError


def change(
    session: Session, actor: Actor, loop_id: str, document: LoopRegistration, revision: int, now: datetime
) -> LoopView:
    """Make a new revision of a loop. `revision` is the one that the change was made from.

    Raises NotFound, NotAllowed, FieldErrors (site and tag stay), StaleContent.
    """
    raise NotImplementedError


def find(session: Session, actor: Actor, loop_id: str, revision: int | None = None) -> LoopView:
    """A loop at its present or an earlier revision. Raises NotFound."""
    raise NotImplementedError


def find_by_tag(session: Session, actor: Actor, site: str, tag: str) -> LoopView:
    """A loop by site and tag, without regard to case. Raises NotFound."""
    raise NotImplementedError


def revisions(session: Session, actor: Actor, loop_id: str) -> tuple[LoopView, ...]:
    """All revisions of a loop, latest first."""
    raise NotImplementedError


def add_model(
    session: Session, actor: Actor, loop_id: str, document: ModelVersion, now: datetime
) -> ModelView:
    """Add a model version; it takes the place of the earlier one of the same operating point.

    Raises NotFound, NotAllowed.
    """
    raise NotImplementedError


def models(session: Session, actor: Actor, loop_id: str) -> tuple[ModelView, ...]:
    """All model versions of a loop, latest first."""
    raise NotImplementedError


def model(session: Session, actor: Actor, loop_id: str, model_id: str) -> ModelView:
    """One model version. Raises NotFound."""
    raise NotImplementedError
