"""Failed attempts counted in the store, so that they outlive a restart and hold for every worker.

The first few failures cost nothing, since people mistype; then each one doubles the wait, up to a limit. A
subject is an account's name, whether there is such an account or not, or the address that attempts come from.
Failures are forgotten one by one, so that those of many people's many days never add up to a wait.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from datetime import datetime, timedelta

from sqlalchemy.orm import Session

from service.records.errors import TooManyAttempts
from service.records.tables.accounts import Throttle

FREE_FAILURES = {"account": 5, "source": 30}
"""Failures without a wait.

OWASP ASVS 5.0, 6.3.1 asks for a limit and leaves the number open: common practice. An address has more,
since a control room may have one address for all.
"""

FIRST_WAIT = timedelta(seconds=30)
LONGEST_WAIT = timedelta(minutes=15)
ONE_FORGOTTEN_EVERY = timedelta(hours=1)
"""Common practice. Whoever waits for it has fewer tries a day than by waiting LONGEST_WAIT after each one."""


@dataclass(frozen=True, slots=True)
class Counted:
    """An attempt that was counted as failed, and what was known of its subject before it."""

    subject: str
    failures: int
    at: datetime
    failures_before: int
    last_failed_before: datetime | None


def of_account(name: str) -> str:
    """Return the subject of an account's name."""
    return f"account:{name.casefold()[:200]}"


def of_source(source: str) -> str:
    """Return the subject of the address that attempts come from."""
    return f"source:{source[:200]}"


def check(session: Session, subject: str, now: datetime) -> None:
    """Raise TooManyAttempts while the subject has to wait. Reads only."""
    row = session.get(Throttle, subject)
    if row is None or row.blocked_until is None:
        return
    wait = row.blocked_until - now
    # a longer one was counted by a clock that ran ahead
    if timedelta(0) < wait <= LONGEST_WAIT:
        wait_s = math.ceil(wait.total_seconds())
        raise TooManyAttempts("there were too many failed attempts; wait before the next one", wait_s)


def count(session: Session, subject: str, now: datetime) -> Counted:
    """Count a failed attempt; `take_back` takes what is returned."""
    row = session.get(Throttle, subject)
    last, before = (row.last_failed_at, row.failures) if row is not None else (None, 0)
    if row is None:
        row = Throttle(subject=subject, failures=0, last_failed_at=now)
        session.add(row)
    # no fewer where the clock was set back
    forgotten = max(0, (now - row.last_failed_at) // ONE_FORGOTTEN_EVERY)
    row.failures = max(0, row.failures - forgotten) + 1
    row.last_failed_at = now
    beyond = row.failures - FREE_FAILURES[subject.partition(":")[0]]
    # 2^10 half minutes are past the longest wait
    row.blocked_until = now + min(FIRST_WAIT * 2 ** min(beyond, 10), LONGEST_WAIT) if beyond >= 0 else None
    session.flush()
    return Counted(subject, row.failures, now, before, last)


def forget(session: Session, subject: str) -> None:
    """Forget a subject's failures after a success."""
    row = session.get(Throttle, subject)
    if row is not None:
        session.delete(row)
        session.flush()


def take_back(session: Session, counted: Counted) -> None:
    """Take back an attempt that was counted before it turned out to be right.

    Nothing is left of it, its wait included, unless others have failed meanwhile: their wait stays.
    """
    row = session.get_one(Throttle, counted.subject)
    if (row.failures, row.last_failed_at) != (counted.failures, counted.at):
        row.failures -= 1
    elif counted.last_failed_before is None:
        session.delete(row)
    else:
        row.failures, row.last_failed_at = counted.failures_before, counted.last_failed_before
        row.blocked_until = None
    session.flush()
