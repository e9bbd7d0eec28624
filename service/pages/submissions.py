"""One submission, in the order in which it is to be trusted; the form of the decision stands at its end."""

from __future__ import annotations

from flask import Blueprint, Response

from service.pages import visits
from service.pages.dossier import dossier
from service.pages.forms import Form
from service.pages.frame import page


def add_to(pages: Blueprint) -> None:
    """Add this page."""
    pages.add_url_rule("/submissions/<submission_id>", "submission", submission)


def submission(submission_id: str) -> Response:
    """The submission with an empty form."""
    return submission_page(submission_id, Form())


def submission_page(submission_id: str, form: Form, status: int = 200) -> Response:
    """The submission with what was typed and what is wrong with it."""
    with visits.reading() as visit:
        shown = dossier(visit, submission_id, with_figures=True)
    return page("submission.html", status, dossier=shown, view=shown.view, form=form)
