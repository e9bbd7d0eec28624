"""Changes of what approvals rest on: proposed by one person, confirmed by another."""

from __future__ import annotations

from dataclasses import dataclass

from flask import Blueprint

from service.api import answers, problems, representations
from service.api.answers import Answer
from service.api.operations import Call, Reader, Variables, changes, changes_prepared, reads
from service.api.queries import NoQuery, PageQuery, Text
from service.context import services
from service.documents.changes import ChangeDecisionRequest, LoopChangeRequest
from service.issuing import changes as issuing
from service.records import change_queries as queries
from service.records import changes as records
from service.records import loops
from service.records.change_lifecycle import ChangeState
from service.records.change_queries import ChangeFilter
from service.records.changes import PreparedDecision
from service.records.errors import NotIndependent, SigningRefused
from service.records.views import ChangeView

blueprint = Blueprint("changes", __name__, url_prefix="/v1")


@dataclass(frozen=True, kw_only=True)
class ChangeQuery(PageQuery):
    """Which changes; the state is the one at the time of asking."""

    state: ChangeState | None = None
    site: Text | None = None
    tag: Text | None = None


def _prepare(call: Call, read: Reader[ChangeDecisionRequest], change_id: str) -> PreparedDecision:
    records.check_may_decide(call.session, call.actor, change_id, None)
    return records.prepare(call.session, call.actor, change_id, read(), call.now)


def _leave_trace(call: Call, refusal: SigningRefused | NotIndependent, path: Variables) -> None:
    records.record_refused_signing(call.session, call.actor, path["change_id"], refusal, call.now)


@blueprint.post("/loops/<loop_id>/changes")
@changes(LoopChangeRequest, representations.LoopChange, refuses=(problems.PRECONDITION_FAILED,))
def propose_change(call: Call, read: Reader[LoopChangeRequest], loop_id: str) -> Answer:
    """Propose a change of what approvals of a loop rest on, or the retirement of an operating point."""
    loops.find(call.session, call.actor, loop_id)
    loops.check_may_change(call.actor)
    return _answer(records.propose(call.session, call.actor, loop_id, read(), call.now))


@blueprint.get("/loops/<loop_id>/changes")
@reads(PageQuery, representations.LoopChange, a_list=True)
def list_changes_of_loop(call: Call, query: PageQuery, loop_id: str) -> Answer:
    """List the changes that were proposed for a loop, latest first."""
    loops.find(call.session, call.actor, loop_id)
    wanted = ChangeFilter(loop_id=loop_id)
    part = queries.changes(call.session, call.actor, wanted, answers.after(query), query.limit)
    return answers.page(part, representations.LoopChange.of)


@blueprint.get("/changes")
@reads(ChangeQuery, representations.LoopChange, a_list=True)
def list_changes(call: Call, query: ChangeQuery) -> Answer:
    """List proposed changes of loops, latest first."""
    wanted = ChangeFilter(state=query.state, site=query.site, tag=query.tag)
    part = queries.changes(call.session, call.actor, wanted, answers.after(query), query.limit)
    return answers.page(part, representations.LoopChange.of)


@blueprint.get("/changes/<change_id>")
@reads(NoQuery, representations.LoopChange)
def show_change(call: Call, _query: NoQuery, change_id: str) -> Answer:
    """Show a proposed change with what became of it."""
    return _answer(queries.find(call.session, call.actor, change_id), status=200)


@blueprint.get("/changes/<change_id>/content")
@reads(NoQuery, None)
def show_change_content(call: Call, _query: NoQuery, change_id: str) -> Answer:
    """Give the exact bytes that are signed; content_digest is their SHA-256."""
    return Answer(body=queries.content_bytes(call.session, call.actor, change_id))


@blueprint.post("/changes/<change_id>/decisions")
@changes_prepared(ChangeDecisionRequest, representations.LoopChange, _prepare, trace=_leave_trace)
def decide_change(call: Call, prepared: PreparedDecision, change_id: str) -> Answer:
    """Confirm, reject or withdraw a change with one's own password; a confirmed one takes effect at once."""
    key = services().signing_key
    return _answer(issuing.sign(call.session, call.actor, change_id, prepared, call.now, key))


def _answer(view: ChangeView, status: int = 201) -> Answer:
    shown = representations.LoopChange.of(view)
    location = f"/v1/changes/{view.id}" if status == 201 else None
    return answers.document(shown, status=status, location=location)
