"""Gains left in a controller otherwise than approved, and not put right since, as far as is recorded.

What is in force by the record and what was typed in last are two things, and whoever asks for the one needs
the other. It is put right by gains that are left as approved, whole, or that come into force in another way.
"""

from __future__ import annotations

from collections.abc import Iterable
from functools import cache

from sqlalchemy import ColumnElement, Select, bindparam, or_, select
from sqlalchemy.orm import Session, aliased

from service.records import loops
from service.records.content import RecomputedAsLeft, read_installation
from service.records.roles import Actor
from service.records.tables.submissions import (
    GainsComingIntoForce,
    Installation,
    Submission,
    SubmissionState,
)
from service.records.views import InstallationView

_OTHER = aliased(Submission)


def of_loop(session: Session, actor: Actor, loop_id: str) -> InstallationView | None:
    """Return the last installation that left other gains than approved in a loop's controller, or None.

    Raises NotFound.
    """
    loops.found(session, actor, loop_id)
    row = session.execute(_last(), {"loop_id": loop_id}).scalar_one_or_none()
    if row is None:
        return None
    entry = loops.written_by(session, row.event_number)[1]
    return InstallationView(installation=read_installation(row.content), entry=entry)


def recomputed(session: Session, submission_ids: Iterable[str]) -> dict[str, RecomputedAsLeft | None]:
    """Return what was last recomputed of each submission whose gains were left otherwise, and are so still.

    None: it was recorded before such gains were recomputed.
    """
    found = session.execute(_of_submissions(), {"submission_ids": tuple(submission_ids)}).scalars()
    last = {row.submission_id: row.content for row in found}
    return {each: read_installation(content).as_left_recomputed for each, content in last.items()}


@cache
def is_left_otherwise() -> ColumnElement[bool]:
    """Return the condition that a selected submission's gains were left otherwise and not put right since."""
    mine = select(Installation.id).where(Installation.submission_id == Submission.id)
    return mine.where(_not_put_right()).exists()


@cache
def _last() -> Select[Installation]:
    return (
        select(Installation)
        .join(Submission, Submission.id == Installation.submission_id)
        .where(Submission.loop_id == bindparam("loop_id"), _not_put_right())
        .order_by(Installation.event_number.desc())
        .limit(1)
    )


@cache
def _of_submissions() -> Select[Installation]:
    return (
        select(Installation)
        .join(Submission, Submission.id == Installation.submission_id)
        .where(Submission.id.in_(bindparam("submission_ids", expanding=True)), _not_put_right())
        .order_by(Installation.event_number)
    )


@cache
def _not_put_right() -> ColumnElement[bool]:
    """The condition on a selected installation and its submission."""
    installed = (
        select(SubmissionState.ordinal)
        .join(_OTHER, _OTHER.id == SubmissionState.submission_id)
        .where(
            _OTHER.loop_id == Submission.loop_id,
            SubmissionState.action == "install",
            SubmissionState.event_number > Installation.event_number,
        )
        .correlate(Submission, Installation)
    )
    others = (
        select(GainsComingIntoForce.ordinal)
        .where(
            GainsComingIntoForce.loop_id == Submission.loop_id,
            GainsComingIntoForce.event_number > Installation.event_number,
        )
        .correlate(Submission, Installation)
    )
    return ~Installation.as_approved & ~or_(installed.exists(), others.exists())
