"""People with a browser that runs no script: pages are read, forms are filled in and sent."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import pytest
from flask import Flask
from flask.testing import FlaskClient
from werkzeug.test import TestResponse

from tests.databases import Databases
from tests.pages import invented, markup
from tests.pages.invented import Kept, password_of
from tests.pages.markup import Element


@dataclass
class Person:
    """Somebody at a browser; `page` is what they see."""

    client: FlaskClient
    answer: TestResponse | None = None

    @property
    def page(self) -> Element:
        assert self.answer is not None
        return markup.read(self.answer.text)

    @property
    def status(self) -> int:
        assert self.answer is not None
        return self.answer.status_code

    def open(self, path: str) -> Element:
        self.answer = self.client.get(path, follow_redirects=True)
        return self.page

    def send(self, action: str, follow: bool = True, **typed: str) -> Element:
        """Fill in the form with this action and send it, hidden fields and token included."""
        form = self.page.one("form", action=action)
        fields = {
            field.get("name"): field.get("value")
            for field in form.all("input")
            if field.get("type") not in ("radio", "checkbox", "submit") or "checked" in field.attributes
        }
        fields |= {field.get("name"): field.text for field in form.all("textarea")}
        fields |= {
            field.get("name"): option.get("value")
            for field in form.all("select")
            for option in field.all("option")
            if "selected" in option.attributes
        }
        fields.pop("", None)
        names = {
            field.get("name") for field in (*form.all("input"), *form.all("textarea"), *form.all("select"))
        }
        names |= {button.get("name") for button in form.all("button")}
        assert set(typed) <= names, f"no such field: {set(typed) - names}"
        self.answer = self.client.post(action, data=fields | typed, follow_redirects=follow)
        return self.page if follow else Element("", {})

    def sign_in(self, name: str, password: str | None = None) -> Element:
        self.open("/sign-in")
        return self.send("/sign-in", name=name, password=password or password_of(name))


@pytest.fixture(scope="session")
def kept(databases: Databases) -> Kept:
    """Make the store once; each test works on a copy."""
    return invented.make_store(databases.new())


@pytest.fixture
def url(kept: Kept, databases: Databases) -> Iterator[str]:
    url = databases.copy_of(kept.url)
    yield url
    databases.drop(url)


@pytest.fixture
def app(url: str) -> Iterator[Flask]:
    app = invented.application(url)
    yield app
    invented.close(app)


@pytest.fixture
def visitor(app: Flask) -> Person:
    return Person(app.test_client())


SignedIn = Callable[[str], Person]


@pytest.fixture
def signed_in(app: Flask) -> SignedIn:
    def sign_in(name: str) -> Person:
        person = Person(app.test_client())
        person.sign_in(name)
        assert person.status == 200
        return person

    return sign_in


@pytest.fixture
def reviewer(signed_in: SignedIn) -> Person:
    return signed_in("reviewer")


@pytest.fixture
def author(signed_in: SignedIn) -> Person:
    return signed_in("author")
