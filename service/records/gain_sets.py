"""Gain sets: one for the whole loop, or several for a scheduled one, each with its operating points."""

from __future__ import annotations

from service.analysis.plant import Ranges
from service.documents.errors import FieldProblem
from service.documents.submissions import SubmissionRequest
from service.records import comparison, loops
from service.records.content import SignedGains, SignedModel


def of_request(request: SubmissionRequest) -> tuple[SignedGains, ...]:
    """Return the gain sets of a request; a bare controller is the only set, good at every operating point."""
    if request.controller is not None:
        return (SignedGains(condition=None, operating_points=(), controller=request.controller),)
    return tuple(
        SignedGains(
            condition=gain_set.condition,
            operating_points=gain_set.operating_points,
            controller=gain_set.controller,
        )
        for gain_set in request.gain_sets or ()
    )


def models_for(gain_set: SignedGains, models: tuple[SignedModel, ...]) -> tuple[SignedModel, ...]:
    """Return the models by which a set is judged."""
    if not gain_set.operating_points:
        return models
    wanted = {loops.matching_key(point) for point in gain_set.operating_points}
    return tuple(model for model in models if loops.matching_key(model.model.operating_point) in wanted)


def problems(request: SubmissionRequest, models: tuple[SignedModel, ...]) -> list[FieldProblem]:
    """Say where sets name operating points without a model, or one with a model is not named exactly once."""
    if request.gain_sets is None or not models:
        return []
    missing = {
        loops.matching_key(model.model.operating_point): model.model.operating_point for model in models
    }
    known, found = set(missing), []
    for index, gain_set in enumerate(request.gain_sets):
        for place, point in enumerate(gain_set.operating_points):
            key = loops.matching_key(point)
            if key not in known:
                detail = "there is no model in force at this operating point"
            elif missing.pop(key, None) is None:
                detail = "another set holds at this operating point"
            else:
                continue
            found.append(FieldProblem(f"/gain_sets/{index}/operating_points/{place}", detail))
    left = [
        FieldProblem("/gain_sets", f"no set holds at operating point {point}") for point in missing.values()
    ]
    return found + left


def same(one: tuple[SignedGains, ...], other: tuple[SignedGains, ...], loop_ranges: Ranges) -> bool:
    """Say whether two groups of gain sets hold the same gains, set by set."""
    return len(one) == len(other) and all(
        comparison.same_gains(a.controller, b.controller, loop_ranges)
        for a, b in zip(one, other, strict=True)
    )
