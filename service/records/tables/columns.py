"""What all tables share: names of constraints, column types, and the column that ties a row to the history.

Floats stand in no column: they live in bytes columns of canonical JSON, where they keep their bits.
"""

from __future__ import annotations

from datetime import UTC, datetime
from typing import Any

from sqlalchemy import BigInteger, DateTime, Dialect, ForeignKey, Integer, LargeBinary, MetaData, String, Text
from sqlalchemy.orm import DeclarativeBase, Mapped, mapped_column
from sqlalchemy.types import TypeDecorator

NAMES = {
    "ix": "ix_%(table_name)s_%(column_0_N_name)s",
    "uq": "uq_%(table_name)s_%(column_0_N_name)s",
    "ck": "ck_%(table_name)s_%(constraint_name)s",
    "fk": "fk_%(table_name)s_%(column_0_N_name)s",
    "pk": "pk_%(table_name)s",
}
"""Every constraint has a name, so that a migration can speak of it on both databases."""


class UtcTime(TypeDecorator[datetime]):
    """A time in UTC. SQLite drops the offset, so that it is added again on the way out."""

    impl = DateTime(timezone=True)
    cache_ok = True

    def process_bind_param(self, value: datetime | None, dialect: Dialect) -> datetime | None:
        """Turn an aware time into UTC; a naive one is a fault of the caller."""
        if value is None:
            return None
        if value.tzinfo is None:
            raise ValueError("a time without its offset from UTC")
        return value.astimezone(UTC)

    def process_result_value(self, value: datetime | None, dialect: Dialect) -> datetime | None:
        """Return an aware time in UTC."""
        if value is None:
            return None
        return value.replace(tzinfo=UTC) if value.tzinfo is None else value.astimezone(UTC)


Identifier = String(32)
"""A UUID as 32 hex digits."""

DigestText = String(64)
"""SHA-256 as 64 lower-case hex digits."""

KeyText = String(44)
"""A raw Ed25519 public key in base64."""

SignatureText = String(88)
"""An Ed25519 signature in base64."""

Number = BigInteger().with_variant(Integer, "sqlite")
"""A count. SQLite's INTEGER has 64 bits, and only by that name is it the row's own number."""


class Base(DeclarativeBase):
    """The one collection of tables."""

    metadata = MetaData(naming_convention=NAMES)
    type_annotation_map: dict[Any, Any] = {  # noqa: RUF012  read by sqlalchemy in this form
        str: Text,
        bytes: LargeBinary,
        datetime: UtcTime,
    }


class Kept:
    """A row that is inserted once and never changed; its columns stand in the entry `event_number` too."""

    event_number: Mapped[int] = mapped_column(Number, ForeignKey("history_events.number"), index=True)
