"""The loop with gains that were left otherwise than approved, recomputed as a submission is.

What is said of it was computed, and nobody has approved it.
"""

from __future__ import annotations

from collections.abc import Iterable

from service.analysis.controller import Controller
from service.analysis.errors import FieldError
from service.documents.loops import LoopRegistration
from service.records import approvability, gain_sets, recomputing
from service.records.content import (
    ModelReference,
    NotRecomputed,
    RecomputationOfSubmission,
    RecomputedAsLeft,
    SetLeft,
    SetLeftOtherwise,
    SignedContent,
    SignedGains,
    SignedModel,
    SignedRecomputation,
    VerdictAsLeft,
)
from service.records.views import LoopView

_VERDICTS: tuple[VerdictAsLeft, ...] = ("unstable", "undecided", "not_assessed", "stable")
"""From the worst to the best."""


def sets_otherwise(
    content: SignedContent, looked_at: Iterable[tuple[SetLeft, Controller]]
) -> tuple[SetLeftOtherwise, ...]:
    """Return every set that was otherwise than approved at the last look; `looked_at` in order of time."""
    last = {left.gain_set: (left, controller) for left, controller in looked_at}
    return tuple(
        SetLeftOtherwise(
            gain_set=index,
            condition=content.gain_sets[index].condition,
            operating_points=content.gain_sets[index].operating_points,
            controller=controller,
        )
        for index, (left, controller) in sorted(last.items())
        if not left.as_approved
    )


def recomputed(
    loop: LoopView, models: tuple[SignedModel, ...], sets: tuple[SetLeftOtherwise, ...]
) -> RecomputedAsLeft:
    """Recompute each set at every operating point in force that it holds for.

    A controller runs whatever can be computed of it: gains that form no loop with a model are told as such.
    """
    made: list[SignedRecomputation] = []
    failed: list[NotRecomputed] = []
    judged = [(each, gain_sets.models_for(_gains(each), models)) for each in sets]
    for each, judged_by in judged:
        for model in judged_by:
            outcome = _recomputed(loop.loop, model, each)
            if isinstance(outcome, NotRecomputed):
                failed.append(outcome)
            else:
                made.append(outcome)
    verdicts: list[VerdictAsLeft] = [signed.answer.verdict for signed in made]
    verdicts += ["undecided" for _ in failed]
    verdicts += ["not_assessed" for _, judged_by in judged if not judged_by]
    return RecomputedAsLeft(
        verdict=min(verdicts, key=_VERDICTS.index),
        loop_revision=loop.revision,
        gain_sets=sets,
        criteria_source=recomputing.criteria_source(loop.loop),
        criteria=approvability.worst_criteria(tuple(made)),
        recomputations=tuple(RecomputationOfSubmission.of(signed, models) for signed in made),
        not_recomputed=tuple(failed),
    )


def told(left: RecomputedAsLeft | None) -> dict[str, object] | None:
    """Return what the history tells of it: all but the results, which the row that it vouches for has."""
    if left is None:
        return None
    return {
        "verdict": left.verdict,
        "loop_revision": left.loop_revision,
        "gain_sets": left.gain_sets,
        "criteria_source": left.criteria_source,
        "criteria": left.criteria,
        "recomputations": [
            {"model": each.model, "gain_set": each.gain_set, "verdict": each.result.verdict}
            for each in left.recomputations
        ],
        "not_recomputed": left.not_recomputed,
    }


def _recomputed(
    loop: LoopRegistration, model: SignedModel, left: SetLeftOtherwise
) -> SignedRecomputation | NotRecomputed:
    try:
        # the curves of gains that nobody is asked to approve are drawn nowhere
        made = recomputing.recomputed(loop, model, left.gain_set, _gains(left), None, with_curves=False)
    except FieldError as error:
        point = model.model.operating_point
        reference = ModelReference(id=model.id, version=model.version, operating_point=point)
        return NotRecomputed(model=reference, gain_set=left.gain_set, reason=error.detail)
    return made.signed


def _gains(left: SetLeftOtherwise) -> SignedGains:
    return SignedGains(
        condition=left.condition, operating_points=left.operating_points, controller=left.controller
    )
