"""The sheet of a submission as PDF, for whoever is signed in to the pages."""

from __future__ import annotations

from flask import Blueprint, Response, request

from service.issuing import sheets
from service.pages import visits
from service.records import kept_sheets


def add_to(pages: Blueprint) -> None:
    """Add this page."""
    pages.add_url_rule("/submissions/<submission_id>/sheet.pdf", "sheet", sheet)


def sheet(submission_id: str) -> Response:
    """The sheet in its present state, or as it was made at the latest decision."""
    as_signed = request.args.get("as_signed") == "true"
    with visits.reading() as visit:
        if as_signed:
            pdf = kept_sheets.latest(visit.session, visit.actor, submission_id)
        else:
            pdf = sheets.sheet(visit.session, visit.actor, submission_id, visit.now)
    name = f"gains-{submission_id}{'-as-signed' if as_signed else ''}.pdf"
    response = Response(pdf, mimetype="application/pdf")
    response.headers["Content-Disposition"] = f'inline; filename="{name}"'
    response.headers["Cache-Control"] = "no-store"
    return response
