"""Gains submitted for a loop: sent by a tool, recomputed here, kept whole."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from flask import Blueprint

from service.api import answers, representations
from service.api.answers import Answer
from service.api.operations import Call, Reader, changes_prepared, reads
from service.api.queries import NoQuery, PageQuery, Text
from service.documents.submissions import SubmissionRequest
from service.records import queries, submissions
from service.records.lifecycle import State
from service.records.queries import SubmissionFilter
from service.records.submissions import PreparedSubmission
from service.records.views import CurvesView, SubmissionComparison, SubmissionSummary

blueprint = Blueprint("submissions", __name__, url_prefix="/v1/submissions")


@dataclass(frozen=True, kw_only=True)
class SubmissionQuery(PageQuery):
    """Which submissions; the state is the one at the time of asking."""

    state: State | None = None
    site: Text | None = None
    tag: Text | None = None
    recheck_due: Literal["true", "false"] | None = None
    left_otherwise: Literal["true", "false"] | None = None


@dataclass(frozen=True, kw_only=True)
class ComparisonQuery:
    """Which submission is taken as the one before; left out: the gains in force now."""

    before: Text | None = None


def _recompute(call: Call, read: Reader[SubmissionRequest]) -> PreparedSubmission:
    submissions.check_may_submit(call.actor)
    return submissions.prepare(call.session, call.actor, read(), call.now)


@blueprint.post("")
@changes_prepared(SubmissionRequest, representations.Submission, _recompute)
def submit(call: Call, prepared: PreparedSubmission) -> Answer:
    """Submit gains for a loop; they are recomputed with every model in force."""
    made = submissions.submit(call.session, call.actor, prepared, call.now)
    shown = representations.Submission.of(made)
    return answers.document(shown, status=201, location=f"/v1/submissions/{made.id}")


@blueprint.get("")
@reads(SubmissionQuery, SubmissionSummary, a_list=True)
def list_submissions(call: Call, query: SubmissionQuery) -> Answer:
    """List submissions, latest first."""
    states = frozenset({query.state} if query.state else ())
    wanted = SubmissionFilter(
        states=states,
        site=query.site,
        tag=query.tag,
        recheck_due=_said(query.recheck_due),
        left_otherwise=_said(query.left_otherwise),
    )
    part = queries.submissions(call.session, call.actor, wanted, call.now, answers.after(query), query.limit)
    return answers.page(part, answers.as_it_is)


@blueprint.get("/<submission_id>")
@reads(NoQuery, representations.Submission)
def show_submission(call: Call, _query: NoQuery, submission_id: str) -> Answer:
    """Show a submission whole, with its decisions and the comparison to the gains in force."""
    view = queries.submission(call.session, call.actor, submission_id, call.now)
    return answers.document(representations.Submission.of(view))


@blueprint.get("/<submission_id>/comparison")
@reads(ComparisonQuery, SubmissionComparison)
def show_comparison(call: Call, query: ComparisonQuery, submission_id: str) -> Answer:
    """Hold the gains against another submission of the loop, or against the gains in force now."""
    return answers.document(queries.compare(call.session, call.actor, submission_id, query.before))


@blueprint.get("/<submission_id>/content")
@reads(NoQuery, None)
def show_content(call: Call, _query: NoQuery, submission_id: str) -> Answer:
    """Give the exact bytes that are signed; content_digest is their SHA-256."""
    return Answer(body=queries.content_bytes(call.session, call.actor, submission_id))


@blueprint.get("/<submission_id>/curves")
@reads(NoQuery, CurvesView, a_list=True)
def list_curves(call: Call, _query: NoQuery, submission_id: str) -> Answer:
    """List the response curves that were stored with the recomputations."""
    return answers.whole_list(queries.curves(call.session, call.actor, submission_id), answers.as_it_is)


def _said(text: Literal["true", "false"] | None) -> bool | None:
    return None if text is None else text == "true"
