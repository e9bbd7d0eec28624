"""The history: every entry that lies within what the person sees, by loop, time, actor and kind."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from typing import get_args

from flask import Blueprint, Response

from service.pages import forms, lists, visits, words
from service.pages.forms import Form, Problem
from service.pages.frame import page
from service.pages.options import ANY, Option
from service.records import history_queries as queries
from service.records.event_kinds import EventKind
from service.records.history_queries import HistoryFilter

SHOWN = 100
TEXTS = ("site", "tag", "area", "actor")
KINDS: dict[str, EventKind] = {kind: kind for kind in get_args(EventKind)}
KIND_OPTIONS = (ANY, *(Option(kind, words.event_kind(kind)) for kind in KINDS))
DAYS = {"since": timedelta(0), "until": timedelta(days=1)}
"""Fields that name a day, and where in time its end of the period lies after that day's midnight."""


def add_to(pages: Blueprint) -> None:
    """Add these pages."""
    pages.add_url_rule("/history", "history", history)
    pages.add_url_rule("/history/<int:number>", "entry", entry)


def history() -> Response:
    """Entries that match what stands in the address, latest first: that is what people come for."""
    form = _checked(forms.queried())
    with visits.reading() as visit:
        wanted, after = _filter(form), lists.after()
        found = queries.history(visit.session, visit.actor, wanted, after, SHOWN, latest_first=True)
    following = lists.next_address(found.after)
    return page("history.html", form=form, kinds=KIND_OPTIONS, found=found, following=following)


def entry(number: int) -> Response:
    """One entry with its exact bytes."""
    with visits.reading() as visit:
        found = queries.entry(visit.session, visit.actor, number)
    return page("entry.html", entry=found, canonical=found.canonical.decode())


def _checked(form: Form) -> Form:
    wrong = [
        Problem("Write a day as year, month and day: 2026-03-31.", name)
        for name in DAYS
        if form.typed(name) and _midnight(form.typed(name)) is None
    ]
    if form.typed("kind") and form.typed("kind") not in KINDS:
        wrong.append(Problem("There is no such kind of entry.", "kind"))
    return form.with_problems(wrong)


def _filter(form: Form) -> HistoryFilter:
    texts = {name: form.typed(name) or None for name in TEXTS}
    times = {name: _time(form, name) for name in DAYS}
    kind = KINDS.get(form.typed("kind"))
    return HistoryFilter(**texts, **times, kind=kind)  # type: ignore[arg-type]  # the two kinds of field, by name


def _time(form: Form, name: str) -> datetime | None:
    midnight = _midnight(form.typed(name))
    return midnight + DAYS[name] if midnight else None


def _midnight(day: str) -> datetime | None:
    try:
        return datetime.strptime(day, "%Y-%m-%d").replace(tzinfo=UTC)
    except ValueError:
        return None
