"""The invented plant as data: who works there, its loops and gains, and what was changed when."""

from __future__ import annotations

import json
from dataclasses import dataclass
from datetime import datetime, timedelta
from importlib.resources import files
from typing import Any

from service.records.roles import Role

Body = dict[str, Any]
"""A JSON object as it goes over HTTP: the interface reads it strictly, so nothing is checked here."""

TIMES_IN_A_BODY = ("installed_at", "install_by", "temporary_until")


@dataclass(frozen=True, kw_only=True, slots=True)
class Person:
    """Somebody with an account; the password is printed with the demonstration's address."""

    name: str
    full_name: str
    roles: tuple[Role, ...]
    areas: tuple[str, ...]
    password: str
    about: str


@dataclass(frozen=True, kw_only=True, slots=True)
class Loop:
    """A loop as it was registered, and its first model."""

    registration: Body
    model: Body


@dataclass(frozen=True, kw_only=True, slots=True)
class Change:
    """One call that somebody made: `register`, `model`, `submit`, `decide`, `install`, `propose` a change of
    a loop, or `confirm` one.
    """

    time: datetime
    who: str
    call: str
    tag: str | None = None
    submission: str | None = None
    """What the year calls the submission that is made or meant."""
    proposal: str | None = None
    """What it calls the change of a loop that is proposed or confirmed."""
    gains: str | None = None
    as_found: str | None = None
    as_left: str | None = None
    body: Body

    def later(self, shift: timedelta) -> Change:
        """Return the same change at another time, with the times that its body names moved along."""
        moved = {
            name: _written(_read(value) + shift) if name in TIMES_IN_A_BODY else value
            for name, value in self.body.items()
        }
        others = {name: getattr(self, name) for name in self.__slots__ if name not in ("time", "body")}
        return Change(time=self.time + shift, body=moved, **others)


@dataclass(frozen=True, kw_only=True, slots=True)
class Plant:
    """Everything that the demonstration shows."""

    people: tuple[Person, ...]
    loops: dict[str, Loop]
    """By tag."""
    gains: dict[str, Body]
    """Controllers by the name that the year calls them."""
    year: tuple[Change, ...]

    def ending_before(self, now: datetime) -> Plant:
        """Return the plant with its year moved by whole weeks, so that it ends in the week before `now`.

        Weekdays stay, and what awaits review has waited for some days whenever it is shown.
        """
        weeks = (now - self.year[-1].time) // timedelta(weeks=1)
        year = tuple(change.later(timedelta(weeks=weeks)) for change in self.year)
        return Plant(people=self.people, loops=self.loops, gains=self.gains, year=year)


def invented_plant() -> Plant:
    """Read the plant from the package's own data."""
    loops = [Loop(**entry) for entry in _data("loops")]
    return Plant(
        people=tuple(_person(entry) for entry in _data("people")),
        loops={loop.registration["tag"]: loop for loop in loops},
        gains=_data("gains"),
        year=tuple(_change(entry) for entry in _data("year")),
    )


def _data(name: str) -> Any:
    return json.loads((files(__package__) / "data" / f"{name}.json").read_text("utf-8"))


def _person(entry: Body) -> Person:
    return Person(**{**entry, "roles": tuple(entry["roles"]), "areas": tuple(entry["areas"])})


def _change(entry: Body) -> Change:
    return Change(**{"body": {}, **entry, "time": _read(entry["time"])})


def _read(time: str) -> datetime:
    return datetime.fromisoformat(time)


def _written(time: datetime) -> str:
    return time.isoformat().replace("+00:00", "Z")
