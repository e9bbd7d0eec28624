"""The sheet for the panel."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from flask import Blueprint

from service.api.answers import Answer
from service.api.operations import Call, reads
from service.issuing import sheets
from service.records import kept_sheets

blueprint = Blueprint("sheets", __name__, url_prefix="/v1/submissions/<submission_id>/sheet.pdf")


@dataclass(frozen=True, kw_only=True)
class SheetQuery:
    """Which sheet: in its present state, or the bytes that were stored at the decision."""

    as_signed: Literal["true", "false"] = "false"


@blueprint.get("")
@reads(SheetQuery, None, media_types=("application/pdf",))
def show_sheet(call: Call, query: SheetQuery, submission_id: str) -> Answer:
    """Give the sheet for the panel as PDF, in its present state or as it was signed."""
    if query.as_signed == "true":
        return _pdf(kept_sheets.latest(call.session, call.actor, submission_id), f"{submission_id}-as-signed")
    return _pdf(sheets.sheet(call.session, call.actor, submission_id, call.now), submission_id)


def _pdf(content: bytes, name: str) -> Answer:
    return Answer(body=content, media_type="application/pdf", file_name=f"gains-{name}.pdf")
