"""The state of a record in big plain words, and what it means for whoever holds the sheet."""

from __future__ import annotations

from dataclasses import dataclass

from service.records.lifecycle import State


@dataclass(frozen=True, slots=True)
class StateWords:
    """`heading` stands in the banner, `column` above the gains; `entry` says whether they may be typed in."""

    heading: str
    sentence: str
    column: str
    entry: bool


STATES: dict[State, StateWords] = {
    "awaiting_review": StateWords(
        "AWAITING REVIEW – NOT APPROVED FOR ENTRY",
        "Nobody has approved these gains. Do not type them in.",
        "PROPOSED – do not enter",
        False,
    ),
    "approved": StateWords(
        "APPROVED FOR ENTRY",
        "Approved, and not yet recorded as installed.",
        "ENTER",
        True,
    ),
    "in_force": StateWords(
        "IN FORCE",
        "Approved, and recorded as installed the way they were approved.",
        "IN FORCE",
        True,
    ),
    "installed_awaiting_review": StateWords(
        "INSTALLED IN AN EMERGENCY – REVIEW STILL OWED",
        "These gains run in the controller and nobody has approved them yet.",
        "INSTALLED – not approved",
        False,
    ),
    "superseded_awaiting_review": StateWords(
        "NO LONGER INSTALLED – REVIEW STILL OWED – DO NOT ENTER",
        "Other gains have taken the place of these, which nobody has approved yet.",
        "NOT APPROVED – do not enter",
        False,
    ),
    "recorded": StateWords(
        "RECORDED AS FOUND – NOT APPROVED",
        "These gains were found running in the controller. They are on record, and nobody has approved them.",
        "FOUND RUNNING – not approved",
        False,
    ),
    "superseded": StateWords(
        "SUPERSEDED – DO NOT ENTER",
        "Other gains have taken the place of these.",
        "SUPERSEDED – do not enter",
        False,
    ),
    "rejected": StateWords(
        "REJECTED – DO NOT ENTER",
        "A reviewer rejected these gains. If they run in the controller, act as site procedure says.",
        "REJECTED – do not enter",
        False,
    ),
    "withdrawn": StateWords(
        "WITHDRAWN – DO NOT ENTER",
        "Whoever submitted these gains took them back.",
        "WITHDRAWN – do not enter",
        False,
    ),
    "revoked": StateWords(
        "APPROVAL REVOKED – DO NOT ENTER",
        "The approval was taken back. If these gains run in the controller, act as site procedure says.",
        "REVOKED – do not enter",
        False,
    ),
    "expired": StateWords(
        "APPROVAL EXPIRED – DO NOT ENTER",
        "They were not recorded as installed within the time they were approved for.",
        "EXPIRED – do not enter",
        False,
    ),
    "lapsed": StateWords(
        "TIME IS OVER – DO NOT ENTER",
        "They were approved for a limited time, and it is past. If they run in the controller, "
        "act as site procedure says.",
        "TIME IS OVER – do not enter",
        False,
    ),
}
"""One entry for every state; a test holds the two lists against each other."""
