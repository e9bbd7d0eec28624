"""Recording what was found and left at the controller, typed from its display."""

from __future__ import annotations

import re
from datetime import UTC, datetime

from flask import Blueprint, Response, redirect, request, url_for
from werkzeug.exceptions import NotFound as NoSuchPage
from werkzeug.wrappers import Response as AnyResponse

from service.analysis.controller import Controller
from service.documents import reading
from service.documents.errors import FieldProblem, InvalidDocument
from service.documents.installations import InstallationRequest
from service.documents.strict_json import Plain
from service.pages import controller_fields, forms, visits
from service.pages.changes import installed_otherwise
from service.pages.controller_fields import ACTION_OPTIONS, FORM_OPTIONS, SCAN_OPTIONS
from service.pages.forms import Form, Problem
from service.pages.frame import page
from service.pages.options import Option
from service.records import installations as records
from service.records import queries
from service.records.errors import BasisChanged, FieldErrors
from service.records.views import SubmissionView
from service.sheets import as_left

PREFIXES = {"as_found": "found", "as_left": "left"}
SIDES = {"found": "As found", "left": "As left"}
PEOPLE = ("typed_by", "read_back_by", "operator")
SAVED = {"yes": True, "no": False}
SAVED_OPTIONS = (Option("yes", "Yes"), Option("no", "No"), Option("unknown", "Not known"))
_TIME = re.compile(r"\d{4}-\d\d-\d\d[T ]\d\d:\d\d(:\d\d)?")


def add_to(pages: Blueprint) -> None:
    """Add these pages."""
    one = "/submissions/<submission_id>/installation"
    pages.add_url_rule(one, "installation", installation, methods=["GET", "POST"])
    pages.add_url_rule(f"{one}s/<installation_id>", "installed", installed)


def installation(submission_id: str) -> AnyResponse:
    """Ask for the gains as found and as left, and record them."""
    with visits.reading() as visit:
        records.check_may_install(visit.session, visit.actor, submission_id)
        view = queries.submission(visit.session, visit.actor, submission_id, visit.now)
    if request.method == "GET":
        return _form_page(view, Form(_first_texts(view, visit.now)))
    form = forms.posted()
    try:
        document = _document(view, form)
        with visits.reading() as visit:
            prepared = records.prepare(visit.session, visit.actor, submission_id, document, visit.now)
        with visits.writing() as visit:
            made = records.install(visit.session, visit.actor, prepared, visit.now)
    except (InvalidDocument, FieldErrors) as refusal:
        return _form_page(view, form.with_problems(_problems(form, refusal.errors)), 422)
    except BasisChanged as refusal:
        return _form_page(view, form.with_problems((Problem(forms.sentence(refusal.detail)),)), 409)
    address = url_for(
        "pages.installed",
        submission_id=submission_id,
        installation_id=made.installation.installation_id,
    )
    return redirect(address, 303)


def installed(submission_id: str, installation_id: str) -> Response:
    """What was recorded, and whether it is what was approved."""
    with visits.reading() as visit:
        view = queries.submission(visit.session, visit.actor, submission_id, visit.now)
    made = [each for each in view.installations if each.installation.installation_id == installation_id]
    if not made:
        raise NoSuchPage
    done = made[0].installation
    differences = installed_otherwise(view.content, done)
    left = done.as_left_recomputed
    return page(
        "installed.html",
        view=view,
        made=done,
        differences=differences,
        told=None if done.as_approved else as_left.told_as_left(left),
        assessments=as_left.assessments(left) if left else (),
        entry=made[0].entry,
    )


def _form_page(view: SubmissionView, form: Form, status: int = 200) -> Response:
    models = _models(view)
    return page(
        "installation.html",
        status,
        view=view,
        form=form,
        found=controller_fields.fields_of("found", models["as_found"], show_values=False),
        left=controller_fields.fields_of("left", models["as_left"], show_values=True),
        form_options=FORM_OPTIONS,
        action_options=ACTION_OPTIONS,
        scan_options=SCAN_OPTIONS,
        saved_options=SAVED_OPTIONS,
        gain_set=_gain_set(view),
    )


def _gain_set(view: SubmissionView) -> int:
    """Which set of scheduled gains the form is for; it stands in the address."""
    asked = request.args.get("set", "0")
    index = int(asked) if asked.isdecimal() and len(asked) < 4 else 0
    return index if index < len(view.content.gain_sets) else 0


def _models(view: SubmissionView) -> dict[str, Controller]:
    """What the fields are modelled on: the approved gains, and those that they take the place of."""
    index = _gain_set(view)
    approved = view.content.gain_sets[index].controller
    before = view.content.gains_in_force
    earlier = before.gain_sets[min(index, len(before.gain_sets) - 1)].controller if before else approved
    return {"as_found": earlier, "as_left": approved}


def _first_texts(view: SubmissionView, now: datetime) -> dict[str, str]:
    texts = {"installed_at": f"{now.astimezone(UTC):%Y-%m-%dT%H:%M}"}
    for name, model in _models(view).items():
        texts |= controller_fields.first_texts(PREFIXES[name], model)
    return texts


def _document(view: SubmissionView, form: Form) -> InstallationRequest:
    """The installation that stands in the form. Raises InvalidDocument for all that is wrong with it."""
    models = _models(view)
    wrong: list[Problem] = []
    plain: dict[str, Plain] = {
        "installed_at": _moment(form.typed("installed_at")),
        "saved_to_engineering_database": SAVED.get(form.typed("saved_to_engineering_database")),
        **{name: form.typed(name) or None for name in PEOPLE},
    }
    for name, prefix in PREFIXES.items():
        plain[name], problems = controller_fields.plain_of(form, prefix, models[name])
        wrong.extend(problems)
    condition = view.content.gain_sets[_gain_set(view)].condition
    if wrong:
        raise InvalidDocument(tuple(FieldProblem(f"#{problem.field}", problem.sentence) for problem in wrong))
    if condition is None:
        return reading.read(InstallationRequest, plain)
    # the form is for the one set that its address names
    named: dict[str, Plain] = {name: plain.pop(name) for name in PREFIXES}
    named["condition"] = condition
    return reading.read(InstallationRequest, plain | {"gain_sets": [named]})


def _moment(text: str) -> str:
    """A time as the browser's field writes it, in RFC 3339; what is no such time is refused in reading."""
    if not _TIME.fullmatch(text):
        return text
    return f"{text.replace(' ', 'T')}{':00' if len(text) == 16 else ''}Z"


def _problems(form: Form, errors: tuple[FieldProblem, ...]) -> tuple[Problem, ...]:
    """What is wrong, each with the name of its field: there are two of most of them."""
    return tuple(
        Problem(f"{_label(field)}{forms.sentence(error.detail)}", field)
        for error in errors
        for field in [_field(form, error.pointer)]
    )


def _label(field: str) -> str:
    """ "left-derivative_filter-value" is "As left, derivative filter: "."""
    side, _, name = field.partition("-")
    if side not in SIDES:
        return ""
    return f"{SIDES[side]}, {name.removesuffix('-value').replace('-', ' ').replace('_', ' ')}: "


def _field(form: Form, pointer: str) -> str:
    """The field that a place in the document stands in: itself, or the first one below it."""
    if pointer.startswith("#"):
        return pointer[1:]
    first, *steps = pointer.removeprefix("/gain_sets/0").split("/")[1:] or [""]
    name = "-".join([PREFIXES.get(first, first), *steps])
    if steps[-1:] == ["action"] or name in form.texts:
        return name
    return next((field for field in form.texts if field.startswith(f"{name}-")), "")
