"""All submissions, latest first, by state, site and tag."""

from __future__ import annotations

from typing import get_args

from flask import Blueprint, Response

from service.pages import forms, lists, visits
from service.pages.forms import Form, Problem
from service.pages.frame import page
from service.pages.options import ANY, Option
from service.records import lifecycle, queries
from service.records.lifecycle import State
from service.records.queries import SubmissionFilter

STATES: dict[str, State] = {state: state for state in get_args(State)}
STATE_OPTIONS = (ANY, *(Option(state, lifecycle.in_words(state)) for state in STATES.values()))


def add_to(pages: Blueprint) -> None:
    """Add this page."""
    pages.add_url_rule("/submissions", "submission_list", submission_list)


def submission_list() -> Response:
    """Submissions that match what stands in the address."""
    form = _checked(forms.queried())
    with visits.reading() as visit:
        found = queries.submissions(visit.session, visit.actor, _filter(form), visit.now, lists.after())
    following = lists.next_address(found.after)
    return page("submission_list.html", form=form, states=STATE_OPTIONS, found=found, following=following)


def _checked(form: Form) -> Form:
    state = form.typed("state")
    if state and state not in STATES:
        return form.with_problems([Problem("There is no such state.", "state")])
    return form


def _filter(form: Form) -> SubmissionFilter:
    state = STATES.get(form.typed("state"))
    return SubmissionFilter(
        states=frozenset({state} if state else ()),
        site=form.typed("site") or None,
        tag=form.typed("tag") or None,
    )
