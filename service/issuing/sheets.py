"""The sheet of a submission, made from the records, and the decision with which one is kept."""

from __future__ import annotations

from dataclasses import replace
from datetime import datetime

from sqlalchemy.orm import Session

from service.documents.decisions import DecisionRequest
from service.issuing import checkpoints
from service.issuing.checkpoints import SigningKey
from service.records import decisions, history, kept_sheets, queries
from service.records.roles import Actor
from service.records.views import DecisionView, SubmissionView
from service.sheets.content import RENDERER_VERSION, SheetContent, content_of
from service.sheets.layout import sheet_pdf


def content(session: Session, actor: Actor, view: SubmissionView) -> SheetContent:
    """Return what stands on the sheet of a submission in the state that `view` shows."""
    before = view.content.gains_in_force
    return content_of(
        view,
        queries.curves(session, actor, view.id),
        curves_in_force=queries.curves(session, actor, before.submission_id) if before else (),
        demonstration=history.is_demonstration(session),
    )


def sign(
    session: Session,
    actor: Actor,
    submission_id: str,
    request: DecisionRequest,
    now: datetime,
    signing_key: SigningKey | None,
) -> DecisionView:
    """Sign a decision, and keep with it a checkpoint and the sheet as it was made, in the same transaction.

    The checkpoint covers the decision's own entry; without a key it is unsigned and says so. Raises what
    `service.records.decisions.decide` raises.
    """
    decided = decisions.decide(session, actor, submission_id, request, now)
    checkpoint = checkpoints.checkpoint(session, signing_key)
    made = replace(decided, checkpoint=checkpoint)
    view = queries.submission(session, actor, submission_id, now)
    # read back it has none yet: the entry that keeps both is the next one
    view = replace(view, decisions=(*view.decisions[:-1], made))
    pdf = sheet_pdf(content(session, actor, view))
    kept_sheets.keep(session, actor, made.decision.decision_id, pdf, RENDERER_VERSION, checkpoint, now)
    return made


def sheet(session: Session, actor: Actor, submission_id: str, now: datetime) -> bytes:
    """Return the sheet in its present state as PDF. Raises NotFound."""
    view = queries.submission(session, actor, submission_id, now)
    return sheet_pdf(content(session, actor, view))
