"""The decision on a change of a loop, with which the history's checkpoint is kept."""

from __future__ import annotations

from datetime import datetime

from sqlalchemy.orm import Session

from service.issuing import checkpoints
from service.issuing.checkpoints import SigningKey
from service.records import change_queries, changes, kept_checkpoints
from service.records.changes import PreparedDecision
from service.records.roles import Actor
from service.records.views import ChangeView


def sign(
    session: Session,
    actor: Actor,
    change_id: str,
    prepared: PreparedDecision,
    now: datetime,
    signing_key: SigningKey | None,
) -> ChangeView:
    """Sign a decision on a change, and keep a checkpoint with it in the same transaction.

    The checkpoint covers the decision's own entry; without a key it is unsigned and says so. Raises what
    `service.records.changes.decide` raises.
    """
    changes.decide(session, actor, change_id, prepared, now)
    checkpoint = checkpoints.checkpoint(session, signing_key)
    kept_checkpoints.keep_with_change(session, actor, change_id, checkpoint, now)
    return change_queries.find(session, actor, change_id)
