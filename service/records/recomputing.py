"""One set of gains recomputed with one model, and what came of it against the loop's limits or the
service's.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from hashlib import sha256

from service.analysis.controller import Scan
from service.analysis.recomputation import recompute
from service.documents.canonical import canonical_bytes
from service.documents.loops import LoopRegistration
from service.documents.recomputations import judged
from service.documents.writing import plain
from service.judgement.claims import Claims
from service.judgement.criteria import Criteria, past_hard_floors, service_floors
from service.records import loops
from service.records.content import SignedGains, SignedModel, SignedRecomputation


@dataclass(frozen=True, kw_only=True, slots=True)
class Recomputed:
    """A recomputation as it is signed, and its curves as canonical bytes."""

    signed: SignedRecomputation
    curves: bytes | None


def recomputed(
    loop: LoopRegistration, model: SignedModel, index: int, gain_set: SignedGains, claims: Claims | None
) -> Recomputed:
    """Recompute the gain set at `index` with one model.

    Raises FieldError, its path starting with "plant_model", "controller" or "ranges", where the loop
    cannot be formed.
    """
    recomputation = recompute(
        model.model.plant_model,
        gain_set.controller,
        ranges=loops.ranges(loop),
        with_curves=True,
        with_second_opinion=True,
    )
    scan = gain_set.controller.scan
    interval_s = scan.interval_s if isinstance(scan, Scan) else None
    criteria = own_criteria(loop) or service_floors(recomputation, interval_s)
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


def own_criteria(loop: LoopRegistration) -> Criteria | None:
    """Return the loop's own limits; an empty set of limits is none."""
    return None if loop.criteria == Criteria() else loop.criteria
