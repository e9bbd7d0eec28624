"""The application, put together from its parts. Nothing is decided here."""

from __future__ import annotations

from argon2 import PasswordHasher
from flask import Flask, Response, request
from werkzeug.routing import BaseConverter

from service import request_log
from service.api import errors as api_errors
from service.api.registration import register as register_api
from service.context import Services, attach, request_id
from service.documents.limits import BODY_BYTES_MAX
from service.issuing import signing_keys
from service.issuing.checkpoints import read_key
from service.pages import errors as pages_errors
from service.pages.registration import register as register_pages
from service.records.database import Clock, Database, system_clock
from service.settings import Settings

FOR_MACHINES = ("/v1/", "/livez", "/readyz")
"""Paths at which a failure is answered with a problem; elsewhere people read a page."""

SECURITY_HEADERS = {
    "Content-Security-Policy": (
        "default-src 'none'; style-src 'self'; font-src 'self'; img-src 'self'; "
        "frame-ancestors 'none'; base-uri 'none'; form-action 'none'"
    ),
    "Cross-Origin-Opener-Policy": "same-origin",
    "Cross-Origin-Resource-Policy": "same-origin",
    "Referrer-Policy": "no-referrer",
    "X-Content-Type-Options": "nosniff",
    "X-Frame-Options": "DENY",
}
"""Sent with every response that does not set its own."""


class _Readable(BaseConverter):
    """A variable part of an address, without control characters: PostgreSQL fails on one of them."""

    regex = r"[^/\x00-\x1f\x7f]+"


def create_app(
    settings: Settings, *, clock: Clock = system_clock, password_hasher: PasswordHasher | None = None
) -> Flask:
    """Return the WSGI application of the store that the settings name.

    Another clock than the system's runs in a demonstration's store only. Raises SettingsError, UnusableKey
    or StoreNotUsable.
    """
    secret_key = settings.required_secret_key()
    signing_key = read_key(settings.signing_key_file) if settings.signing_key_file else None
    database = Database.open(settings.database_url, clock=clock, password_hasher=password_hasher)
    if signing_key is not None:
        signing_keys.take_up(database, signing_key)
    app = Flask(__name__, static_folder=None)
    app.config.update(
        SECRET_KEY=secret_key, MAX_CONTENT_LENGTH=BODY_BYTES_MAX, PROVIDE_AUTOMATIC_OPTIONS=False
    )
    app.url_map.converters["default"] = _Readable
    # else //path is answered with a redirect to wherever the Host header says
    app.url_map.merge_slashes = False
    attach(app, Services(database=database, secret_key=secret_key, signing_key=signing_key))
    register_api(app)
    register_pages(app)
    app.register_error_handler(Exception, _answer_failure)
    app.after_request(_add_headers)
    request_log.attach(app)
    return app


def _answer_failure(error: Exception) -> Response:
    for_machines = request.path.startswith(FOR_MACHINES)
    return api_errors.answer(error) if for_machines else pages_errors.answer(error)


def _add_headers(response: Response) -> Response:
    response.headers["X-Request-Id"] = request_id()
    for name, value in SECURITY_HEADERS.items():
        response.headers.setdefault(name, value)
    return response
