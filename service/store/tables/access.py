"""The tables of keys, of answers kept for repeated requests, and of the installation."""

from datetime import datetime

from sqlalchemy import CheckConstraint, UniqueConstraint
from sqlalchemy.orm import Mapped, mapped_column

from service.store.tables.row import Base, Json, RecordId, one_of

ROLES = ("reader", "recorder", "auditor", "administrator")


class Key(Base):
    """A key; its text is never kept, only the digest."""

    __tablename__ = "key"
    __table_args__ = (
        UniqueConstraint("prefix"),
        UniqueConstraint("digest"),
        one_of("role", ROLES),
        {"sqlite_strict": True},
    )

    id: Mapped[RecordId] = mapped_column(primary_key=True)
    prefix: Mapped[str]
    digest: Mapped[str]
    holder: Mapped[str]
    role: Mapped[str]
    sites: Mapped[Json | None]
    created_at: Mapped[datetime]
    expires_at: Mapped[datetime | None]
    revoked_at: Mapped[datetime | None]
    last_used_at: Mapped[datetime | None]
    replaced_by: Mapped[RecordId | None]


class Answer(Base):
    """What was answered to a request with an Idempotency-Key; no body: it held a secret."""

    __tablename__ = "answer"
    __table_args__ = ({"sqlite_strict": True},)

    key_id: Mapped[str] = mapped_column(primary_key=True)
    path: Mapped[str] = mapped_column(primary_key=True)
    token: Mapped[str] = mapped_column(primary_key=True)
    fingerprint: Mapped[str]
    status: Mapped[int]
    headers: Mapped[Json]
    body: Mapped[bytes | None]
    kept_at: Mapped[datetime] = mapped_column(index=True)


class Installation(Base):
    """The one row about the database itself."""

    __tablename__ = "installation"
    __table_args__ = (
        UniqueConstraint("singleton"),
        CheckConstraint("singleton = 1", name="one_row"),
        {"sqlite_strict": True},
    )

    id: Mapped[RecordId] = mapped_column(primary_key=True)
    singleton: Mapped[int]
    lineage: Mapped[str]
    secret: Mapped[bytes]
    method_version: Mapped[str]
    created_at: Mapped[datetime]
