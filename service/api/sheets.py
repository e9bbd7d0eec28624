"""The sheet for the panel."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from flask import Blueprint

from service.api.answers import Answer
from service.api.operations import Call, reads
from service.issuing import sheets

blueprint = Blueprint("sheets", __name__, url_prefix="/v1/submissions/<submission_id>/sheet.pdf")


@dataclass(frozen=True, kw_only=True)
class SheetQuery:
    """Which sheet: in its present state, or the bytes that were stored at the decision."""

    as_signed: Literal["true", "false"] = "false"


@blueprint.get("")
@reads(SheetQuery, None, media_types=("application/pdf",))
def show_sheet(call: Call, query: SheetQuery, submission_id: str) -> Answer:
    """Give the sheet for the panel as PDF."""
    pdf = sheets.sheet(call.session, call.actor, submission_id, call.now)
    return Answer(body=pdf, media_type="application/pdf", file_name=f"gains-{submission_id}.pdf")
