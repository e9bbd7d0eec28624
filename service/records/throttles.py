"""Failed attempts counted in the store, so that they outlive a restart and hold for every worker.

The first few failures cost nothing, since people mistype; then each one doubles the wait, up to a limit. A
subject is an account's name, whether there is such an account or not, or the address that attempts come from.
"""

from __future__ import annotations

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
FORGOTTEN_AFTER = timedelta(hours=24)


def of_account(name: str) -> str:
    """Return the subject of an account's name."""
    return f"account:{name.casefold()[:200]}"


def of_source(source: str) -> str:
    """Return the subject of the address that attempts come from."""
    return f"source:{source[:200]}"


def check(session: Session, subject: str, now: datetime) -> None:
    """Raise TooManyAttempts while the subject has to wait. Reads only."""
    row = session.get(Throttle, subject)
    if row is not None and row.blocked_until is not None and now < row.blocked_until:
        wait_s = max(1, round((row.blocked_until - now).total_seconds()))
        raise TooManyAttempts("there were too many failed attempts; wait before the next one", wait_s)


def count(session: Session, subject: str, now: datetime) -> None:
    """Count a failed attempt."""
    row = session.get(Throttle, subject)
    if row is None:
        row = Throttle(subject=subject, failures=0, last_failed_at=now)
        session.add(row)
    elif now - row.last_failed_at > FORGOTTEN_AFTER:
        row.failures = 0
    row.failures += 1
    row.last_failed_at = now
    beyond = row.failures - FREE_FAILURES[subject.partition(":")[0]]
    # 2^10 half minutes are past the longest wait
    row.blocked_until = now + min(FIRST_WAIT * 2 ** min(beyond, 10), LONGEST_WAIT) if beyond >= 0 else None
    session.flush()


def forget(session: Session, subject: str) -> None:
    """Forget a subject's failures after a success."""
    row = session.get(Throttle, subject)
    if row is not None:
        session.delete(row)
        session.flush()


def take_back(session: Session, subject: str) -> None:
    """Take back the one attempt that was counted before it turned out to be right."""
    row = session.get(Throttle, subject)
    if row is not None:
        row.failures = max(0, row.failures - 1)
        row.blocked_until = (
            None if row.failures < FREE_FAILURES[subject.partition(":")[0]] else row.blocked_until
        )
        session.flush()
