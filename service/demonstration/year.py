"""The walk through the invented year: one HTTP call for each change, at its time, by its person.

Nothing here is a short cut: each call is read, checked, recomputed, signed and recorded as a user's would be.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from datetime import datetime
from typing import Any

from flask import Flask

from service.demonstration.plant import Body, Change, Plant


class Refused(RuntimeError):
    """The interface refused a call of the demonstration's: either the data or the service is wrong."""


@dataclass
class Calendar:
    """A clock that stands at the time of the change that is being made."""

    now: datetime

    def __call__(self) -> datetime:
        """Return the time at which it stands."""
        return self.now


@dataclass(frozen=True)
class Year:
    """The plant's year, lived through the application's own interface."""

    app: Flask
    calendar: Calendar
    plant: Plant
    tokens: dict[str, str]
    """By account name."""
    _loop_ids: dict[str, str] = field(default_factory=dict)
    _submission_ids: dict[str, str] = field(default_factory=dict)
    _proposal_ids: dict[str, str] = field(default_factory=dict)

    def live(self) -> Iterator[Change]:
        """Make one change after the other and yield each one that was made. Raises Refused."""
        make: dict[str, Callable[[Change], None]] = {
            "register": self._register,
            "model": self._model,
            "submit": self._submit,
            "decide": self._decide,
            "install": self._install,
            "propose": self._propose,
            "confirm": self._confirm,
        }
        for change in self.plant.year:
            self.calendar.now = change.time
            make[change.call](change)
            yield change

    def _register(self, change: Change) -> None:
        loop = self.plant.loops[str(change.tag)]
        self._loop_ids[str(change.tag)] = self._post(change, "/v1/loops", loop.registration)["id"]

    def _model(self, change: Change) -> None:
        model = self.plant.loops[str(change.tag)].model
        self._post(change, f"/v1/loops/{self._loop_ids[str(change.tag)]}/models", {**model, **change.body})

    def _submit(self, change: Change) -> None:
        registration = self.plant.loops[str(change.tag)].registration
        named = {"loop": {"site": registration["site"], "tag": registration["tag"]}}
        body = {**named, "controller": self.plant.gains[str(change.gains)], **change.body}
        self._submission_ids[str(change.submission)] = self._post(change, "/v1/submissions", body)["id"]

    def _decide(self, change: Change) -> None:
        self._sign(change, f"/v1/submissions/{self._submission_ids[str(change.submission)]}")

    def _install(self, change: Change) -> None:
        path = f"/v1/submissions/{self._submission_ids[str(change.submission)]}/installations"
        found, left = (self.plant.gains[str(name)] for name in (change.as_found, change.as_left))
        self._post(change, path, {**change.body, "as_found": found, "as_left": left})

    def _propose(self, change: Change) -> None:
        """Propose the loop as it was registered with what the body's `loop` has otherwise."""
        path = f"/v1/loops/{self._loop_ids[str(change.tag)]}"
        present = self._call(change, "GET", path, None)
        loop = {**self.plant.loops[str(change.tag)].registration, **change.body["loop"]}
        body = {**change.body, "loop": loop, "revision": present["revision"]}
        self._proposal_ids[str(change.proposal)] = self._post(change, f"{path}/changes", body)["id"]

    def _confirm(self, change: Change) -> None:
        self._sign(change, f"/v1/changes/{self._proposal_ids[str(change.proposal)]}")

    def _sign(self, change: Change, path: str) -> None:
        """Read, then decide on exactly what was read."""
        read = self._call(change, "GET", path, None)
        password = next(person.password for person in self.plant.people if person.name == change.who)
        signed = {"content_digest": read["content_digest"], "password": password}
        self._post(change, f"{path}/decisions", {**change.body, **signed})

    def _post(self, change: Change, path: str, body: Body) -> Any:
        return self._call(change, "POST", path, body)

    def _call(self, change: Change, method: str, path: str, body: Body | None) -> Any:
        bearer = {"Authorization": f"Bearer {self.tokens[change.who]}"}
        answer = self.app.test_client().open(path, method=method, json=body, headers=bearer)
        if answer.status_code not in (200, 201):
            raise Refused(
                f"{change.time:%Y-%m-%d} {change.who} {method} {path}: {answer.get_data(as_text=True)}"
            )
        return answer.get_json()
