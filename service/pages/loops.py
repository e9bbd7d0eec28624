"""The loops of a person's areas, and one loop with all that is known of it."""

from __future__ import annotations

from dataclasses import dataclass

from flask import Blueprint, Response

from service.judgement.wording import criterion_words
from service.pages import forms, left_otherwise, lists, visits
from service.pages.forms import Form
from service.pages.frame import page
from service.pages.left_otherwise import LeftOtherwise
from service.pages.visits import Visit
from service.records import change_queries, queries
from service.records import loops as records
from service.records.change_queries import ChangeFilter
from service.records.queries import LoopFilter, SubmissionFilter
from service.records.views import (
    ChangeView,
    GainsInForce,
    LoopView,
    ModelView,
    Page,
    SubmissionSummary,
)
from service.sheets import controllers, plants
from service.sheets.controllers import Told

SUBMISSIONS_SHOWN = 100


@dataclass(frozen=True, slots=True)
class ToldModel:
    """A model version with its parameters in words."""

    view: ModelView
    parameters: tuple[Told, ...]


@dataclass(frozen=True, slots=True)
class ToldGains:
    """A set of gains in words; `condition` empty where there is only one."""

    condition: str
    gains: tuple[Told, ...]
    surroundings: tuple[Told, ...]


@dataclass(frozen=True, slots=True)
class LoopPage:
    """All that the page of a loop shows."""

    view: LoopView
    revisions: tuple[LoopView, ...]
    models: tuple[ToldModel, ...]
    in_force: GainsInForce | None
    left_otherwise: LeftOtherwise | None
    gain_sets: tuple[ToldGains, ...]
    limits: tuple[str, ...]
    """Empty: the service's own floors hold."""
    changes: Page[ChangeView]
    may_change: bool
    submissions: Page[SubmissionSummary]


def add_to(pages: Blueprint) -> None:
    """Add these pages."""
    pages.add_url_rule("/loops", "loops", loops)
    pages.add_url_rule("/loops/<loop_id>", "loop", loop)


def loops() -> Response:
    """Loops that match what stands in the address."""
    form = forms.queried()
    with visits.reading() as visit:
        found = queries.loops(visit.session, visit.actor, _filter(form), lists.after())
    return page("loops.html", form=form, found=found, following=lists.next_address(found.after))


def loop(loop_id: str) -> Response:
    """One loop: its revisions, ranges, models, limits, gains in force and submissions."""
    with visits.reading() as visit:
        shown = _loop_page(visit, loop_id)
    return page("loop.html", loop=shown)


def _filter(form: Form) -> LoopFilter:
    site, tag, area, q = (form.typed(name) or None for name in ("site", "tag", "area", "q"))
    return LoopFilter(site=site, tag=tag, area=area, q=q)


def _loop_page(visit: Visit, loop_id: str) -> LoopPage:
    session, actor, now = visit.session, visit.actor, visit.now
    view = records.find(session, actor, loop_id)
    models = records.models(session, actor, loop_id)
    in_force = queries.gains_in_force(session, actor, loop_id, now)
    wanted = SubmissionFilter(loop_id=loop_id)
    return LoopPage(
        view=view,
        revisions=records.revisions(session, actor, loop_id),
        models=tuple(ToldModel(each, plants.told(each.model.plant_model)) for each in models),
        in_force=in_force,
        left_otherwise=left_otherwise.of_loop(visit, loop_id),
        gain_sets=_gain_sets(in_force),
        limits=_limits(view),
        changes=change_queries.changes(session, actor, ChangeFilter(loop_id=loop_id)),
        may_change=records.may_change(actor),
        submissions=queries.submissions(session, actor, wanted, now, limit=SUBMISSIONS_SHOWN),
    )


def _gain_sets(in_force: GainsInForce | None) -> tuple[ToldGains, ...]:
    return tuple(
        ToldGains(
            each.condition or "",
            controllers.gains(each.controller),
            controllers.surroundings(each.controller),
        )
        for each in (in_force.gain_sets if in_force else ())
    )


def _limits(view: LoopView) -> tuple[str, ...]:
    criteria = view.loop.criteria
    if criteria is None:
        return ()
    limits = ((name, getattr(criteria, name)) for name in criteria.__dataclass_fields__)
    return tuple(criterion_words(name, limit) for name, limit in limits if limit is not None)
