"""What the person who reads a submission may do with it, and why not where they may not."""

from __future__ import annotations

from dataclasses import dataclass

from service.judgement.wording import criterion_sentence
from service.pages.forms import Form, Problem, sentence
from service.pages.options import Option
from service.records import lifecycle
from service.records.errors import NotAllowed
from service.records.lifecycle import Action
from service.records.roles import Actor
from service.records.views import SubmissionView

DEVIATION = "deviation-"
"""What the name of a deviation's field begins with; the criterion or finding follows."""


@dataclass(frozen=True, slots=True)
class Deviation:
    """One thing that an approval has to answer for, and the field for the answer."""

    field: str
    criterion: str
    sentence: str


@dataclass(frozen=True, slots=True)
class Standing:
    """The steps that are open to this person. `why_not` empty: they may decide.

    `deviations` are asked for where an approval is possible at all.
    """

    choices: tuple[Option, ...]
    why_not: str
    deviations: tuple[Deviation, ...]
    may_withdraw: bool
    may_revoke: bool
    may_install: bool


def standing(view: SubmissionView, actor: Actor) -> Standing:
    """What `actor` may do with a submission that was read for this same actor."""
    choices = _choices(view)
    return Standing(
        choices=choices,
        why_not=_why_not(view, actor),
        deviations=() if choices[0].closed else _deviations(view),
        may_withdraw="withdraw" in view.open_actions,
        may_revoke="revoke" in view.open_actions,
        may_install="install" in view.open_actions,
    )


def missing_deviations(open_points: tuple[Deviation, ...], form: Form) -> tuple[Problem, ...]:
    """A problem for each thing that an approval would leave unanswered."""
    return tuple(
        Problem(f"Say why this is accepted: {_lower(deviation.sentence)}", deviation.field)
        for deviation in open_points
        if not form.typed(deviation.field)
    )


def check_open(view: SubmissionView, actor: Actor, action: Action) -> None:
    """Raise NotAllowed or WrongStep where `actor` cannot take this step, before anything is typed for it."""
    lifecycle.check_who(action, actor, _mine(view, actor))
    lifecycle.step(view.state, action)


def _mine(view: SubmissionView, actor: Actor) -> frozenset[str]:
    """The actor's own account where they submitted or prepared the gains; names are never used twice."""
    content = view.content
    authors = {person.name for person in (content.submitted_by, *content.prepared_by)}
    return frozenset({actor.account_id} if actor.account_id and actor.name in authors else ())


def _choices(view: SubmissionView) -> tuple[Option, ...]:
    reasons = (*map(sentence, view.hindrances), *_changed(view.changed_basis))
    hindrances = " ".join(reasons)
    return (
        Option("approve", "Approve these gains", hindrances, closed=bool(hindrances)),
        Option("reject", "Reject these gains"),
    )


def _changed(changed: tuple[str, ...]) -> tuple[str, ...]:
    if not changed:
        return ()
    named = ", ".join(changed)
    return (f"Since the recomputation this has changed: {named}. The gains have to be submitted again.",)


def _why_not(view: SubmissionView, actor: Actor) -> str:
    if not lifecycle.allows(view.state, "reject"):
        return f"Nothing is left to decide: these gains are {lifecycle.in_words(view.state)}."
    try:
        lifecycle.check_who("reject", actor, _mine(view, actor))
    except NotAllowed as refusal:
        return f"You cannot decide about these gains: {refusal}."
    if any(
        (decision.decision.signed_by.name, decision.decision.content_digest)
        == (actor.name, view.content_digest)
        for decision in view.decisions
    ):
        return "You have approved these gains. They need a second approval, by another person."
    return ""


def _deviations(view: SubmissionView) -> tuple[Deviation, ...]:
    sentences = {each.finding.criterion: criterion_sentence(each.finding) for each in view.content.criteria}
    for recomputed in view.content.recomputations:
        for finding in recomputed.answer.own_findings:
            sentences.setdefault(finding.finding, finding.sentence)
    return tuple(
        Deviation(DEVIATION + name, name, sentences.get(name, f"{name.replace('_', ' ')}."))
        for name in view.deviations_needed
    )


def _lower(sentence: str) -> str:
    return sentence[:1].lower() + sentence[1:]
