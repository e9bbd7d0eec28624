"""Working tables: who may sign in, by what, and how often it was tried.

The history tells of their changes.
"""

from __future__ import annotations

from datetime import datetime

from sqlalchemy import CheckConstraint, ForeignKey, LargeBinary, String
from sqlalchemy.orm import Mapped, mapped_column, relationship

from service.records.tables.columns import Base, DigestText, Identifier


class Account(Base):
    """A person who signs in. Never deleted, so that a name is never used twice."""

    __tablename__ = "accounts"

    id: Mapped[str] = mapped_column(Identifier, primary_key=True)
    name: Mapped[str] = mapped_column(String(40), unique=True)
    full_name: Mapped[str]
    password_hash: Mapped[str]
    created_at: Mapped[datetime]
    closed_at: Mapped[datetime | None]
    last_used_at: Mapped[datetime | None]
    reset_by: Mapped[str | None] = mapped_column(Identifier, ForeignKey("accounts.id"))
    """The administrator who reset the password, until another confirms it."""
    roles: Mapped[list[AccountRole]] = relationship(lazy="selectin", cascade="all, delete-orphan")
    areas: Mapped[list[AccountArea]] = relationship(lazy="selectin", cascade="all, delete-orphan")


class AccountRole(Base):
    """A role that an account has."""

    __tablename__ = "account_roles"
    __table_args__ = (
        CheckConstraint("role IN ('submitter', 'reviewer', 'auditor', 'administrator')", name="role"),
    )

    account_id: Mapped[str] = mapped_column(Identifier, ForeignKey("accounts.id"), primary_key=True)
    role: Mapped[str] = mapped_column(String(20), primary_key=True)


class AccountArea(Base):
    """An area that an account is limited to."""

    __tablename__ = "account_areas"

    account_id: Mapped[str] = mapped_column(Identifier, ForeignKey("accounts.id"), primary_key=True)
    area: Mapped[str] = mapped_column(String(200), primary_key=True)


class Token(Base):
    """A bearer token, by the SHA-256 of its secret."""

    __tablename__ = "tokens"

    id: Mapped[str] = mapped_column(Identifier, primary_key=True)
    account_id: Mapped[str] = mapped_column(Identifier, ForeignKey("accounts.id"), index=True)
    secret_sha256: Mapped[bytes] = mapped_column(LargeBinary(32))
    note: Mapped[str]
    issued_at: Mapped[datetime]
    revoked_at: Mapped[datetime | None]
    last_used_at: Mapped[datetime | None]


class SignInSession(Base):
    """A session of a browser, by the SHA-256 of the secret in its cookie."""

    __tablename__ = "sign_in_sessions"

    id: Mapped[str] = mapped_column(DigestText, primary_key=True)
    account_id: Mapped[str] = mapped_column(Identifier, ForeignKey("accounts.id"), index=True)
    csrf_secret: Mapped[bytes] = mapped_column(LargeBinary(32))
    started_at: Mapped[datetime]
    last_used_at: Mapped[datetime]
    ended_at: Mapped[datetime | None]


class Throttle(Base):
    """Failed attempts of one subject: an account's name, or where attempts come from."""

    __tablename__ = "throttles"

    subject: Mapped[str] = mapped_column(String(240), primary_key=True)
    failures: Mapped[int]
    last_failed_at: Mapped[datetime]
    blocked_until: Mapped[datetime | None]


class IdempotencyKey(Base):
    """The first answer to a request, under the key that its sender chose."""

    __tablename__ = "idempotency_keys"

    account_id: Mapped[str] = mapped_column(Identifier, ForeignKey("accounts.id"), primary_key=True)
    key: Mapped[str] = mapped_column(String(200), primary_key=True)
    fingerprint: Mapped[str] = mapped_column(DigestText)
    status: Mapped[int]
    location: Mapped[str | None]
    etag: Mapped[str | None]
    body: Mapped[bytes]
    created_at: Mapped[datetime]
