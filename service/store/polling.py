"""Where a room's newest assessment stands: what a replica asks before it answers from memory."""

from dataclasses import dataclass

from sqlalchemy import Connection, bindparam, select

from service.store.scope import Scope
from service.store.tables.registry import HEAD, ROOM_STATE


@dataclass(frozen=True, slots=True)
class RoomPosition:
    """The position of a room's newest assessment, and the last one wanted of its site."""

    site_id: str
    position: int
    wanted_position: int


def room_position(scope: Scope, connection: Connection, room_id: str) -> RoomPosition | None:
    """Return where a room's newest assessment stands."""
    row = connection.execute(_POSITION, {"room": room_id}).one_or_none()
    if row is None or not scope.sees(row.site_id):
        return None
    return RoomPosition(row.site_id, row.position, row.wanted_position)


_POSITION = (
    select(ROOM_STATE.c.site_id, ROOM_STATE.c.position, HEAD.c.wanted_position)
    .join(HEAD, HEAD.c.site_id == ROOM_STATE.c.site_id)
    .where(ROOM_STATE.c.room_id == bindparam("room"))
)
