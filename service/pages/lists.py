"""Long lists, a part at a time: the address of the next part, which nobody can make up."""

from __future__ import annotations

from urllib.parse import urlencode

from flask import request
from itsdangerous import BadSignature, URLSafeSerializer
from werkzeug.exceptions import BadRequest

from service.context import services

PARAMETER = "after"


def after() -> str | None:
    """Where the part of the list that was asked for begins. Raises BadRequest for one that was made up."""
    sealed = request.args.get(PARAMETER)
    if sealed is None:
        return None
    try:
        key: str = _seal().loads(sealed)
    except BadSignature as error:
        raise BadRequest from error
    return key


def next_address(key: str | None) -> str:
    """The address of the next part of the same list, empty at its end."""
    if key is None:
        return ""
    kept = {name: text for name, text in request.args.items() if name != PARAMETER and text}
    kept[PARAMETER] = str(_seal().dumps(key))
    return f"{request.path}?{urlencode(kept)}"


def _seal() -> URLSafeSerializer:
    return URLSafeSerializer(services().secret_key, salt=f"list {request.endpoint}")
