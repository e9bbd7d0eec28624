"""The words and marks that templates put on a page."""

from __future__ import annotations

from collections.abc import Callable
from datetime import datetime
from typing import Any

from markupsafe import Markup

from service.judgement import wording
from service.judgement.digits import as_entered, three_digits
from service.pages import forms
from service.records import change_lifecycle, lifecycle
from service.sheets import controllers
from service.sheets.as_left import ToldAsLeft

KINDS: dict[str, str] = {
    "planned": "planned change",
    "emergency": "emergency change, installed first",
    "baseline": "gains as found",
    "return": "return to earlier gains",
}
DECISIONS: dict[str, str] = {
    "approve": "approve",
    "reject": "reject",
    "withdraw": "withdraw",
    "revoke": "revoke the approval of",
}
DECIDED: dict[str, str] = {
    "approve": "approved",
    "reject": "rejected",
    "withdraw": "withdrew",
    "revoke": "revoked the approval of",
}
VERDICTS: dict[str | None, str] = {
    "stable": "✓ stable",
    "unstable": "✗ unstable",
    "undecided": "? undecided",
    "not_assessed": "? not recomputed",
    None: "? not recomputed",
}
NOT_RECOMPUTED = (
    "Not recomputed: no model of this process is on record, so nothing can be said of its stability."
)
_ACTIONS: dict[str, str] = dict(wording.ACTIONS.items())
_MARK_CLASSES = {"✓": "mark", "=": "mark", "✗": "mark against", "≠": "mark against", "?": "mark open"}


def moment(time: datetime) -> Markup:
    """A time in UTC, to the minute, that machines read too."""
    shown = f"{time.day} {time:%b %Y, %H:%M} UTC"
    return Markup('<time datetime="{}">{}</time>').format(time.isoformat(timespec="seconds"), shown)


def mark(words: str) -> Markup:
    """An outcome that begins with its symbol, set apart by what it means: ✓ quiet, ✗ reversed, ? dashed."""
    if not words:
        return Markup("")
    # a sentence in brackets after the outcome stays outside the mark
    outcome, bracket, rest = words.partition(" (")
    html = Markup('<span class="{}">{}</span>').format(_MARK_CLASSES.get(outcome[:1], "mark"), outcome)
    return html + Markup(' <span class="quiet small">({}</span>').format(rest) if bracket else html


def verdict_mark(verdict: str | None) -> Markup:
    """The verdict as a mark."""
    return mark(VERDICTS[verdict])


def verdict_sentence(verdict: str | None) -> str:
    """The verdict as a sentence with its symbol."""
    sentence = NOT_RECOMPUTED if verdict is None else wording.VERDICTS[verdict]  # type: ignore[index]
    return f"{VERDICTS[verdict][0]} {sentence}"


def as_left_sentence(told: ToldAsLeft) -> str:
    """The verdict on gains as left as a sentence with its symbol."""
    return f"{VERDICTS[told.verdict][0]} {told.sentence}"


def verdict_class(verdict: str | None) -> str:
    """How the verdict's frame looks."""
    return {"stable": "", "unstable": "against"}.get(verdict or "", "open")


def percent(change: float | None) -> str:
    """A change in per cent with its sign: +25 %, −3.2 %. Empty where it has no meaning."""
    if change is None:
        return ""
    size = f"{abs(change):.3g}"
    if abs(change) >= 1000:
        size = f"{abs(change):.0f}"
    return f"{'−' if change < 0 else '+'}{size} %"


def capital(text: str) -> str:
    """The text with its first letter as a capital."""
    return text[:1].upper() + text[1:]


def told_value(value: float | str | None) -> str:
    """A setting as entered, "none" where there is no such term."""
    return _value(value, as_entered)


def computed_value(value: float | str | None) -> str:
    """A setting that was brought to another form, and so is a computed value: three digits."""
    return _value(value, three_digits)


def _value(value: float | str | None, digits: Callable[[float], str]) -> str:
    if value is None:
        return controllers.NONE
    return _ACTIONS.get(value, value) if isinstance(value, str) else digits(value)


def event_kind(kind: str) -> str:
    """The kind of an entry of the history in words."""
    return kind.replace("_", " ")


FILTERS: dict[str, Callable[..., Any]] = {
    "moment": moment,
    "mark": mark,
    "verdict_mark": verdict_mark,
    "verdict_sentence": verdict_sentence,
    "as_left_sentence": as_left_sentence,
    "verdict_class": verdict_class,
    "percent": percent,
    "capital": capital,
    "event_kind": event_kind,
    "as_entered": as_entered,
    "sentence": forms.sentence,
    "state": lifecycle.in_words,
    "change_state": change_lifecycle.in_words,
    "kind": KINDS.__getitem__,
    "decided": DECIDED.__getitem__,
    "deciding": DECISIONS.__getitem__,
}
