"""The sheet for the panel."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from flask import Blueprint

blueprint = Blueprint("sheets", __name__, url_prefix="/v1/submissions/<submission_id>/sheet.pdf")


@dataclass(frozen=True, kw_only=True)
class SheetQuery:
    """Which sheet: in its present state, or the bytes that were stored at the decision."""

    as_signed: Literal["true", "false"] = "false"
