"""Where each site's history stands, and which position a moment means."""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any, Final

from sqlalchemy import Connection, Row, Select, bindparam, func, select, true

from service.store.scope import Scope, within
from service.store.tables.registry import CHANGE, HEAD

INSTALLATION: Final = "installation"
"""The head of what belongs to no site: shared bases and fluids, keys."""

BEFORE_ALL: Final = datetime(1970, 1, 1, tzinfo=UTC)
"""When a head that has not moved yet was recorded."""

NO_HASH: Final = "0" * 64
"""What the first entry of a chain is chained to."""


@dataclass(frozen=True, slots=True)
class Head:
    """The end of a site's history; ``wanted_position`` is the last change left to the sweep."""

    site_id: str
    position: int
    recorded_at: datetime
    chain_hash: str
    wanted_position: int


_HEAD = select(HEAD).where(HEAD.c.site_id == bindparam("site"))
_HEADS = (
    select(HEAD)
    .where(HEAD.c.site_id.in_(bindparam("some", expanding=True)))
    .order_by(HEAD.c.site_id)
)
_LOCKED = _HEADS.with_for_update()
_POSITION = (
    select(func.max(CHANGE.c.position))
    .where(CHANGE.c.site_id == bindparam("site"))
    .where(CHANGE.c.recorded_at <= bindparam("moment"))
)
_WANTED = (
    select(func.max(CHANGE.c.position))
    .where(CHANGE.c.site_id == bindparam("site"))
    .where(CHANGE.c.position <= bindparam("most"))
    .where(CHANGE.c.wants == true())
)


def head_of(scope: Scope, connection: Connection, site_id: str) -> Head | None:
    """Return the head of a site; none before its first change."""
    if not sees_head(scope, site_id):
        return None
    row = connection.execute(_HEAD, {"site": site_id}).one_or_none()
    return None if row is None else _head(row)


def heads_of(scope: Scope, connection: Connection) -> list[Head]:
    """Return the heads of all sites of a scope, in id order."""
    query = within(scope, select(HEAD), HEAD.c.site_id).order_by(HEAD.c.site_id)
    return [_head(row) for row in connection.execute(query)]


def position_at(scope: Scope, connection: Connection, site_id: str, moment: datetime) -> int:
    """Return the position at which a site stood at a moment; 0 before its first change."""
    return _greatest(scope, connection, _POSITION, site_id, {"moment": moment})


def wanted_at(scope: Scope, connection: Connection, site_id: str, position: int) -> int:
    """Return the last change up to a position that was left to the sweep; 0: none."""
    return _greatest(scope, connection, _WANTED, site_id, {"most": position})


def sees_head(scope: Scope, site_id: str) -> bool:
    """Say whether a head may be seen; that of the installation is shared like what it counts."""
    return site_id == INSTALLATION or scope.sees(site_id)


def heads_for_writing(
    connection: Connection, site_ids: Iterable[str], *, lock: bool
) -> dict[str, Head]:
    """Return the heads of sites in id order, locked until the transaction ends."""
    rows = connection.execute(_LOCKED if lock else _HEADS, {"some": sorted(site_ids)})
    return {row.site_id: _head(row) for row in rows}


def _greatest(
    scope: Scope,
    connection: Connection,
    query: Select[int],
    site_id: str,
    values: Mapping[str, Any],
) -> int:
    if not sees_head(scope, site_id):
        return 0
    return connection.execute(query, {"site": site_id, **values}).scalar_one() or 0


def _head(row: Row[Any]) -> Head:
    return Head(row.site_id, row.position, row.recorded_at, row.chain_hash, row.wanted_position)
