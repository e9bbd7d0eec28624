"""Opaque marks of a place in a list.

They are signed, and hold for the list and the filters they were made for.
"""

from __future__ import annotations

from itsdangerous import BadData, URLSafeSerializer

from service.api.refusals import BadQuery


def make(secret_key: str, list_name: str, place: str) -> str:
    """Return the cursor that continues the list called `list_name` after `place`."""
    return str(_serialiser(secret_key, list_name).dumps(place))


def read(secret_key: str, list_name: str, cursor: str) -> str:
    """Return the place that a cursor names.

    Raises BadQuery where this service did not make it for this list.
    """
    try:
        place = _serialiser(secret_key, list_name).loads(cursor)
    except BadData:
        raise BadQuery.of(
            "cursor", "this cursor was not made by this service for this list with these filters"
        ) from None
    if not isinstance(place, str):
        raise BadQuery.of("cursor", "this cursor names no place in a list")
    return place


def _serialiser(secret_key: str, list_name: str) -> URLSafeSerializer:
    # the salt binds a cursor to one list with its filters: moved to another list its signature no longer
    # holds
    return URLSafeSerializer(secret_key, salt=f"cursor of {list_name}")
