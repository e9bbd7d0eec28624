"""What happens round every handler: who asks, what was sent, one transaction, one answer.

A handler becomes an operation by `reads`, `changes` or `computes`. What it declares there is what the
request is read as, and what the API description says of it.
"""

from __future__ import annotations

import logging
from collections.abc import Callable
from dataclasses import dataclass
from datetime import datetime
from functools import partial
from typing import Any, Concatenate, TypeVar

from flask import Response, request
from sqlalchemy.orm import Session

from service.api import answers, bodies, idempotency, queries
from service.api.answers import Answer
from service.api.credentials import bearer_token
from service.api.problems import ProblemType
from service.api.queries import NoQuery
from service.context import note_account, services
from service.documents import reading
from service.records import tokens
from service.records.database import CANNOT_BE_USED
from service.records.errors import NotIndependent, SigningRefused
from service.records.roles import Actor

LOG = logging.getLogger("service.api")

DocumentT = TypeVar("DocumentT")
QueryT = TypeVar("QueryT")
PreparedT = TypeVar("PreparedT")

Reader = Callable[[], DocumentT]
"""Reads the body as its dataclass when called. A handler calls it after the checks for 404 and 403, since
what it raises (InvalidDocument, every wrong field) is 422."""

Variables = dict[str, Any]
"""The variables of an address, by name."""


@dataclass(frozen=True, kw_only=True, slots=True)
class Call:
    """Who asks, at which time, in which transaction."""

    session: Session
    actor: Actor
    now: datetime


Trace = Callable[[Call, SigningRefused | NotIndependent, Variables], None]
"""Writes what a refused signing must leave behind."""


@dataclass(frozen=True, kw_only=True)
class Operation:
    """A handler with what it declares. Flask calls it as a view."""

    handler: Callable[..., Answer]
    answer: type | None
    """What it answers with, or the items of the list; None where that is no JSON of ours."""
    status: int = 200
    a_list: bool = False
    media_types: tuple[str, ...] = ("application/json",)
    refuses: tuple[ProblemType, ...] = ()
    """What it answers with beside the refusals of every operation of its kind."""

    @property
    def __name__(self) -> str:
        """The handler's name, which becomes the endpoint's."""
        return self.handler.__name__

    @property
    def summary(self) -> str:
        """The first line of the handler's docstring."""
        return (self.handler.__doc__ or "").splitlines()[0]


@dataclass(frozen=True, kw_only=True)
class Reading(Operation):
    """Answers from one transaction that cannot write."""

    query: type[Any] = NoQuery

    def __call__(self, **path: Any) -> Response:
        """Handle one request."""
        with services().database.reading() as session:
            who = _authenticate(session)
            bodies.check_no_body(request)
            query = queries.read(self.query, request.args)
            answer = self.handler(_call(session, who), query, **path)
        _note_use(who)
        return answers.response(answer)


@dataclass(frozen=True, kw_only=True)
class Changing(Operation):
    """Prepares in a transaction that cannot write, then changes and answers in one that can."""

    body: type
    prepare: Callable[..., Any]
    trace: Trace | None = None

    def __call__(self, **path: Any) -> Response:
        """Handle one request; under an Idempotency-Key the first answer is given again."""
        try:
            return answers.response(self._answer(path))
        except (SigningRefused, NotIndependent) as refusal:
            self._leave_trace(refusal, path)
            raise

    def _answer(self, path: Variables) -> Answer:
        database = services().database
        with database.reading() as session:
            who = _authenticate(session)
            read, key = _body(self.body)
            first = idempotency.first_answer(session, who.actor, key, database.now())
            if first is not None:
                return first
            prepared = self.prepare(_call(session, who), read, **path)
        _note_use(who)
        with database.writing() as session:
            # again, since a role may have been taken away meanwhile
            call = _call(session, _authenticate(session))
            make = partial(self.handler, call, prepared, **path)
            return idempotency.once(session, call.actor, key, call.now, make)

    def _leave_trace(self, refusal: SigningRefused | NotIndependent, path: Variables) -> None:
        if self.trace is not None:
            with services().database.writing() as session:
                self.trace(_call(session, _authenticate(session)), refusal, path)


@dataclass(frozen=True, kw_only=True)
class Computing(Operation):
    """Computes in no transaction, so that it holds up nobody; writes only where a key came along."""

    body: type

    def __call__(self, **path: Any) -> Response:
        """Handle one request."""
        database = services().database
        with database.reading() as session:
            who = _authenticate(session)
            read, key = _body(self.body)
            first = idempotency.first_answer(session, who.actor, key, database.now())
        _note_use(who)
        return answers.response(first or self._computed(who.actor, key, self.handler(read, **path)))

    def _computed(self, actor: Actor, key: idempotency.Key | None, answer: Answer) -> Answer:
        if key is None:
            return answer
        with services().database.writing() as session:
            return idempotency.once(session, actor, key, services().database.now(), lambda: answer)


def reads(
    query: type[QueryT],
    answer: type | None,
    *,
    a_list: bool = False,
    media_types: tuple[str, ...] = ("application/json",),
    refuses: tuple[ProblemType, ...] = (),
) -> Callable[[Callable[Concatenate[Call, QueryT, ...], Answer]], Reading]:
    """Make a handler of `call, query` and the address's variables an operation that only reads."""
    return lambda handler: Reading(
        handler=handler, query=query, answer=answer, a_list=a_list, media_types=media_types, refuses=refuses
    )


def changes(
    body: type[DocumentT],
    answer: type,
    *,
    status: int = 201,
    trace: Trace | None = None,
    refuses: tuple[ProblemType, ...] = (),
) -> Callable[[Callable[Concatenate[Call, Reader[DocumentT], ...], Answer]], Changing]:
    """Make a handler of `call, read` and the address's variables an operation that changes the records."""
    return lambda handler: Changing(
        handler=handler,
        body=body,
        answer=answer,
        status=status,
        prepare=_pass_on,
        trace=trace,
        refuses=refuses,
    )


def changes_prepared(
    body: type[DocumentT],
    answer: type,
    prepare: Callable[Concatenate[Call, Reader[DocumentT], ...], PreparedT],
    *,
    trace: Trace | None = None,
) -> Callable[[Callable[Concatenate[Call, PreparedT, ...], Answer]], Changing]:
    """Make a handler of `call, prepared` an operation whose long work `prepare` does, holding up nobody."""
    return lambda handler: Changing(
        handler=handler, body=body, answer=answer, status=201, prepare=prepare, trace=trace
    )


def computes(
    body: type[DocumentT], answer: type
) -> Callable[[Callable[[Reader[DocumentT]], Answer]], Computing]:
    """Make a handler of `read` an operation that uses no records."""
    return lambda handler: Computing(handler=handler, body=body, answer=answer)


def _pass_on(_call: Call, read: Reader[DocumentT], **_path: Any) -> Reader[DocumentT]:
    return read


def _authenticate(session: Session) -> tokens.Authenticated:
    who = tokens.authenticate(session, bearer_token(request), services().database.now())
    note_account(who.actor.name)
    return who


def _call(session: Session, who: tokens.Authenticated) -> Call:
    return Call(session=session, actor=who.actor, now=services().database.now())


def _body(document_type: type) -> tuple[Reader[Any], idempotency.Key | None]:
    queries.read(NoQuery, request.args)
    plain = bodies.plain_body(request)
    return partial(reading.read, document_type, plain), idempotency.key_of(request, plain)


def _note_use(who: tokens.Authenticated) -> None:
    if who.use_is_due:
        try:
            with services().database.writing() as session:
                tokens.note_use(session, who.token_id, services().database.now())
        except CANNOT_BE_USED:
            # a note that serves the administrator's list only; the request itself can be answered without it
            LOG.warning("the use of token %s could not be noted", who.token_id, exc_info=True)
