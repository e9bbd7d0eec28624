"""Recomputation without a record."""

from __future__ import annotations

from flask import Blueprint

from service.api import answers
from service.api.answers import Answer
from service.api.operations import Reader, computes
from service.documents import recomputations
from service.documents.recomputations import RecomputationAnswer, RecomputationRequest
from service.monitoring.metrics import RECOMPUTATION_SECONDS

blueprint = Blueprint("recomputations", __name__, url_prefix="/v1/recomputations")


@blueprint.post("")
@computes(RecomputationRequest, RecomputationAnswer)
def recompute(read: Reader[RecomputationRequest]) -> Answer:
    """Recompute stability, margins, step metrics and noise of one loop; nothing is kept."""
    request = read()
    with RECOMPUTATION_SECONDS.time():
        answer = recomputations.answer(request)
    return answers.document(answer)
