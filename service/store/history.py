"""What was: the changes of a site, the versions of its records, the assessments of its rooms.

Everything is kept under a position of a site's head, which each change moves by one.
"""

import hashlib
import json
import zlib
from collections.abc import Iterable
from dataclasses import dataclass, replace
from datetime import datetime
from typing import Any, Final, TypeAlias

import orjson
from sqlalchemy import Connection, Row, Select, bindparam, func, insert, or_, select, update

from service.store.heads import INSTALLATION, sees_head
from service.store.parts import in_parts
from service.store.records import Record, body, canonical, record_from_body
from service.store.rows import columns_of, field_names
from service.store.scope import Scope, within
from service.store.session import WriteSession
from service.store.tables.registry import (
    ASSESSMENT_VERSION,
    CHANGE,
    HEAD,
    RECORD_VERSION,
    ROOM_STATE,
    TABLES,
)
from service.store.upsert import insert_or_replace

_CHAINED: Final = b"rimeward-change-1\n"

SCHEMA: Final = 2
"""The form of the record bodies that are written now; 2 has openings, controls and more fields."""


@dataclass(frozen=True, slots=True)
class ChangeEntry:
    """One step of a site's history, chained to the one before."""

    site_id: str
    position: int
    recorded_at: datetime
    stated_at: datetime | None
    key_id: str | None
    request_id: str | None
    operation: str
    reason: str | None
    wants: bool
    """Whether rooms are left to the sweep, which brings them to this position."""
    entry: bytes
    chain_hash: str


@dataclass(frozen=True, slots=True)
class StoredAssessment:
    """How a room was judged from a position on; the status is a JSON object."""

    room_id: str
    site_id: str
    from_position: int
    assessed_at: datetime
    basis_id: str
    basis_revision: int
    method_version: str
    inputs: bytes
    results: bytes
    status: bytes
    turns_at: datetime | None
    cause: str
    failed: bool


Version: TypeAlias = tuple[Record | None, str, str, str | None, int, int]
"""The record or, where it was removed, none; its kind, id, site, revision and position."""


def chained(previous_hash: str, entry: bytes) -> str:
    """Return the hash of an entry and of all that came before it."""
    return hashlib.sha256(_CHAINED + bytes.fromhex(previous_hash) + entry).hexdigest()


def append_change(session: WriteSession, entry: ChangeEntry) -> None:
    """Append a change to a site whose head is locked, and move the head there.

    Raises
    ------
    ValueError
        The entry is not the next one of its site.
    """
    head = session.heads.get(entry.site_id)
    if head is None:
        raise ValueError("The head of the site is not locked.")
    if entry.position != head.position + 1 or entry.recorded_at <= head.recorded_at:
        raise ValueError(f"Position {entry.position} does not come next after {head.position}.")
    if entry.chain_hash != chained(head.chain_hash, entry.entry):
        raise ValueError("The entry is not chained to the one before it.")
    moved = replace(
        head,
        position=entry.position,
        recorded_at=entry.recorded_at,
        chain_hash=entry.chain_hash,
        wanted_position=entry.position if entry.wants else head.wanted_position,
    )
    session.connection.execute(_INSERT_CHANGE, columns_of(entry))
    session.connection.execute(_MOVE_HEAD, {**columns_of(moved), "of_site": head.site_id})
    session.move_head(moved)


def append_versions(session: WriteSession, versions: Iterable[Version]) -> None:
    """Append versions of records."""
    rows = [_version_row(*version) for version in versions]
    if rows:
        session.connection.execute(_INSERT_VERSION, rows)


def append_assessments(session: WriteSession, assessments: Iterable[StoredAssessment]) -> None:
    """Append assessments of rooms, each the newest of its room."""
    kept = list(assessments)
    if not kept:
        return
    session.connection.execute(_INSERT_ASSESSMENT, [_assessment_row(each) for each in kept])
    insert_or_replace(session.connection, ROOM_STATE, [_state_row(each) for each in kept])


def assessment_now(scope: Scope, connection: Connection, room_id: str) -> StoredAssessment | None:
    """Return the newest assessment of a room that is there."""
    row = connection.execute(_ASSESSMENT_NOW, {"room": room_id}).one_or_none()
    return _assessment_seen(scope, row)


def assessments_now(
    scope: Scope, connection: Connection, room_ids: Iterable[str]
) -> list[StoredAssessment]:
    """Return the newest assessments of rooms that are there, in record order."""
    found = []
    for some in in_parts(room_ids):
        query = within(scope, _NOW.where(ROOM_STATE.c.room_id.in_(some)), ROOM_STATE.c.site_id)
        found += [assessment_of_row(row) for row in connection.execute(query)]
    return sorted(found, key=lambda assessment: assessment.room_id)


def assessment_at(
    scope: Scope, connection: Connection, room_id: str, position: int
) -> StoredAssessment | None:
    """Return the assessment of a room that held at a position of its site."""
    values = {"room": room_id, "most": position}
    return _assessment_seen(scope, connection.execute(_ASSESSMENT_AT, values).one_or_none())


def assessments_of(
    scope: Scope, connection: Connection, room_id: str, *, after: int, limit: int
) -> list[StoredAssessment]:
    """Return the assessments of a room after a position, oldest first."""
    table = ASSESSMENT_VERSION
    query = select(table).where(table.c.room_id == room_id, table.c.from_position > after)
    query = within(scope, query, table.c.site_id).order_by(table.c.from_position).limit(limit)
    return [assessment_of_row(row) for row in connection.execute(query)]


def rooms_turning(scope: Scope, connection: Connection, moment: datetime, limit: int) -> list[str]:
    """Return the rooms whose judgement turns by itself up to a moment, oldest first."""
    query = select(ROOM_STATE.c.room_id).where(ROOM_STATE.c.turns_at <= moment)
    query = within(scope, query, ROOM_STATE.c.site_id)
    ordered = query.order_by(ROOM_STATE.c.turns_at, ROOM_STATE.c.room_id).limit(limit)
    return list(connection.execute(ordered).scalars())


def rooms_behind_wanted(
    scope: Scope, connection: Connection, method_version: str, limit: int
) -> list[tuple[str, str]]:
    """Return the site and room of rooms judged by another method, or before what is wanted.

    A room that was never judged is among them.
    """
    rooms, state = TABLES["room"], ROOM_STATE
    joined = rooms.outerjoin(state, state.c.room_id == rooms.c["id"]).outerjoin(
        HEAD, HEAD.c.site_id == rooms.c["site_id"]
    )
    behind = or_(
        state.c.room_id.is_(None),
        state.c.method_version != method_version,
        state.c.position < HEAD.c.wanted_position,
    )
    query = select(rooms.c["site_id"], rooms.c["id"]).select_from(joined).where(behind)
    query = within(scope, query, rooms.c["site_id"])
    ordered = query.order_by(rooms.c["site_id"], rooms.c["id"]).limit(limit)
    return [(row.site_id, row.id) for row in connection.execute(ordered)]


def record_at(
    scope: Scope, connection: Connection, kind: str, record_id: str, position: int
) -> Record | None:
    """Return a record as it stood at a position of its site."""
    values = {"record": record_id, "kind": kind, "most": position}
    return _record_seen(scope, connection.execute(_RECORD_AT, values).one_or_none())


def records_at(
    scope: Scope, connection: Connection, kind: str, site_id: str | None, position: int
) -> list[Record]:
    """Return the records of a site as they stood at a position, in record order.

    Without a site it is what was shared at a position of the installation's head.
    """
    if not scope.sees(site_id):
        return []
    table = RECORD_VERSION
    of_site = table.c.site_id.is_(None) if site_id is None else table.c.site_id == site_id
    newest = (
        select(table.c.record_id, func.max(table.c.revision).label("revision"))
        .where(of_site, table.c.kind == kind, table.c.from_position <= position)
        .group_by(table.c.record_id)
        .subquery()
    )
    query = (
        select(table)
        .join(
            newest,
            (newest.c.record_id == table.c.record_id) & (newest.c.revision == table.c.revision),
        )
        .where(table.c.body.is_not(None))
        .order_by(table.c.record_id)
    )
    return [_record(row) for row in connection.execute(query)]


def version_of(
    scope: Scope, connection: Connection, kind: str, record_id: str, revision: int
) -> Record | None:
    """Return one revision of a record; none where it is not there or is the removal."""
    values = {"record": record_id, "kind": kind, "revision": revision}
    return _record_seen(scope, connection.execute(_VERSION, values).one_or_none())


def changes_of(
    scope: Scope, connection: Connection, site_id: str, *, after: int, limit: int
) -> list[ChangeEntry]:
    """Return the changes of a site after a position, oldest first."""
    if not sees_head(scope, site_id):
        return []
    values = {"site": site_id, "after": after, "most": limit}
    return [ChangeEntry(**row._mapping) for row in connection.execute(_CHANGES, values)]


@dataclass(frozen=True, slots=True)
class RecordVersion:
    """A version as it is kept: the bytes of the body that was hashed; none: removed."""

    kind: str
    record_id: str
    site_id: str | None
    revision: int
    from_position: int
    schema: int
    body: bytes | None


def versions_of(
    scope: Scope, connection: Connection, site_id: str, position: int
) -> list[RecordVersion]:
    """Return the versions that began at a position of a site, in record order."""
    if not sees_head(scope, site_id):
        return []
    table = RECORD_VERSION
    of_site = table.c.site_id == site_id
    if site_id == INSTALLATION:
        of_site = table.c.site_id.is_(None)
    query = select(table).where(of_site, table.c.from_position == position)
    ordered = query.order_by(table.c.kind, table.c.record_id, table.c.revision)
    return [_version(row) for row in connection.execute(ordered)]


def _version_row(
    record: Record | None,
    kind: str,
    record_id: str,
    site_id: str | None,
    revision: int,
    position: int,
) -> dict[str, Any]:
    return {
        "record_id": record_id,
        "revision": revision,
        "kind": kind,
        "site_id": site_id,
        "from_position": position,
        "schema": SCHEMA,
        "body": None if record is None else zlib.compress(canonical(body(record))),
    }


def _version(row: Row[Any]) -> RecordVersion:
    packed = row.body
    return RecordVersion(
        kind=row.kind,
        record_id=row.record_id,
        site_id=row.site_id,
        revision=row.revision,
        from_position=row.from_position,
        schema=row.schema,
        body=None if packed is None else zlib.decompress(packed),
    )


def _record(row: Row[Any]) -> Record:
    record = record_from_body(row.kind, json.loads(zlib.decompress(row.body)))
    if row.schema == SCHEMA:
        return record
    # Nothing was known of the fields that an older form lacks.
    return replace(record, fields=dict.fromkeys(field_names(row.kind)) | dict(record.fields))


def _record_seen(scope: Scope, row: Row[Any] | None) -> Record | None:
    if row is None or row.body is None or not scope.sees(row.site_id):
        return None
    return _record(row)


def _assessment_row(assessment: StoredAssessment) -> dict[str, Any]:
    packed = {
        "inputs": zlib.compress(assessment.inputs),
        "results": zlib.compress(assessment.results),
    }
    return columns_of(assessment) | packed


def assessment_of_row(row: Row[Any]) -> StoredAssessment:
    """Unpack an assessment from its row."""
    values = dict(row._mapping)
    values["inputs"] = zlib.decompress(row.inputs)
    values["results"] = zlib.decompress(row.results)
    return StoredAssessment(**values)


def _assessment_seen(scope: Scope, row: Row[Any] | None) -> StoredAssessment | None:
    return None if row is None or not scope.sees(row.site_id) else assessment_of_row(row)


def _state_row(assessment: StoredAssessment) -> dict[str, Any]:
    status = orjson.loads(assessment.status)
    return {
        "room_id": assessment.room_id,
        "site_id": assessment.site_id,
        "position": assessment.from_position,
        "turns_at": assessment.turns_at,
        "method_version": assessment.method_version,
        "failed": assessment.failed,
        "standing": status["standing"],
        "worst_oxygen_pct": status["worst_oxygen_pct"],
        "basis_id": assessment.basis_id,
        "basis_revision": assessment.basis_revision,
    }


_INSERT_CHANGE = insert(CHANGE)
_INSERT_VERSION = insert(RECORD_VERSION)
_INSERT_ASSESSMENT = insert(ASSESSMENT_VERSION)
_MOVE_HEAD = (
    update(HEAD)
    .where(HEAD.c.site_id == bindparam("of_site"))
    .values(
        {
            name: bindparam(name)
            for name in ("position", "recorded_at", "chain_hash", "wanted_position")
        }
    )
)
_NOW: Select[*tuple[Any, ...]] = select(*ASSESSMENT_VERSION.c).join(
    ROOM_STATE,
    (ROOM_STATE.c.room_id == ASSESSMENT_VERSION.c.room_id)
    & (ROOM_STATE.c.position == ASSESSMENT_VERSION.c.from_position),
)
_ASSESSMENT_NOW = _NOW.where(ROOM_STATE.c.room_id == bindparam("room"))
_ASSESSMENT_AT = (
    select(ASSESSMENT_VERSION)
    .where(ASSESSMENT_VERSION.c.room_id == bindparam("room"))
    .where(ASSESSMENT_VERSION.c.from_position <= bindparam("most"))
    .order_by(ASSESSMENT_VERSION.c.from_position.desc())
    .limit(1)
)
_VERSION_OF = (
    select(RECORD_VERSION)
    .where(RECORD_VERSION.c.record_id == bindparam("record"))
    .where(RECORD_VERSION.c.kind == bindparam("kind"))
)
_VERSION = _VERSION_OF.where(RECORD_VERSION.c.revision == bindparam("revision"))
_RECORD_AT = (
    _VERSION_OF.where(RECORD_VERSION.c.from_position <= bindparam("most"))
    .order_by(RECORD_VERSION.c.revision.desc())
    .limit(1)
)
_CHANGES = (
    select(CHANGE)
    .where(CHANGE.c.site_id == bindparam("site"))
    .where(CHANGE.c.position > bindparam("after"))
    .order_by(CHANGE.c.position)
    .limit(bindparam("most"))
)
