"""Findings on what others say of the same loop. None of them enters a verdict."""

from __future__ import annotations

from service.judgement import wording
from service.judgement.finding import Case, Finding


def claims_that_differ(case: Case) -> list[Finding]:
    """What the tool claims and the recomputation does not bear out."""
    return [
        Finding(
            finding="claim_differs",
            weight="caution",
            sentence=f"The tool says {wording.quantity_label(claim.name)} "
            f"{wording.told(claim.name, claim.claimed)}; recomputed it is "
            f"{wording.told(claim.name, claim.recomputed)}.",
        )
        for claim in case.claims
        if claim.outcome == "differs"
    ]


def second_opinion(case: Case) -> Finding | None:
    """Another library finds otherwise, or nothing."""
    opinion = case.recomputation.second_opinion
    if opinion is None or opinion.outcome == "agrees":
        return None
    if opinion.outcome == "not_available":
        return Finding(
            finding="second_opinion_not_available",
            weight="note",
            sentence=f"{opinion.library} gives no second opinion on this loop: {opinion.note}.",
        )
    return Finding(
        finding="second_opinion_differs",
        weight="caution",
        sentence=f"{opinion.library}, asked about the same loop, {opinion.note}. That is for the reviewer to "
        "weigh, and no verdict.",
    )
