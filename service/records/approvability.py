"""What an approval has to answer for, and what no deviation makes good. Read off the signed content alone."""

from __future__ import annotations

from collections.abc import Iterator

from service.analysis.results import Quantity, Verdict
from service.judgement.criteria import CriterionFinding
from service.judgement.wording import criterion_sentence
from service.records.content import SignedContent, SignedRecomputation, WorstCriterion
from service.records.roles import Role

APPROVER: Role = "reviewer"

_VERDICTS: tuple[Verdict, ...] = ("unstable", "undecided", "stable")
_OUTCOMES = ("met", "not_assessed", "not_met")
"""From the best to the worst."""


def worst_verdict(recomputations: tuple[SignedRecomputation, ...]) -> Verdict | None:
    """Return the worst verdict over all operating points; None where there is no model."""
    found = [recomputation.answer.verdict for recomputation in recomputations]
    return min(found, key=_VERDICTS.index, default=None)


def worst_criteria(recomputations: tuple[SignedRecomputation, ...]) -> tuple[WorstCriterion, ...]:
    """Return each limit with what came of it at its worst operating point, in the order of first mention."""
    worst: dict[str, WorstCriterion] = {}
    for recomputation in recomputations:
        for finding in recomputation.answer.criteria:
            found = WorstCriterion(
                finding=finding,
                operating_point=recomputation.operating_point,
                gain_set=recomputation.gain_set,
            )
            other = worst.setdefault(finding.criterion, found)
            if _badness(finding) > _badness(other.finding):
                worst[finding.criterion] = found
    return tuple(worst.values())


def approvals_needed(content: SignedContent) -> int:
    """Return how many people have to approve."""
    return 2 if content.loop.safety_related else 1


def deviations_needed(content: SignedContent) -> tuple[str, ...]:
    """Name the criteria and findings that an approval has to answer, each one once."""
    return tuple(dict.fromkeys(_to_answer(content)))


def hindrances(content: SignedContent) -> tuple[str, ...]:
    """Say why no deviation makes this approvable; empty where an approval is possible."""
    if not content.recomputations:
        return ("there is no plant model in force, so that nothing could be recomputed",)
    return tuple(_hindrances(content))


def _to_answer(content: SignedContent) -> Iterator[str]:
    for worst in content.criteria:
        if worst.finding.outcome != "met":
            yield worst.finding.criterion
    for recomputation in content.recomputations:
        for floor in recomputation.hard_floors:
            if floor.outcome == "not_assessed":
                yield floor.criterion
        for finding in recomputation.answer.own_findings:
            if finding.needs_deviation:
                yield finding.finding


def _hindrances(content: SignedContent) -> Iterator[str]:
    judged = {recomputation.gain_set for recomputation in content.recomputations}
    for index, gain_set in enumerate(content.gain_sets):
        if index not in judged:
            points = ", ".join(gain_set.operating_points)
            yield f"the gains for {gain_set.condition} were not recomputed: no model is in force at {points}"
    for recomputation in content.recomputations:
        where = f"at operating point {recomputation.operating_point}"
        if recomputation.answer.verdict != "stable":
            yield f"{where} the loop is {recomputation.answer.verdict}"
        for floor in recomputation.hard_floors:
            if floor.outcome == "not_met":
                yield f"{where} no deviation suffices: {criterion_sentence(floor)}"


def _badness(finding: CriterionFinding) -> tuple[int, float]:
    return _OUTCOMES.index(finding.outcome), _distance(finding)


def _distance(finding: CriterionFinding) -> float:
    """How far a value lies on the wrong side of its limit, as a share of it; more is worse."""
    is_minimum = finding.criterion.endswith("_min")
    value: Quantity = finding.value
    if value is None:
        return 0.0
    if isinstance(value, str):
        return float("inf") if finding.outcome == "not_met" else float("-inf")
    share = abs(value) / finding.limit if finding.limit > 0 else abs(value)
    return -share if is_minimum else share
