"""What was last said of rooms, and all that one change of a site left: for changes and proofs."""

from collections.abc import Iterable
from dataclasses import dataclass
from datetime import datetime
from typing import Any

from sqlalchemy import Connection, select

from service.store.findings import NAMES
from service.store.history import StoredAssessment, assessment_of_row
from service.store.parts import in_parts
from service.store.scope import Scope, within
from service.store.tables.registry import (
    ASSESSMENT_VERSION,
    FINDING,
    FINDING_VERSION,
    ROOM_STATE,
)


@dataclass(frozen=True, slots=True)
class RoomState:
    """The newest assessment of a room, as far as the next one is compared with it."""

    room_id: str
    site_id: str
    position: int
    turns_at: datetime | None
    method_version: str
    failed: bool
    standing: str
    worst_oxygen_pct: float | None


_STATE_COLUMNS = [ROOM_STATE.c[name] for name in RoomState.__slots__]


def room_states(scope: Scope, connection: Connection, room_ids: Iterable[str]) -> list[RoomState]:
    """Return what was last said of rooms; those never judged are left out."""
    found: list[RoomState] = []
    for some in in_parts(room_ids):
        query = select(*_STATE_COLUMNS).where(ROOM_STATE.c.room_id.in_(some))
        rows = connection.execute(within(scope, query, ROOM_STATE.c.site_id))
        found += [RoomState(**row._mapping) for row in rows]
    return found


def assessments_from(
    scope: Scope, connection: Connection, site_id: str, position: int
) -> list[StoredAssessment]:
    """Return the assessments that a change of a site left, in record order."""
    table = ASSESSMENT_VERSION
    query = select(table).where(table.c.site_id == site_id, table.c.from_position == position)
    ordered = within(scope, query, table.c.site_id).order_by(table.c.room_id)
    return [assessment_of_row(row) for row in connection.execute(ordered)]


def findings_from(
    scope: Scope, connection: Connection, site_id: str, position: int
) -> list[dict[str, Any]]:
    """Return the versions of findings that a change of a site left."""
    table = FINDING_VERSION
    query = select(*(table.c[name] for name in NAMES)).where(
        table.c.site_id == site_id, table.c.position == position
    )
    ordered = within(scope, query, table.c.site_id).order_by(table.c.id, table.c.number)
    return [dict(row) for row in connection.execute(ordered).mappings()]


def live_findings(scope: Scope, connection: Connection, site_id: str) -> list[dict[str, Any]]:
    """Return the findings of a site as they are, cleared ones too."""
    query = select(*(FINDING.c[name] for name in NAMES)).where(FINDING.c.site_id == site_id)
    ordered = within(scope, query, FINDING.c.site_id).order_by(FINDING.c.id)
    return [dict(row) for row in connection.execute(ordered).mappings()]
