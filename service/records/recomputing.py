"""One set of gains recomputed with one model, and what came of it against the loop's limits or the
service's.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from hashlib import sha256
from typing import Literal

from service.analysis.controller import Scan
from service.analysis.recomputation import recompute
from service.documents.canonical import canonical_bytes
from service.documents.loops import LoopRegistration
from service.documents.recomputations import judged
from service.documents.writing import plain
from service.judgement.claims import Claims
from service.judgement.criteria import past_hard_floors, service_floors
from service.monitoring.metrics import RECOMPUTATION_SECONDS
from service.records import gain_sets, loops
from service.records.content import SignedGains, SignedModel, SignedRecomputation
from service.records.tables.submissions import SubmissionRecomputation


@dataclass(frozen=True, kw_only=True, slots=True)
class Recomputed:
    """A recomputation as it is signed, and its curves as canonical bytes."""

    signed: SignedRecomputation
    curves: bytes | None


def recomputed(
    loop: LoopRegistration,
    model: SignedModel,
    index: int,
    gain_set: SignedGains,
    claims: Claims | None,
    *,
    with_curves: bool = True,
) -> Recomputed:
    """Recompute the gain set at `index` with one model.

    Raises FieldError, its path starting with "plant_model", "controller" or "ranges", where the loop
    cannot be formed.
    """
    with RECOMPUTATION_SECONDS.time():
        recomputation = recompute(
            model.model.plant_model,
            gain_set.controller,
            ranges=loops.ranges(loop),
            with_curves=with_curves,
            with_second_opinion=True,
        )
    scan = gain_set.controller.scan
    interval_s = scan.interval_s if isinstance(scan, Scan) else None
    criteria = loop.own_criteria or service_floors(recomputation, interval_s)
    answer = judged(recomputation, criteria, claims)
    curves = None if answer.curves is None else canonical_bytes(plain(answer.curves))
    signed = SignedRecomputation(
        model_id=model.id,
        operating_point=model.model.operating_point,
        gain_set=index,
        criteria=criteria,
        answer=replace(answer, curves=None),
        curves_digest=None if curves is None else sha256(curves).hexdigest(),
        hard_floors=past_hard_floors(recomputation),
    )
    return Recomputed(signed=signed, curves=curves)


def everywhere(
    loop: LoopRegistration,
    sets: tuple[SignedGains, ...],
    models: tuple[SignedModel, ...],
    claims: Claims | None,
) -> tuple[Recomputed, ...]:
    """Recompute every gain set with each model that it is judged by.

    Raises FieldError as `recomputed` does.
    """
    return tuple(
        recomputed(loop, model, index, gain_set, claims)
        for index, gain_set in enumerate(sets)
        for model in gain_sets.models_for(gain_set, models)
    )


def rows(submission_id: str, first: int, made: tuple[Recomputed, ...]) -> tuple[SubmissionRecomputation, ...]:
    """Make the rows of recomputations, their ordinals counted from `first`."""
    return tuple(
        SubmissionRecomputation(
            submission_id=submission_id,
            ordinal=first + place,
            model_id=each.signed.model_id,
            gain_set=each.signed.gain_set,
            operating_point=each.signed.operating_point,
            verdict=each.signed.answer.verdict,
            curves=each.curves,
            curves_digest=each.signed.curves_digest,
        )
        for place, each in enumerate(made)
    )


def criteria_source(loop: LoopRegistration) -> Literal["loop", "service_floors"]:
    """Say whose limits a loop is held against."""
    return "loop" if loop.own_criteria else "service_floors"
