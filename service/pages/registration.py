"""The pages as one blueprint, and the words and typeface that their templates use."""

from __future__ import annotations

from flask import Blueprint, Flask, Response, send_from_directory
from jinja2 import StrictUndefined

from service.figures import fonts
from service.pages import (
    decisions,
    history,
    home,
    installations,
    loop_changes,
    loop_proposals,
    loops,
    paper,
    password,
    resets,
    sign_in,
    submission_list,
    submissions,
    visits,
    words,
)

TYPEFACE_KEPT_S = 30 * 24 * 3600
"""How long a browser keeps the typeface of the figures; it is large and never changes."""

SUBJECTS = (
    sign_in,
    home,
    loops,
    loop_changes,
    loop_proposals,
    submission_list,
    submissions,
    decisions,
    installations,
    paper,
    history,
    password,
    resets,
)


def register(app: Flask) -> None:
    """Add every page to the application."""
    pages = Blueprint(
        "pages", __name__, static_folder="static", static_url_path="/static", template_folder="templates"
    )
    pages.before_request(visits.admit)
    pages.add_url_rule("/static/fonts/<name>", "typeface", _typeface)
    for subject in SUBJECTS:
        subject.add_to(pages)
    app.register_blueprint(pages)
    # a name that a template misspells is a fault that shows, not an empty place on the page
    app.jinja_env.undefined = StrictUndefined
    app.jinja_env.filters.update(words.FILTERS)


def _typeface(name: str) -> Response:
    return send_from_directory(fonts.FOLDER, name, max_age=TYPEFACE_KEPT_S)
