"""The tables of what was: positions, changes, versions, assessments, findings and events.

The five tables of the past are append-only; triggers refuse all else. They carry no foreign keys,
since what they tell of may be gone.
"""

from datetime import datetime

from sqlalchemy import ForeignKeyConstraint, Index, UniqueConstraint, true
from sqlalchemy.orm import Mapped, declared_attr, mapped_column

from service.store.tables.row import Base, Json, RecordId, one_of

SEVERITIES = ("critical", "major", "minor", "observation")
FINDING_STATES = ("open", "acknowledged", "accepted", "cleared")


class Head(Base):
    """Where a site's history stands; ``installation`` is the head of what belongs to no site."""

    __tablename__ = "head"
    __table_args__ = ({"sqlite_strict": True},)

    site_id: Mapped[RecordId] = mapped_column(primary_key=True)
    position: Mapped[int]
    recorded_at: Mapped[datetime]
    chain_hash: Mapped[str]
    wanted_position: Mapped[int]


class Change(Base):
    """One step of a site's history."""

    __tablename__ = "change"
    __table_args__ = (
        Index("ix_change_site_id_recorded_at", "site_id", "recorded_at"),
        {"sqlite_strict": True},
    )

    site_id: Mapped[RecordId] = mapped_column(primary_key=True)
    position: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    recorded_at: Mapped[datetime]
    stated_at: Mapped[datetime | None]
    key_id: Mapped[str | None]
    request_id: Mapped[str | None]
    operation: Mapped[str]
    reason: Mapped[str | None]
    wants: Mapped[bool]
    entry: Mapped[bytes]
    chain_hash: Mapped[str]


Index(
    "ix_change_wanted",
    Change.site_id,
    Change.position,
    sqlite_where=Change.wants == true(),
    postgresql_where=Change.wants == true(),
)


class RecordVersion(Base):
    """A record as it stood from a position on; no body: removed."""

    __tablename__ = "record_version"
    __table_args__ = (
        Index("ix_record_version_of_site", "site_id", "kind", "record_id", "from_position"),
        Index("ix_record_version_by_position", "site_id", "from_position"),
        {"sqlite_strict": True},
    )

    record_id: Mapped[RecordId] = mapped_column(primary_key=True)
    revision: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    kind: Mapped[str]
    site_id: Mapped[RecordId | None]
    from_position: Mapped[int]
    schema: Mapped[int]
    body: Mapped[bytes | None]


class AssessmentVersion(Base):
    """A room as it was judged from a position on."""

    __tablename__ = "assessment_version"
    __table_args__ = (
        Index("ix_assessment_version_by_position", "site_id", "from_position"),
        {"sqlite_strict": True},
    )

    room_id: Mapped[RecordId] = mapped_column(primary_key=True)
    from_position: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)
    site_id: Mapped[RecordId]
    assessed_at: Mapped[datetime]
    basis_id: Mapped[RecordId]
    basis_revision: Mapped[int]
    method_version: Mapped[str]
    inputs: Mapped[bytes]
    results: Mapped[bytes]
    status: Mapped[bytes]
    turns_at: Mapped[datetime | None]
    cause: Mapped[str]
    failed: Mapped[bool]


class RoomState(Base):
    """The newest assessment of a room, as far as rooms are sought by it."""

    __tablename__ = "room_state"
    __table_args__ = (
        ForeignKeyConstraint(
            ["site_id", "room_id"], ["room.site_id", "room.id"], ondelete="CASCADE"
        ),
        {"sqlite_strict": True},
    )

    room_id: Mapped[RecordId] = mapped_column(primary_key=True)
    site_id: Mapped[RecordId] = mapped_column(index=True)
    position: Mapped[int]
    turns_at: Mapped[datetime | None] = mapped_column(index=True)
    method_version: Mapped[str]
    failed: Mapped[bool]
    standing: Mapped[str | None]
    worst_oxygen_pct: Mapped[float | None]
    basis_id: Mapped[RecordId]
    basis_revision: Mapped[int]


class _FindingColumns:
    """What a finding is at one moment."""

    site_id: Mapped[RecordId]
    room_id: Mapped[RecordId]
    rule: Mapped[str]
    family: Mapped[str]
    subject_kind: Mapped[str]
    subject_id: Mapped[RecordId]
    subject_tag: Mapped[str | None]
    gas: Mapped[str | None]
    position: Mapped[int]
    state: Mapped[str]
    severity: Mapped[str]
    measure: Mapped[float | None]
    limit: Mapped[float | None]
    worse_is: Mapped[str]
    statement: Mapped[str]
    evidence: Mapped[Json]
    remedy: Mapped[str | None]
    method: Mapped[str]
    source: Mapped[str]
    opened_at: Mapped[datetime]
    changed_at: Mapped[datetime]
    cleared_at: Mapped[datetime | None]
    owner: Mapped[str | None]
    due_on: Mapped[str | None]
    expires_at: Mapped[datetime | None]
    reason: Mapped[str | None]
    key_id: Mapped[str | None]

    @declared_attr.directive
    @classmethod
    def __table_args__(cls) -> tuple[object, ...]:
        return (
            *cls._indexes(),
            one_of("state", FINDING_STATES),
            one_of("severity", SEVERITIES),
            one_of("worse_is", ("lower", "higher")),
            {"sqlite_strict": True},
        )

    @classmethod
    def _indexes(cls) -> tuple[Index, ...]:
        return ()


class Finding(_FindingColumns, Base):
    """A finding as it stands; it outlives its room and its site, cleared."""

    __tablename__ = "finding"

    id: Mapped[RecordId] = mapped_column(primary_key=True)
    number: Mapped[int]

    @classmethod
    def _indexes(cls) -> tuple[Index, ...]:
        return (
            Index("ix_finding_identity", "room_id", "rule", "subject_id", "gas"),
            Index("ix_finding_of_site", "site_id", "state", "severity"),
        )


class FindingVersion(_FindingColumns, Base):
    """A finding as it stood from a position on."""

    __tablename__ = "finding_version"

    id: Mapped[RecordId] = mapped_column(primary_key=True)
    number: Mapped[int] = mapped_column(primary_key=True, autoincrement=False)

    @classmethod
    def _indexes(cls) -> tuple[Index, ...]:
        return (
            Index("ix_finding_version_of_site", "site_id", "position"),
            Index("ix_finding_version_of_room", "room_id", "position"),
        )


class Event(Base):
    """Something that happened, as it is told to subscribers."""

    __tablename__ = "event"
    __table_args__ = (
        UniqueConstraint("site_id", "position", "number"),
        UniqueConstraint("feed_no"),
        {"sqlite_strict": True},
    )

    id: Mapped[RecordId] = mapped_column(primary_key=True)
    site_id: Mapped[RecordId]
    position: Mapped[int]
    number: Mapped[int]
    subject: Mapped[str]
    type: Mapped[str]
    body: Mapped[bytes]
    feed_no: Mapped[int | None]


# The rows that wait for the sequencer, which looks for them many times a second.
Index(
    "ix_event_waiting",
    Event.site_id,
    sqlite_where=Event.feed_no.is_(None),
    postgresql_where=Event.feed_no.is_(None),
)
