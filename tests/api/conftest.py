"""A running application over a real store, made by the migrations, with an account in every role."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

import pytest
from argon2 import PasswordHasher
from flask import Flask
from sqlalchemy import inspect, text
from werkzeug.test import TestResponse

from service.app import create_app
from service.context import services
from service.records import accounts, migrating, tokens
from service.records.accounts import NewAccount
from service.records.database import Database, system_clock
from service.records.roles import CONSOLE, Role
from service.settings import Settings
from tests.api import plant
from tests.api.plant import Body
from tests.databases import Databases

SECRET_KEY = "a secret of the tests, of 32 bytes or more"
CHEAP = PasswordHasher(time_cost=1, memory_cost=8, parallelism=1)
"""The real Argon2id, with a cost at which a test does not wait."""

PEOPLE: dict[str, tuple[tuple[Role, ...], tuple[str, ...]]] = {
    "submitter": (("submitter",), ()),
    "reviewer": (("reviewer",), ()),
    "second_reviewer": (("reviewer",), ()),
    "both": (("submitter", "reviewer"), ()),
    "auditor": (("auditor",), ()),
    "administrator": (("administrator",), ()),
    "elsewhere": (("submitter", "reviewer", "auditor", "administrator"), ("Tank farm",)),
}
"""Account → roles and areas."""


def password_of(person: str) -> str:
    return f"correct battery of {person}"


@dataclass(frozen=True)
class Kept:
    """A store with the tokens of its accounts."""

    url: str
    tokens: dict[str, str]


@dataclass(frozen=True)
class Service:
    """The application with a caller for each account."""

    app: Flask
    url: str
    tokens: dict[str, str]

    def call(
        self, method: str, path: str, person: str | None = "submitter", json: object = None, **more: Any
    ) -> TestResponse:
        headers = {"Authorization": f"Bearer {self.tokens[person]}"} if person else {}
        headers |= more.pop("headers", {})
        if json is not None:
            more["json"] = json
        return self.app.test_client().open(path, method=method, headers=headers, **more)

    def get(self, path: str, person: str | None = "submitter", **more: Any) -> TestResponse:
        return self.call("GET", path, person, **more)

    def post(
        self, path: str, json: object = None, person: str | None = "submitter", **more: Any
    ) -> TestResponse:
        return self.call("POST", path, person, json, **more)

    def rows(self) -> dict[str, int]:
        """Return how many rows each table has, but for those that note use and throttle."""
        with self.app.app_context(), services().database.reading() as session:
            return {
                name: session.execute(text(f'SELECT count(*) FROM "{name}"')).scalar_one()  # noqa: S608
                for name in inspect(session.connection()).get_table_names()
            }


@pytest.fixture(scope="session")
def kept(databases: Databases) -> Kept:
    """Make the store once; each test works on a copy."""
    url = databases.new()
    migrating.migrate(url, now=system_clock())
    database = Database.open(url, password_hasher=CHEAP)
    with database.writing() as session:
        issued = {person: add_account(session, database, person) for person in PEOPLE}
    database.close()
    return Kept(url, issued)


def add_account(session: Any, database: Database, person: str) -> str:
    roles, areas = PEOPLE[person]
    new = NewAccount(
        name=person, full_name=person.title(), roles=roles, areas=areas, password=password_of(person)
    )
    accounts.add(session, CONSOLE, new, database.now())
    return tokens.issue(session, CONSOLE, person, "tests", database.now())[1]


@pytest.fixture
def service(kept: Kept, databases: Databases) -> Iterator[Service]:
    url = databases.copy_of(kept.url)
    app = create_app(Settings(database_url=url, secret_key=SECRET_KEY), password_hasher=CHEAP)
    yield Service(app, url, kept.tokens)
    with app.app_context():
        services().database.close()
    databases.drop(url)


@pytest.fixture
def loop_id(service: Service) -> str:
    """Register the invented loop with its model."""
    loop = service.post("/v1/loops", plant.LOOP)
    assert loop.status_code == 201, loop.text
    identifier: str = loop.json["id"]
    model = service.post(f"/v1/loops/{identifier}/models", plant.MODEL)
    assert model.status_code == 201, model.text
    return identifier


@pytest.fixture
def submission(service: Service, loop_id: str) -> Body:
    """Submit gains for the loop."""
    made = service.post("/v1/submissions", plant.SUBMISSION)
    assert made.status_code == 201, made.text
    body: Body = made.json
    return body


Decide = Callable[..., TestResponse]


@pytest.fixture
def decide(service: Service, submission: Body) -> Decide:
    """Return a signer of decisions on the submission."""

    def sign(decision: str = "approve", person: str = "reviewer", **changes: Any) -> TestResponse:
        body = {
            "decision": decision,
            "reason": "Margins and responses read against the loop's limits.",
            "content_digest": submission["content_digest"],
            "password": password_of(person),
            "deviation": [],
        }
        headers = changes.pop("headers", {})
        path = f"/v1/submissions/{submission['id']}/decisions"
        return service.post(path, body | changes, person, headers=headers)

    return sign
