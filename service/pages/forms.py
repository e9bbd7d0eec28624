"""What a person typed, kept until it is right, with the problems that stand in its way. Never a password."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field

from flask import request

SECRET = frozenset({"password", "present_password", "new_password", "again", "token"})
"""Fields that are never kept and never shown again."""


@dataclass(frozen=True, slots=True)
class Problem:
    """What is wrong, and at which field; no field: with the form as a whole."""

    sentence: str
    field: str = ""


@dataclass(frozen=True, slots=True)
class Form:
    """The texts of a form by field, and its problems."""

    texts: Mapping[str, str] = field(default_factory=dict)
    problems: tuple[Problem, ...] = ()

    def typed(self, name: str) -> str:
        """The text in a field, empty where nothing was typed."""
        return self.texts.get(name, "")

    def problem(self, name: str) -> str:
        """The problem at a field, empty where there is none."""
        return " ".join(problem.sentence for problem in self.problems if problem.field == name)

    def with_problems(self, problems: Iterable[Problem]) -> Form:
        """The same texts with these problems."""
        return Form(self.texts, tuple(problems))


def posted() -> Form:
    """The form that came with the request, without what is secret."""
    texts = {name: _lines(text) for name, text in request.form.items() if name not in SECRET}
    return Form(texts)


def queried() -> Form:
    """The search that stands in the address."""
    return Form({name: _lines(text) for name, text in request.args.items()})


def secret(name: str) -> str:
    """A secret field of the request, for immediate use."""
    return request.form.get(name, "")


def _lines(text: str) -> str:
    """A browser sends each line break as two characters; one is kept. U+0000 no person types, and PostgreSQL
    takes it in no text.
    """
    return text.replace("\0", "").replace("\r\n", "\n").replace("\r", "\n").strip()


def sentence(detail: str) -> str:
    """The detail of a refusal as a sentence."""
    return f"{detail[:1].upper()}{detail[1:]}{'' if detail.endswith('.') else '.'}"
