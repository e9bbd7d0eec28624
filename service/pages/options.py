"""What a person chooses from in a form."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Option:
    """One choice; `closed`: it is shown and cannot be taken, for the reason that the hint gives."""

    value: str
    label: str
    hint: str = ""
    closed: bool = False


ANY = Option("", "any")
