"""The history's checkpoint that was made with a decision, kept as a row, and read back as it was made.

One of a decision on gains is kept with its sheet (`kept_sheets`); a change of a loop has no sheet.
"""

from __future__ import annotations

from dataclasses import fields
from datetime import datetime
from typing import Any

from sqlalchemy.orm import Session

from service.records import history, loops
from service.records.errors import NotFound
from service.records.roles import Actor
from service.records.tables.changes import LoopChange, LoopChangeDecision
from service.records.tables.checkpoints import ChangeCheckpoint, KeptCheckpoint
from service.records.views import Checkpoint, EntryReference


def keep_with_change(
    session: Session, actor: Actor, change_id: str, checkpoint: Checkpoint, now: datetime
) -> EntryReference:
    """Keep the checkpoint made at the decision on a change, in the decision's own transaction.

    It has an entry of its own in the history, since it holds the digest of the decision's. Raises NotFound.
    """
    if session.get(LoopChangeDecision, change_id) is None:
        raise NotFound("there is no such decision")
    loop_id = session.get_one(LoopChange, change_id).loop_id
    return history.append(
        session,
        kind="checkpoint_kept",
        actor=actor,
        about=loops.about(*loops.found(session, actor, loop_id)),
        content={"change_id": change_id, "checkpoint": checkpoint},
        now=now,
        rows=(ChangeCheckpoint(change_id=change_id, **parts(checkpoint)),),
    )


def read(row: KeptCheckpoint | None) -> Checkpoint | None:
    """Return a checkpoint as it was made; None where none was kept with the decision."""
    return None if row is None else Checkpoint(**parts(row))


def parts(told: Checkpoint | KeptCheckpoint) -> dict[str, Any]:
    """Return what a checkpoint consists of, by the names of its columns."""
    return {each.name: getattr(told, each.name) for each in fields(Checkpoint)}
