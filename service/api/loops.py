"""Loops and their models."""

from __future__ import annotations

from dataclasses import dataclass

from flask import Blueprint, request

from service.api import answers, representations
from service.api.answers import Answer
from service.api.operations import Call, Reader, changes, reads
from service.api.preconditions import check_match, revision_etag
from service.api.queries import NoQuery, PageQuery, Text
from service.documents.loops import LoopRegistration, ModelVersion, RevisedLoop
from service.records import left_otherwise, loops, queries
from service.records.queries import LoopFilter
from service.records.views import GainsInForce, LoopView

blueprint = Blueprint("loops", __name__, url_prefix="/v1/loops")


@dataclass(frozen=True, kw_only=True)
class LoopQuery(PageQuery):
    """Which loops: site and tag without regard to case, `q` anywhere in tag or description."""

    site: Text | None = None
    tag: Text | None = None
    area: Text | None = None
    q: Text | None = None


@dataclass(frozen=True, kw_only=True)
class Running:
    """The gains that run in the controller as far as is recorded; null where nothing is."""

    gains_in_force: GainsInForce | None
    left_otherwise: representations.Installation | None
    """The last installation that left other gains than approved, where nothing has put that right since: then
    those gains run, whatever is in force by the record."""


@blueprint.post("")
@changes(LoopRegistration, representations.Loop)
def register_loop(call: Call, read: Reader[LoopRegistration]) -> Answer:
    """Register a loop."""
    loops.check_may_change(call.actor)
    return _answer(loops.register(call.session, call.actor, read(), call.now), status=201)


@blueprint.get("")
@reads(LoopQuery, representations.Loop, a_list=True)
def list_loops(call: Call, query: LoopQuery) -> Answer:
    """List loops by site and tag."""
    wanted = LoopFilter(site=query.site, tag=query.tag, area=query.area, q=query.q)
    part = queries.loops(call.session, call.actor, wanted, answers.after(query), query.limit)
    return answers.page(part, representations.Loop.of)


@blueprint.get("/<loop_id>")
@reads(NoQuery, representations.Loop)
def show_loop(call: Call, _query: NoQuery, loop_id: str) -> Answer:
    """Show a loop at its present revision, with the ETag that a change has to name."""
    return _answer(loops.find(call.session, call.actor, loop_id))


@blueprint.put("/<loop_id>")
@changes(RevisedLoop, representations.Loop, status=200)
def change_loop(call: Call, read: Reader[RevisedLoop], loop_id: str) -> Answer:
    """Change a loop, with a reason: a new revision, while the earlier ones stay."""
    present = loops.find(call.session, call.actor, loop_id)
    loops.check_may_change(call.actor)
    document = read()
    check_match(request, revision_etag(present.revision))
    reason, revision = document.reason, present.revision
    return _answer(loops.change(call.session, call.actor, loop_id, document.loop, reason, revision, call.now))


@blueprint.get("/<loop_id>/revisions")
@reads(NoQuery, representations.Loop, a_list=True)
def list_revisions(call: Call, _query: NoQuery, loop_id: str) -> Answer:
    """List all revisions of a loop, latest first."""
    return answers.whole_list(loops.revisions(call.session, call.actor, loop_id), representations.Loop.of)


@blueprint.get("/<loop_id>/gains-in-force")
@reads(NoQuery, Running)
def show_gains_in_force(call: Call, _query: NoQuery, loop_id: str) -> Answer:
    """Show the gains that run in a loop's controller as far as is recorded."""
    running = queries.gains_in_force(call.session, call.actor, loop_id, call.now)
    otherwise = left_otherwise.of_loop(call.session, call.actor, loop_id)
    shown = representations.Installation.of(otherwise) if otherwise else None
    return answers.document(Running(gains_in_force=running, left_otherwise=shown))


@blueprint.post("/<loop_id>/models")
@changes(ModelVersion, representations.Model)
def add_model(call: Call, read: Reader[ModelVersion], loop_id: str) -> Answer:
    """Add a model version; it takes the place of the earlier one of the same operating point."""
    loops.find(call.session, call.actor, loop_id)
    loops.check_may_change(call.actor)
    model = loops.add_model(call.session, call.actor, loop_id, read(), call.now)
    location = f"/v1/loops/{loop_id}/models/{model.id}"
    return answers.document(representations.Model.of(model), status=201, location=location)


@blueprint.get("/<loop_id>/models")
@reads(NoQuery, representations.Model, a_list=True)
def list_models(call: Call, _query: NoQuery, loop_id: str) -> Answer:
    """List all model versions of a loop, latest first."""
    return answers.whole_list(loops.models(call.session, call.actor, loop_id), representations.Model.of)


@blueprint.get("/<loop_id>/models/<model_id>")
@reads(NoQuery, representations.Model)
def show_model(call: Call, _query: NoQuery, loop_id: str, model_id: str) -> Answer:
    """Show one model version."""
    model = loops.model(call.session, call.actor, loop_id, model_id)
    return answers.document(representations.Model.of(model))


def _answer(loop: LoopView, status: int = 200) -> Answer:
    return answers.document(
        representations.Loop.of(loop),
        status=status,
        location=f"/v1/loops/{loop.id}" if status == 201 else None,
        etag=revision_etag(loop.revision),
    )
