"""What a record asks of a controller beyond its being one: nothing is left to a default.

A default that nobody wrote is a setting that nobody checked. null says that there is none, "unknown" that
nobody knows. This is about the text as it was sent, so it is read from the plain objects.
"""

from __future__ import annotations

from collections.abc import Iterator

from service.documents.errors import FieldProblem, pointer
from service.documents.strict_json import Plain

_SURROUNDINGS = ("derivative_filter", "measurement_filter_s", "setpoint_weight", "scan")
TIME_TERMS = ("form", "action", "proportional", "integral", "derivative", *_SURROUNDINGS)
TWO_ZEROS = ("form", "action", "gain", "zeros_rad_s", *_SURROUNDINGS)
"""Names that a controller in a record has, three terms or a gain with zeros."""


def demanded(controller: dict[str, Plain]) -> tuple[str, ...]:
    """Names that this controller has to have in a record, by its form."""
    return TWO_ZEROS if controller.get("form") == "two_zeros" else TIME_TERMS


def missing_names(controller: Plain, at: tuple[str | int, ...]) -> Iterator[FieldProblem]:
    """Name what a controller in a record lacks; what is no object at all is left to the reader."""
    if isinstance(controller, dict):
        for name in demanded(controller):
            if name not in controller:
                detail = "a record asks for this; null says that there is none"
                yield FieldProblem(pointer((*at, name)), detail)


def missing_in(document: Plain, names: tuple[str, ...]) -> Iterator[FieldProblem]:
    """Name what the controllers at `names`, and those of `gain_sets`, lack."""
    if not isinstance(document, dict):
        return
    for name in names:
        yield from missing_names(document.get(name), (name,))
    sets = document.get("gain_sets")
    for index, gain_set in enumerate(sets if isinstance(sets, list) else []):
        if isinstance(gain_set, dict):
            for name in names:
                yield from missing_names(gain_set.get(name), ("gain_sets", index, name))
