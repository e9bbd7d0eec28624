"""A change of what approvals of a loop rest on, filled in and proposed; another person confirms it."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass, fields

from flask import Blueprint, redirect, request, url_for
from werkzeug.wrappers import Response as AnyResponse

from service.documents import reading, writing
from service.documents.changes import LoopChangeRequest
from service.documents.errors import FieldProblem, InvalidDocument
from service.documents.loops import LoopRegistration
from service.documents.strict_json import Plain
from service.judgement.criteria import SERVICE_FLOORS, Criteria, quantity_name
from service.judgement.digits import as_entered
from service.judgement.wording import quantity_label, quantity_unit
from service.pages import forms, visits
from service.pages.controller_fields import NOT_A_NUMBER, NUMBER, LineField
from service.pages.forms import Form, Problem
from service.pages.frame import page
from service.pages.options import Option
from service.pages.visits import Visit
from service.records import changes as records
from service.records import loops
from service.records.errors import FieldErrors, StaleContent
from service.records.views import LoopView

RANGES = {"pv": "PV range", "output": "Output range"}
SAFETY = (
    Option("yes", "Yes", "Two people approve each change of its gains."),
    Option("no", "No", "One person approves."),
)
FIRST_LIMITS = frozenset(
    {field.name for field in fields(Criteria) if getattr(SERVICE_FLOORS, field.name) is not None}
    | {"delay_margin_s_min", "overshoot_percent_max", "settling_time_s_max", "worst_case_max_sensitivity_max"}
)
"""Limits that stand open on the form; the others unfold."""

HAS_CHANGED = Problem(
    "The loop has changed since you opened this page. What you typed is kept: hold it against the loop as it "
    "is now, and propose it again."
)
NO_POINT = "Choose the operating point that is to be retired."


@dataclass(frozen=True, slots=True)
class ProposalPage:
    """What the forms show of a loop as it is."""

    view: LoopView
    operating_points: tuple[Option, ...]


def add_to(pages: Blueprint) -> None:
    """Add these pages."""
    one = "/loops/<loop_id>"
    pages.add_url_rule(f"{one}/propose", "propose_change", propose_change, methods=["GET", "POST"])
    pages.add_url_rule(f"{one}/retire", "propose_retirement", propose_retirement, methods=["GET", "POST"])


def propose_change(loop_id: str) -> AnyResponse:
    """Ask for ranges, fail position, cascade, safety mark and limits as they are to be; propose them."""
    shown = _read(loop_id)
    if request.method == "GET":
        return _change_page(shown, Form(_texts(shown.view.loop)))
    return _propose(shown, lambda form: {"loop": _loop(shown.view.loop, form)}, _change_page)


def propose_retirement(loop_id: str) -> AnyResponse:
    """Ask which operating point is to be retired, and propose that."""
    shown = _read(loop_id)
    if request.method == "GET":
        return _retirement_page(shown, Form())
    return _propose(shown, _point, _retirement_page)


def _read(loop_id: str) -> ProposalPage:
    """Read the loop for whoever may propose a change of it. Raises NotFound, NotAllowed."""
    with visits.reading() as visit:
        view = loops.find(visit.session, visit.actor, loop_id)
        loops.check_may_change(visit.actor)
        return ProposalPage(view, _operating_points(visit, loop_id))


def _operating_points(visit: Visit, loop_id: str) -> tuple[Option, ...]:
    found = loops.models(visit.session, visit.actor, loop_id)
    return tuple(
        Option(each.operating_point, each.operating_point, f"Model version {each.version}.")
        for each in reversed(found)
        if each.in_force
    )


def _propose(
    shown: ProposalPage,
    what: Callable[[Form], dict[str, Plain]],
    again: Callable[[ProposalPage, Form, int], AnyResponse],
) -> AnyResponse:
    """Propose what stands in the form that came; `again` shows it with what is wrong with it."""
    form, loop_id = forms.posted(), shown.view.id
    try:
        asked = _request(form, what(form))
        with visits.writing() as visit:
            made = records.propose(visit.session, visit.actor, loop_id, asked, visit.now)
    except (InvalidDocument, FieldErrors) as refusal:
        return again(shown, form.with_problems(map(_problem, refusal.errors)), 422)
    except StaleContent:
        return again(_read(loop_id), form.with_problems([HAS_CHANGED]), 412)
    return redirect(url_for("pages.change", change_id=made.id), 303)


def _point(form: Form) -> dict[str, Plain]:
    point = form.typed("retire_operating_point")
    if not point:
        raise InvalidDocument((FieldProblem("/retire_operating_point", NO_POINT),))
    return {"retire_operating_point": point}


def _change_page(shown: ProposalPage, form: Form, status: int = 200) -> AnyResponse:
    first = tuple(_limit_fields(True))
    more = tuple(_limit_fields(False))
    unfolded = any(form.typed(each.name) or form.problem(each.name) for each in more)
    return page(
        "propose_change.html",
        status,
        view=shown.view,
        retirable=bool(shown.operating_points),
        form=form,
        ranges=RANGES,
        safety=SAFETY,
        first_limits=first,
        more_limits=more,
        unfolded=unfolded,
    )


def _retirement_page(shown: ProposalPage, form: Form, status: int = 200) -> AnyResponse:
    return page("propose_retirement.html", status, view=shown.view, points=shown.operating_points, form=form)


def _limit_fields(first: bool) -> Iterator[LineField]:
    for field in fields(Criteria):
        if (field.name in FIRST_LIMITS) == first:
            name = quantity_name(field.name)
            bound = "at least" if field.name.endswith("_min") else "at most"
            unit = quantity_unit(name).replace("°", "degrees")
            label = f"{quantity_label(name)} {bound}{f', {unit}' if unit else ''}"
            yield LineField(field.name, f"{label[0].upper()}{label[1:]}", "")


def _texts(loop: LoopRegistration) -> dict[str, str]:
    """The loop as it is, in the fields of the form."""
    texts = {"safety_related": "yes" if loop.safety_related else "no"}
    texts["fail_position"] = loop.fail_position or ""
    for name in RANGES:
        span = getattr(loop, name)
        texts |= {f"{name}-low": as_entered(span.low), f"{name}-high": as_entered(span.high)}
        texts[f"{name}-unit"] = span.unit
    if loop.inner_loop is not None:
        texts |= {"inner_loop-site": loop.inner_loop.site, "inner_loop-tag": loop.inner_loop.tag}
    for field in fields(Criteria):
        limit = getattr(loop.criteria, field.name, None)
        texts[field.name] = "" if limit is None else as_entered(limit)
    return texts


def _loop(before: LoopRegistration, form: Form) -> Plain:
    """The loop as the form has it; what it has no field for stays. Raises InvalidDocument."""
    reader = _Reader(form)
    plain = writing.plain(before)
    assert isinstance(plain, dict)  # noqa: S101  a dataclass becomes an object
    for name in RANGES:
        low, high = reader.number(f"{name}-low"), reader.number(f"{name}-high")
        plain[name] = {"low": low, "high": high, "unit": form.typed(f"{name}-unit")}
    inner: dict[str, Plain] = {
        part: form.typed(f"inner_loop-{part}") for part in ("site", "tag") if form.typed(f"inner_loop-{part}")
    }
    limits = {field.name: reader.limit(field.name) for field in fields(Criteria)}
    given: dict[str, Plain] = {name: limit for name, limit in limits.items() if limit is not None}
    plain |= {
        "fail_position": form.typed("fail_position") or None,
        "inner_loop": inner or None,
        "safety_related": {"yes": True, "no": False}.get(form.typed("safety_related")),
        # an empty set of limits is none: it stays as it was written
        "criteria": given or (plain["criteria"] if before.own_criteria is None else None),
    }
    if reader.problems:
        raise InvalidDocument(tuple(reader.problems))
    return plain


def _request(form: Form, what: dict[str, Plain]) -> LoopChangeRequest:
    """Read the request. Raises InvalidDocument for all that is wrong with it."""
    revision = form.typed("revision")
    known: dict[str, Plain] = {"revision": int(revision) if revision.isdecimal() else 0}
    if form.typed("reason"):
        known["reason"] = form.typed("reason")
    return reading.read(LoopChangeRequest, known | what)


class _Reader:
    """Reads numbers and gathers which texts are none."""

    def __init__(self, form: Form) -> None:
        self.form = form
        self.problems: list[FieldProblem] = []

    def number(self, name: str) -> float | None:
        number = self.limit(name)
        if number is None and not self.form.typed(name):
            self._refuse(name)
        return number

    def limit(self, name: str) -> float | None:
        """A number, None where nothing was typed."""
        text = self.form.typed(name)
        if not text:
            return None
        number = float(text) if NUMBER.fullmatch(text) else math.nan
        if not math.isfinite(number):
            self._refuse(name)
            return None
        return number

    def _refuse(self, name: str) -> None:
        self.problems.append(FieldProblem(f"/loop/{name.replace('-', '/')}", NOT_A_NUMBER))


def _problem(error: FieldProblem) -> Problem:
    if error.pointer == "/reason" and "missing" in error.detail:
        return Problem("Give the reason: the second person reads it.", "reason")
    field = _field(error.pointer)
    return Problem(f"{_label(field)}{forms.sentence(error.detail)}", field)


def _field(pointer: str) -> str:
    """The field that a place in the request stands in; of a part of the loop without one, its first."""
    steps = pointer.removeprefix("/loop").strip("/").split("/")
    if steps[0] == "criteria":
        return steps[-1] if len(steps) > 1 else ""
    firsts = {"pv": "pv-low", "output": "output-low", "inner_loop": "inner_loop-tag"}
    if len(steps) == 1:
        return firsts.get(steps[0], steps[0])
    return "-".join(steps)


def _label(field: str) -> str:
    """Which of several like fields a problem is about: "PV range, low: "."""
    part, _, name = field.partition("-")
    if part in RANGES:
        return f"{RANGES[part]}, {name}: "
    return f"{quantity_label(quantity_name(field)).capitalize()}: " if _is_limit(field) else ""


def _is_limit(field: str) -> bool:
    return field in {limit.name for limit in fields(Criteria)}
