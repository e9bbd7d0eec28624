"""The first page: what awaits review, what is past its time, what is approved and not yet installed."""

from __future__ import annotations

from flask import Blueprint, Response

from service.pages import visits
from service.pages.frame import page
from service.records import change_queries, left_otherwise, queries, resets
from service.records.change_queries import ChangeFilter
from service.records.queries import SubmissionFilter
from service.sheets.as_left import told_as_left

SHOWN = 50
TO_INSTALL = SubmissionFilter(states=frozenset({"approved"}))
DUE_FOR_RECHECK = SubmissionFilter(recheck_due=True)
LEFT_OTHERWISE = SubmissionFilter(left_otherwise=True)
TO_CONFIRM = ChangeFilter(state="awaiting_confirmation")
PAST_THEIR_TIME = SubmissionFilter(past_time_and_open=True)


def add_to(pages: Blueprint) -> None:
    """Add this page."""
    pages.add_url_rule("/", "home", home)


def home() -> Response:
    """What this person's areas wait for."""
    with visits.reading() as visit:
        session, actor, now = visit.session, visit.actor, visit.now
        waiting = queries.awaiting_review(session, actor, now, limit=SHOWN)
        to_install = queries.submissions(session, actor, TO_INSTALL, now, limit=SHOWN)
        past = queries.submissions(session, actor, PAST_THEIR_TIME, now, limit=SHOWN)
        otherwise = queries.submissions(session, actor, LEFT_OTHERWISE, now, limit=SHOWN)
        left = left_otherwise.recomputed(session, (each.id for each in otherwise.items))
        due = queries.submissions(session, actor, DUE_FOR_RECHECK, now, limit=SHOWN)
        proposed = change_queries.changes(session, actor, TO_CONFIRM, limit=SHOWN)
        reset = resets.awaiting(session, actor) if "administrator" in actor.roles else ()
    return page(
        "home.html",
        actor=actor,
        waiting=waiting,
        to_install=to_install,
        past=past,
        otherwise=otherwise,
        as_left={submission_id: told_as_left(each) for submission_id, each in left.items()},
        due=due,
        proposed=proposed,
        reset=reset,
    )
