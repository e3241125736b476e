"""Which rooms are joined: by openings that air passes, or by a unit that blows back their air."""

from __future__ import annotations

from collections.abc import Iterable

from sqlalchemy import ColumnElement, Connection, and_, or_, select
from sqlalchemy import true as sql_true

from service.store.parts import in_parts
from service.store.scope import Scope, within
from service.store.tables.registry import TABLES, VENTILATION_UNIT_ROOM


def rooms_joined_to(scope: Scope, connection: Connection, room_ids: Iterable[str]) -> set[str]:
    """Return the rooms next to some rooms, these left out."""
    known = set(room_ids)
    found: set[str] = set()
    for some in in_parts(sorted(known)):
        found |= _by_openings(scope, connection, some) | _by_units(scope, connection, some)
    return found - known


def _by_openings(scope: Scope, connection: Connection, room_ids: Iterable[str]) -> set[str]:
    openings = TABLES["opening"]
    here, there = openings.c["room_id"], openings.c["other_room_id"]
    found: set[str] = set()
    for one, other in ((here, there), (there, here)):
        query = (
            select(other).where(one.in_(list(room_ids)), other.is_not(None), _passes()).distinct()
        )
        found |= set(connection.execute(within(scope, query, openings.c["site_id"])).scalars())
    return found


def _passes() -> ColumnElement[bool]:
    """Air passes what is not said to be shut, and what has a flow."""
    openings = TABLES["opening"]
    return or_(
        openings.c["normally_open"].is_(None),
        openings.c["normally_open"] == sql_true(),
        openings.c["exchange_flow_m3_h"] > 0.0,
        openings.c["net_flow_m3_h"] != 0.0,
    )


def _by_units(scope: Scope, connection: Connection, room_ids: Iterable[str]) -> set[str]:
    units, one = TABLES["ventilation-unit"], VENTILATION_UNIT_ROOM.alias()
    other = VENTILATION_UNIT_ROOM.alias()
    recirculates = and_(
        or_(units.c["arrangement"].is_(None), units.c["arrangement"] != "exhaust"),
        or_(units.c["outdoor_air_fraction"].is_(None), units.c["outdoor_air_fraction"] < 1.0),
    )
    query = (
        select(other.c["room_id"])
        .join(one, one.c["unit_id"] == other.c["unit_id"])
        .join(units, units.c["id"] == one.c["unit_id"])
        .where(one.c["room_id"].in_(list(room_ids)), recirculates)
        .distinct()
    )
    return set(connection.execute(within(scope, query, units.c["site_id"])).scalars())
