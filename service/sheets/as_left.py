"""What the loop was computed to do with gains that were left otherwise than approved, in words."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

from service.judgement.criteria import CriterionFinding
from service.judgement.findings import Finding
from service.judgement.wording import VERDICTS, criterion_sentence
from service.records.content import (
    RecomputationOfSubmission,
    RecomputedAsLeft,
    VerdictAsLeft,
)
from service.sheets.assessments import Assessment, assessment
from service.sheets.summaries import NOT_SHOWN, Summary, recomputation_title, summary

CAUTION = "What is done at the controller now is for site procedure and licensed practice to say."
COMPUTED = (
    "These gains were computed, not approved. The verdict is as good as the models on record and no better."
)
NOT_COMPUTED = "Nobody has approved these gains, and nothing was computed of them."
TELL_THE_OPERATOR = "Tell the operator of this loop now."
NO_MODEL = "no model in force covers these gains, so nothing can be said of the loop’s stability."
BEFORE_THERE_WAS_ONE = (
    "this was recorded before the service did so, so nothing can be said of the loop’s stability."
)


@dataclass(frozen=True, kw_only=True, slots=True)
class ToldAsLeft:
    """The verdict on gains as left, what it misses, and the caution that belongs to it."""

    verdict: VerdictAsLeft | None
    """None: recorded before gains as left were recomputed."""
    sentence: str
    summary: str
    """Empty: nothing was recomputed, as the sentence says."""
    missed: tuple[str, ...]
    """Limits that a stable loop does not meet, and what could not be recomputed, in sentences."""
    calm: bool
    """Stable, and nothing is missed or left open."""
    caution: str


def told_as_left(left: RecomputedAsLeft | None) -> ToldAsLeft:
    """Tell what was recomputed; None: it was recorded before there was such a thing."""
    verdict = None if left is None else left.verdict
    came_out = None if left is None else _summary(left)
    missed = () if left is None else tuple(_missed(left))
    calm = came_out is not None and came_out.good and not missed
    return ToldAsLeft(
        verdict=verdict,
        sentence=_sentence(verdict),
        summary=came_out.sentence if came_out else "",
        missed=missed,
        calm=calm,
        caution=" ".join(_caution(calm=calm, computed=left is not None and bool(left.recomputations))),
    )


def _caution(*, calm: bool, computed: bool) -> Iterator[str]:
    if not calm:
        yield TELL_THE_OPERATOR
    yield COMPUTED if computed else NOT_COMPUTED
    yield CAUTION


def assessments(left: RecomputedAsLeft) -> tuple[Assessment, ...]:
    """Everything that was recomputed, at each operating point."""
    return tuple(
        assessment(
            recomputation_title(each.model.operating_point, _condition(left, each.gain_set)),
            replace(each.result, findings=_findings(each)),
            (),
        )
        for each in left.recomputations
    )


def in_one_line(left: RecomputedAsLeft) -> str:
    """Say the same for paper, among other things."""
    came_out = _summary(left)
    told = [came_out.sentence if came_out else f"nothing, {NO_MODEL}", *_missed(left)]
    return f"the gains as left are NOT APPROVED; computed of them: {' '.join(told)}".removesuffix(".")


def _sentence(verdict: VerdictAsLeft | None) -> str:
    """The verdict as its usual sentence, with what it is about."""
    if verdict is None or verdict == "not_assessed":
        why = BEFORE_THERE_WAS_ONE if verdict is None else NO_MODEL
        return f"Not recomputed with the gains as left: {why}"
    word, colon, meaning = VERDICTS[verdict].partition(":")
    not_approved = " Computed, not approved." if verdict == "stable" else ""
    return f"{word} with the gains as left{colon}{meaning}{not_approved}"


def _summary(left: RecomputedAsLeft) -> Summary | None:
    answers = [each.result for each in left.recomputations]
    if answers:
        return summary(left.verdict, answers, left.criteria)
    return Summary(good=False, sentence=NOT_SHOWN) if left.not_recomputed else None


def _missed(left: RecomputedAsLeft) -> Iterator[str]:
    several = len(left.recomputations) > 1
    # a loop that is not shown stable has no margins: the verdict says it all
    shown_stable = all(each.result.verdict == "stable" for each in left.recomputations)
    for worst in left.criteria if shown_stable else ():
        if worst.finding.outcome != "met":
            where = f" Worst at: {worst.operating_point}." if several else ""
            yield criterion_sentence(worst.finding) + where
    for each in left.recomputations:
        for floor in each.hard_floors if each.result.verdict == "stable" else ():
            said = criterion_sentence(floor)
            yield f"Nobody could approve this: {said[0].lower()}{said[1:]}"
    for failed in left.not_recomputed:
        title = recomputation_title(failed.model.operating_point, _condition(left, failed.gain_set))
        yield f"{title}: could NOT be recomputed, {failed.reason}."
    judged = {each.gain_set for each in left.recomputations}
    judged |= {each.gain_set for each in left.not_recomputed}
    for gains in left.gain_sets:
        if gains.gain_set not in judged and judged:
            points = ", ".join(gains.operating_points)
            yield f"Gains for: {gains.condition}: NOT recomputed, no model is in force at {points}."


def _findings(each: RecomputationOfSubmission) -> tuple[CriterionFinding | Finding, ...]:
    """All but "do not enter these gains", which comes too late: the verdict says what is wrong."""
    return tuple(
        found
        for found in each.result.findings
        if not (isinstance(found, Finding) and found.finding == "unstable")
    )


def _condition(left: RecomputedAsLeft, gain_set: int) -> str | None:
    return next(each.condition for each in left.gain_sets if each.gain_set == gain_set)
