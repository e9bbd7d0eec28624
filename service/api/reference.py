"""The API description as a page for people: without a script, and without a request off the machine."""

from __future__ import annotations

import json
from typing import Any

from flask import Blueprint, current_app, render_template
from markupsafe import Markup

from service.api import openapi

blueprint = Blueprint("reference", __name__, template_folder="templates")

Json = dict[str, Any]


@blueprint.get("/reference")
def show_reference() -> str:
    """Show every call, with what it takes and gives. Open to all, as the description itself is."""
    described = openapi.description(current_app)
    return render_template(
        "api_reference.html", description=described, shape=shape, pretty=pretty, marked=marked
    )


def pretty(example: object) -> str:
    """Return an example as JSON that is laid out to be read."""
    return json.dumps(example, indent=2, ensure_ascii=False)


def marked(text: str) -> Markup:
    """Return a description with the names that stand in backticks set as code."""
    parts = enumerate(text.split("`"))
    return Markup().join(
        Markup("<code>{}</code>").format(part) if index % 2 else part for index, part in parts
    )


def shape(schema: Json) -> Markup:
    """Say in a few words what values a schema lets through, with links to the documents it names."""
    if "$ref" in schema:
        name = schema["$ref"].rsplit("/", 1)[-1]
        return Markup('<a href="#schema-{0}">{0}</a>').format(name)
    if "allOf" in schema:
        # a controller in a record: what it is, and that it is complete
        return shape(schema["allOf"][0])
    alternatives = schema.get("anyOf") or schema.get("oneOf")
    if alternatives:
        return Markup(" or ").join(shape(part) for part in alternatives)
    if "enum" in schema or "const" in schema:
        values = schema.get("enum", [schema.get("const")])
        return Markup(" or ").join(Markup("<code>{}</code>").format(value) for value in values)
    if schema.get("type") == "array":
        return Markup("list of {}").format(_items(schema))
    if schema.get("type") == "object" and "properties" in schema:
        parts = (Markup("<code>{}</code>: {}").format(k, shape(v)) for k, v in schema["properties"].items())
        return Markup("object with ") + Markup(", ").join(parts)
    return Markup("{}{}").format(schema.get("type", "any value"), _bounds(schema))


def _items(schema: Json) -> Markup:
    if "prefixItems" in schema:
        return Markup(", ").join(shape(part) for part in schema["prefixItems"])
    return shape(schema.get("items", {}))


def _bounds(schema: Json) -> str:
    words = {
        "minimum": "at least {}",
        "exclusiveMinimum": "above {}",
        "maximum": "at most {}",
        "exclusiveMaximum": "below {}",
        "minLength": "{} characters or more",
        "maxLength": "{} characters or fewer",
        "format": "{}",
    }
    found = [text.format(schema[name]) for name, text in words.items() if name in schema]
    return f" ({', '.join(found)})" if found else ""
