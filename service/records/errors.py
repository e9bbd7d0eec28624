"""What the records refuse, and why. These exceptions know nothing of HTTP."""

from __future__ import annotations

from service.documents.errors import FieldProblem


class RecordsError(Exception):
    """Something that the records refuse, with a sentence for the person who asked."""

    def __init__(self, detail: str) -> None:
        self.detail = detail
        super().__init__(detail)


class NotAuthenticated(RecordsError):
    """A token, session or sign-in that is unknown, ended, revoked or wrong. The text never says which."""


class TooManyAttempts(RecordsError):
    """Too many failed attempts; `retry_after_s` seconds must pass before the next one is looked at."""

    def __init__(self, detail: str, retry_after_s: int) -> None:
        self.retry_after_s = retry_after_s
        super().__init__(detail)


class NotFound(RecordsError):
    """It does not exist, or it lies outside the areas of whoever asks: the two look alike on purpose."""


class NotAllowed(RecordsError):
    """The actor is known and may not do this."""


class NotIndependent(NotAllowed):
    """Whoever submitted or prepared gains neither approves nor rejects them, and nobody approves twice.

    The attempt leaves a trace: `decisions.record_refused_signing`.
    """


class SigningRefused(NotAllowed):
    """The signature itself was refused. The attempt leaves a trace: `decisions.record_refused_signing`."""


class WrongPassword(SigningRefused):
    """The password that signs is wrong."""


class SigningSuspended(SigningRefused):
    """The account's password was reset by an administrator and no second one has confirmed it yet."""


class FieldErrors(RecordsError):
    """Fields of a request that are well formed and cannot be accepted, all of them at once."""

    def __init__(self, errors: tuple[FieldProblem, ...]) -> None:
        self.errors = errors
        super().__init__("; ".join(f"{problem.pointer}: {problem.detail}" for problem in errors))


class MissingDeviation(FieldErrors):
    """An approval without a deviation for each criterion that is not met or not assessed."""


class StaleContent(RecordsError):
    """The content digest, or the revision, is not the present one."""


class Conflict(RecordsError):
    """The present state does not allow this."""


class AlreadyExists(Conflict):
    """There is one already that is unique."""


class WrongStep(Conflict):
    """The life cycle has no such step from the present state."""


class BasisChanged(Conflict):
    """What the recomputation rests on has changed since; `changed` names it in words.

    `remedy` is what makes the service recompute.
    """

    def __init__(self, changed: tuple[str, ...], remedy: str = "submit again") -> None:
        self.changed = changed
        super().__init__(
            f"since the recomputation {_and(changed)} changed; {remedy}, so that the gains are recomputed"
        )


class SecondPersonNeeded(Conflict):
    """One person alone does not change what an approval rests on: `errors` names each thing and its place."""

    def __init__(self, reasons: tuple[tuple[str, str], ...]) -> None:
        self.errors = tuple(FieldProblem(f"/{field}", sentence) for field, sentence in reasons)
        told = "; ".join(sentence for _, sentence in reasons)
        super().__init__(f"this is proposed by one person and confirmed by another: {told}")


class NotApprovable(Conflict):
    """No deviation makes this approvable: not stable everywhere, no model, or below the hard floor."""


class IdempotencyKeyReused(RecordsError):
    """The same key came with another request before."""


class StoreNotUsable(RecordsError):
    """The store is not at the current schema, or is not one that may be opened like this."""


def _and(words: tuple[str, ...]) -> str:
    return words[0] if len(words) == 1 else f"{', '.join(words[:-1])} and {words[-1]}"
