"""Every size past which a request is refused, by name and before any work is done with it."""

from __future__ import annotations

from dataclasses import dataclass

from flask import Blueprint

from service.analysis.controller import MAX_RECORDED_SETTINGS
from service.analysis.plant import MAX_FREQUENCY_POINTS, MAX_ORDER
from service.api import answers, idempotency, queries
from service.api.answers import Answer
from service.api.operations import Call, reads
from service.api.queries import NoQuery
from service.documents import limits
from service.records import passwords

blueprint = Blueprint("limits", __name__, url_prefix="/v1/limits")


@dataclass(frozen=True, kw_only=True)
class Limits:
    """The limits of a document as a whole, of its texts and lists, of a plant model, and of a list's page."""

    body_bytes_max: int = limits.BODY_BYTES_MAX
    depth_max: int = limits.DEPTH_MAX
    """Objects and arrays inside one another."""
    object_keys_max: int = limits.KEYS_MAX
    array_items_max: int = limits.ITEMS_MAX
    values_max: int = limits.VALUES_MAX
    """Values in the whole document."""
    number_characters_max: int = limits.NUMBER_CHARACTERS_MAX
    reason_characters_max: int = limits.REASON_CHARACTERS_MAX
    """Of a reason, an effect on safety, and evidence."""
    line_characters_max: int = limits.LINE_CHARACTERS_MAX
    tag_characters_max: int = limits.TAG_CHARACTERS_MAX
    password_characters_min: int = passwords.CHARACTERS_MIN
    password_characters_max: int = passwords.CHARACTERS_MAX
    gain_sets_max: int = limits.GAIN_SETS_MAX
    operating_points_max: int = limits.OPERATING_POINTS_MAX
    """Of one gain set."""
    prepared_by_max: int = limits.PREPARED_BY_MAX
    deviations_max: int = limits.DEVIATIONS_MAX
    areas_max: int = limits.AREAS_MAX
    """Of one account."""
    recorded_settings_max: int = MAX_RECORDED_SETTINGS
    plant_order_max: int = MAX_ORDER
    """Poles of a plant model, and zeros."""
    frequency_points_max: int = MAX_FREQUENCY_POINTS
    settling_band_percent_min: float = limits.SETTLING_BAND_PERCENT_MIN
    settling_band_percent_max: float = limits.SETTLING_BAND_PERCENT_MAX
    page_items_default: int = queries.PAGE_ITEMS_DEFAULT
    page_items_max: int = queries.PAGE_ITEMS_MAX
    idempotency_key_characters_max: int = idempotency.KEY_CHARACTERS_MAX


@blueprint.get("")
@reads(NoQuery, Limits)
def show_limits(_call: Call, _query: NoQuery) -> Answer:
    """Show every size past which a request is refused."""
    return answers.document(Limits())
