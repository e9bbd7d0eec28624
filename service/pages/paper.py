"""The sheet of a submission as PDF, for whoever is signed in to the pages."""

from __future__ import annotations

from flask import Blueprint, Response

from service.pages import visits
from service.pages.dossier import sheet_of
from service.records import queries
from service.sheets.layout import sheet_pdf


def add_to(pages: Blueprint) -> None:
    """Add this page."""
    pages.add_url_rule("/submissions/<submission_id>/sheet.pdf", "sheet", sheet)


def sheet(submission_id: str) -> Response:
    """The sheet in its present state."""
    with visits.reading() as visit:
        view = queries.submission(visit.session, visit.actor, submission_id, visit.now)
        content = sheet_of(visit, view)
    response = Response(sheet_pdf(content), mimetype="application/pdf")
    response.headers["Content-Disposition"] = f'inline; filename="gains-{view.id}.pdf"'
    response.headers["Cache-Control"] = "no-store"
    return response
