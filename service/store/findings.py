"""Findings as they are and as they were; each is a plain mapping of its columns."""

from collections.abc import Iterable, Mapping
from datetime import datetime
from typing import Any, Final

from sqlalchemy import Connection, Select, exists, func, insert, or_, select

from service.clock import moment_of
from service.errors import FieldsRefused
from service.store.paging import LABEL, filtered, has_label, paged
from service.store.parts import in_parts
from service.store.scope import Scope, within
from service.store.session import WriteSession
from service.store.tables.registry import FINDING, FINDING_VERSION, TABLES
from service.store.upsert import insert_or_replace

NAMES: Final = tuple(FINDING_VERSION.columns.keys())
"""The columns of a finding."""

_OLDER_THAN: Final = "older_than"
_NEWER_THAN: Final = "newer_than"


def append_findings(session: WriteSession, rows: Iterable[Mapping[str, Any]]) -> None:
    """Append versions of findings, each the newest of its finding.

    Raises
    ------
    ValueError
        A row has other columns than a finding.
    """
    kept = [_whole(row) for row in rows]
    if not kept:
        return
    session.connection.execute(_INSERT, kept)
    # One statement cannot meet a row twice, so that the last version of each goes in.
    newest = {row["id"]: row for row in sorted(kept, key=lambda row: row["number"])}
    insert_or_replace(session.connection, FINDING, list(newest.values()))


def findings_of_rooms(
    scope: Scope, connection: Connection, room_ids: Iterable[str]
) -> list[dict[str, Any]]:
    """Return the newest finding of each identity in some rooms, open or cleared, in id order.

    An identity is the room, the rule, the subject and the gas.
    """
    newest: dict[tuple[Any, ...], dict[str, Any]] = {}
    for some in in_parts(room_ids):
        query = select(*FINDING.c).where(FINDING.c.room_id.in_(some))
        # Ids sort by the time at which they were made, so that the newest comes last.
        ordered = within(scope, query, FINDING.c.site_id).order_by(FINDING.c.id)
        for finding in _findings(connection, ordered):
            identity = ("room_id", "rule", "subject_kind", "subject_id", "gas")
            newest[tuple(finding[name] for name in identity)] = finding
    return sorted(newest.values(), key=lambda finding: str(finding["id"]))


def list_findings(
    scope: Scope,
    connection: Connection,
    filters: Mapping[str, Any],
    *,
    sort: str = "id",
    descending: bool = False,
    after: tuple[Any, str] | None = None,
    limit: int = 100,
) -> list[dict[str, Any]]:
    """Return a page of findings; it goes on after the sort value and id of the last one seen.

    Filters are columns, ``older_than`` and ``newer_than`` (moments: opened before, or since) and
    ``label.<name>`` (of the room). A list of values has the column's as one of them.

    Raises
    ------
    FieldsRefused
        A filter or the sort is no column, or a value is of another type.
    """
    query = _matching(scope, connection, select(*FINDING.c), filters)
    page = paged(query, FINDING, sort=sort, descending=descending, after=after, limit=limit)
    return _findings(connection, page)


def count(scope: Scope, connection: Connection, filters: Mapping[str, Any]) -> int:
    """Return how many findings match the filters of a list."""
    counted = select(func.count()).select_from(FINDING)
    query = _matching(scope, connection, counted, filters)
    count: int = connection.execute(query).scalar_one()
    return count


def get_finding(scope: Scope, connection: Connection, finding_id: str) -> dict[str, Any] | None:
    """Return a finding by its id."""
    query = select(*FINDING.c).where(FINDING.c.id == finding_id)
    found = _findings(connection, within(scope, query, FINDING.c.site_id))
    return found[0] if found else None


def findings_at(
    scope: Scope, connection: Connection, place_id: str, position: int
) -> list[dict[str, Any]]:
    """Return the findings of a site, or of a room, as they stood at a position, in id order."""
    table = FINDING_VERSION
    of_place = or_(table.c.site_id == place_id, table.c.room_id == place_id)
    newest = (
        select(table.c.id, func.max(table.c.number).label("number"))
        .where(of_place, table.c.position <= position)
        .group_by(table.c.id)
        .subquery()
    )
    query = select(*table.c).join(
        newest, (newest.c.id == table.c.id) & (newest.c.number == table.c.number)
    )
    return _findings(connection, within(scope, query, table.c.site_id).order_by(table.c.id))


def finding_at(
    scope: Scope, connection: Connection, finding_id: str, position: int
) -> dict[str, Any] | None:
    """Return a finding as it stood at a position of its site."""
    table = FINDING_VERSION
    query = select(*table.c).where(table.c.id == finding_id, table.c.position <= position)
    newest = within(scope, query, table.c.site_id).order_by(table.c.number.desc()).limit(1)
    found = _findings(connection, newest)
    return found[0] if found else None


def finding_history(
    scope: Scope,
    connection: Connection,
    finding_id: str,
    *,
    descending: bool = False,
    after: tuple[Any, str] | None = None,
    limit: int = 100,
) -> list[dict[str, Any]]:
    """Return a page of the versions of a finding by their number, after the last one seen."""
    table = FINDING_VERSION
    query = within(scope, select(*table.c).where(table.c.id == finding_id), table.c.site_id)
    page = paged(query, table, sort="number", descending=descending, after=after, limit=limit)
    return _findings(connection, page)


def count_history(scope: Scope, connection: Connection, finding_id: str) -> int:
    """Return how many versions of a finding there are."""
    table = FINDING_VERSION
    counted = select(func.count()).select_from(table).where(table.c.id == finding_id)
    count: int = connection.execute(within(scope, counted, table.c.site_id)).scalar_one()
    return count


def _matching(
    scope: Scope,
    connection: Connection,
    query: Select[*tuple[Any, ...]],
    filters: Mapping[str, Any],
) -> Select[*tuple[Any, ...]]:
    dialect = connection.dialect.name
    query = within(scope, query, FINDING.c.site_id)
    columns: dict[str, Any] = {}
    for name, value in filters.items():
        if name == _OLDER_THAN:
            query = query.where(FINDING.c.opened_at < _moment(name, value))
        elif name == _NEWER_THAN:
            query = query.where(FINDING.c.opened_at >= _moment(name, value))
        elif name.startswith(LABEL):
            rooms = TABLES["room"]
            labelled = has_label(rooms, name.removeprefix(LABEL), value, dialect=dialect)
            query = query.where(exists().where(rooms.c["id"] == FINDING.c.room_id, labelled))
        else:
            columns[name] = value
    return filtered(query, FINDING, columns, dialect=dialect)


def _findings(connection: Connection, query: Select[*tuple[Any, ...]]) -> list[dict[str, Any]]:
    return [dict(row) for row in connection.execute(query).mappings()]


def _whole(row: Mapping[str, Any]) -> dict[str, Any]:
    if row.keys() != set(NAMES):
        odd = ", ".join(sorted(row.keys() ^ set(NAMES)))
        raise ValueError(f"A finding has other columns; these differ: {odd}.")
    return dict(row)


def _moment(name: str, value: Any) -> datetime:
    if isinstance(value, datetime):
        return value
    try:
        return moment_of(value)
    except (TypeError, ValueError):
        raise FieldsRefused.parameter(name, "wrong-type", "It must be a moment.") from None


_INSERT = insert(FINDING_VERSION)
