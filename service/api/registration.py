"""Every blueprint of the API."""

from __future__ import annotations

from flask import Flask

from service.api import (
    changes,
    decisions,
    health,
    history,
    installations,
    limits,
    loops,
    openapi,
    people,
    problem_pages,
    recomputations,
    reference,
    sheets,
    submissions,
)

BLUEPRINTS = (
    recomputations.blueprint,
    loops.blueprint,
    changes.blueprint,
    submissions.blueprint,
    decisions.blueprint,
    installations.blueprint,
    sheets.blueprint,
    history.blueprint,
    limits.blueprint,
    people.blueprint,
    openapi.blueprint,
    reference.blueprint,
    problem_pages.blueprint,
    health.blueprint,
)


def register(app: Flask) -> None:
    """Add the API to an application."""
    for blueprint in BLUEPRINTS:
        app.register_blueprint(blueprint)
