"""The records as they are: read by key, by tag and by list; inserted, revised and deleted.

What reads takes a scope and a connection; what writes takes the session of a write.
"""

from collections.abc import Iterable, Iterator, Mapping
from contextlib import contextmanager
from functools import cache
from typing import Any, Final, NamedTuple, TypeVar

from sqlalchemy import (
    BindParameter,
    Connection,
    Delete,
    Insert,
    Select,
    Table,
    Update,
    bindparam,
    delete,
    func,
    insert,
    or_,
    select,
    update,
)
from sqlalchemy.exc import IntegrityError

from service.errors import DuplicateExternalId, DuplicateTag
from service.store.paging import filtered, paged
from service.store.parts import in_parts
from service.store.records import Record, folded_tag
from service.store.rows import reader_of, row_of
from service.store.scope import Scope, within
from service.store.session import WriteSession
from service.store.tables.registry import SUPPLY_LINE_ROOM, TABLES, VENTILATION_UNIT_ROOM

Changing = TypeVar("Changing", Update, Delete)

_SHARED: Final = frozenset({"basis", "fluid"})
_UNIT: Final = "ventilation-unit"
_CONTROL: Final = "control"
_OPENING: Final = "opening"
_LINE: Final = "supply-line"


class Referrer(NamedTuple):
    """A record that names another."""

    kind: str
    id: str
    tag: str


def get_record(scope: Scope, connection: Connection, kind: str, record_id: str) -> Record | None:
    """Return a record by its id."""
    return _one(scope, connection, kind, _by_id(kind), {"id": record_id})


def get_records(
    scope: Scope, connection: Connection, kind: str, ids: Iterable[str]
) -> list[Record]:
    """Return the records of some ids that are there, in record order."""
    return sorted(_many(scope, connection, kind, _by_ids(kind), ids), key=_record_order)


def record_by_tag(
    scope: Scope, connection: Connection, kind: str, site_id: str | None, tag: str
) -> Record | None:
    """Return a record by its tag, however it is spelt; else a shared basis or fluid of that tag.

    The tag of a site is one of the whole installation, so that its site is not asked for.
    """
    folded = {"tag": folded_tag(tag)}
    if kind == "site":
        return _one(scope, connection, kind, _by_tag(kind), folded)
    if site_id is not None:
        own = _one(scope, connection, kind, _by_tag_of_site(kind), {"site": site_id, **folded})
        if own is not None:
            return own
    if kind in _SHARED:
        return _one(scope, connection, kind, _by_shared_tag(kind), folded)
    return None


def record_by_external_id(
    scope: Scope, connection: Connection, kind: str, site_id: str | None, external_id: str
) -> Record | None:
    """Return a record of a site by the id that another system gave it."""
    values: dict[str, str] = {"external": external_id}
    if kind == "site":
        return _one(scope, connection, kind, _by_external_id(kind), values)
    if site_id is None:
        return None
    values["site"] = site_id
    return _one(scope, connection, kind, _by_external_id_of_site(kind), values)


def list_records(
    scope: Scope,
    connection: Connection,
    kind: str,
    filters: Mapping[str, Any],
    *,
    sort: str,
    descending: bool,
    after: tuple[Any, str] | None,
    limit: int,
) -> list[Record]:
    """Return a page of records; it goes on after the sort value and id of the last one seen.

    Raises
    ------
    FieldsRefused
        A filter or the sort is no field of the kind, or a value is of another type.
    """
    table = TABLES[kind]
    query = filtered(
        _seen(scope, kind, select(table)), table, filters, dialect=connection.dialect.name
    )
    query = paged(query, table, sort=sort, descending=descending, after=after, limit=limit)
    return _records(connection, kind, query)


def count_records(
    scope: Scope, connection: Connection, kind: str, filters: Mapping[str, Any]
) -> int:
    """Return how many records match the filters.

    Raises
    ------
    FieldsRefused
        A filter is no field of the kind, or its value is of another type.
    """
    table = TABLES[kind]
    query = _seen(scope, kind, select(func.count()).select_from(table))
    query = filtered(query, table, filters, dialect=connection.dialect.name)
    count: int = connection.execute(query).scalar_one()
    return count


def equipment_of(scope: Scope, connection: Connection, room_ids: Iterable[str]) -> list[Record]:
    """Return what stands in rooms, what serves them and opens on them, and the controls of it.

    They are in the order of their kinds, then in record order.
    """
    rooms = sorted(set(room_ids))
    # A unit that serves two of the rooms is found once for each.
    found = {
        record.id: record
        for kind in (_UNIT, "vessel", "detector", _CONTROL, _OPENING, _LINE)
        for record in _many(scope, connection, kind, _by_rooms(kind), rooms)
    }
    order = {kind: number for number, kind in enumerate(TABLES)}
    return sorted(found.values(), key=lambda record: (order[record.kind], record.id))


def controls_of_vessels(
    scope: Scope, connection: Connection, vessel_ids: Iterable[str]
) -> list[Record]:
    """Return the controls of vessels, in record order."""
    found = _many(scope, connection, _CONTROL, _naming(_CONTROL, "vessel_id"), vessel_ids)
    return sorted(found, key=_record_order)


def units_boosted_by(
    scope: Scope, connection: Connection, detector_ids: Iterable[str]
) -> list[Record]:
    """Return the ventilation units that detectors boost, in record order."""
    found = _many(scope, connection, _UNIT, _naming(_UNIT, "boost_detector_id"), detector_ids)
    return sorted(found, key=_record_order)


def lines_around(
    scope: Scope,
    connection: Connection,
    *,
    vessel_ids: Iterable[str] = (),
    detector_ids: Iterable[str] = (),
) -> list[Record]:
    """Return the lines that vessels feed and that detectors shut, in record order."""
    fed = _many(scope, connection, _LINE, _naming(_LINE, "source_vessel_id"), vessel_ids)
    shut = _many(scope, connection, _LINE, _naming(_LINE, "trigger_detector_id"), detector_ids)
    found = {line.id: line for line in (*fed, *shut)}
    return sorted(found.values(), key=_record_order)


def vessels_filled_by(
    scope: Scope, connection: Connection, line_ids: Iterable[str]
) -> list[Record]:
    """Return the vessels that lines fill, in record order."""
    query = _naming("vessel", "filling_line_id")
    return sorted(_many(scope, connection, "vessel", query, line_ids), key=_record_order)


def rooms_of_site(scope: Scope, connection: Connection, site_id: str) -> list[str]:
    """Return the rooms of a site."""
    rooms = TABLES["room"]
    query = select(rooms.c["id"]).where(rooms.c["site_id"] == site_id)
    return _ids(connection, within(scope, query, rooms.c["site_id"]).order_by(rooms.c["id"]))


def rooms_with_fluid(scope: Scope, connection: Connection, fluid_id: str) -> list[str]:
    """Return the rooms that a fluid can get into: from a vessel in them, or by their purge."""
    rooms, vessels = TABLES["room"], TABLES["vessel"]
    standing = (
        select(vessels.c["room_id"].label("id"))
        .where(vessels.c["fluid_id"] == fluid_id)
        .where(vessels.c["room_id"].is_not(None))
    )
    purged = select(rooms.c["id"]).where(rooms.c["purge_fluid_id"] == fluid_id)
    either = within(scope, standing, vessels.c["site_id"]).union(
        within(scope, purged, rooms.c["site_id"])
    )
    return sorted(connection.execute(either).scalars())


def sites_with_basis(scope: Scope, connection: Connection, basis_id: str) -> list[str]:
    """Return the sites that are judged by a basis, or by one derived from it."""
    sites, bases = TABLES["site"], TABLES["basis"]
    derived = select(bases.c["id"]).where(bases.c["derived_from_id"] == basis_id)
    judged = (sites.c["basis_id"] == basis_id) | sites.c["basis_id"].in_(derived)
    query = within(scope, select(sites.c["id"]).where(judged), sites.c["site_id"])
    return _ids(connection, query.order_by(sites.c["id"]))


def referrers_of(
    scope: Scope, connection: Connection, kind: str, record_id: str, limit: int = 10
) -> list[Referrer]:
    """Return the first records that name a record, so that it cannot go."""
    found: list[Referrer] = []
    for referring, query in _referring(kind):
        if len(found) >= limit:
            break
        table = TABLES[referring]
        seen = within(scope, query, table.c["site_id"]).order_by(table.c["id"])
        rows = connection.execute(seen.limit(limit - len(found)), {"referred": record_id})
        found += [Referrer(referring, row.id, row.tag) for row in rows]
    return found


def insert_record(session: WriteSession, record: Record) -> None:
    """Insert a record.

    Raises
    ------
    DuplicateTag, DuplicateExternalId
        Another record of the kind in the site has it.
    """
    with _told_duplicates(record.kind):
        session.connection.execute(_insert(record.kind), row_of(record))
    _insert_rooms(session, record)


def revise_record(session: WriteSession, record: Record, expected_revision: int) -> bool:
    """Give a record its next revision, if it is still at the one expected; say whether it was.

    Raises
    ------
    DuplicateTag, DuplicateExternalId
        Another record of the kind in the site has it.
    """
    row = row_of(record)
    values = {name: value for name, value in row.items() if name not in ("id", "site_id")}
    values |= {"record": record.id, "expected": expected_revision}
    with _told_duplicates(record.kind):
        revised = session.connection.execute(_update(record.kind), values).rowcount == 1
    if revised and record.kind in _IN_ROOMS:
        _delete_rooms(session, record)
        _insert_rooms(session, record)
    return revised


def delete_record(session: WriteSession, record: Record) -> bool:
    """Delete a record, if it is still at this revision; say whether it was."""
    values = {"record": record.id, "expected": record.revision}
    return session.connection.execute(_delete(record.kind), values).rowcount == 1


@contextmanager
def _told_duplicates(kind: str) -> Iterator[None]:
    try:
        yield
    except IntegrityError as error:
        # Both databases name the columns of a unique constraint: one in its name, one beside it.
        text = str(error.orig)
        if "external_id" in text:
            raise DuplicateExternalId(kind) from None
        if "tag_folded" in text or "shared_tag" in text:
            raise DuplicateTag(kind) from None
        raise


def _insert_rooms(session: WriteSession, record: Record) -> None:
    """Write the rooms of a record that has several in the form that can be joined."""
    if record.kind not in _IN_ROOMS:
        return
    named, table, owner = _IN_ROOMS[record.kind]
    rows = [{"site_id": record.site_id, owner: record.id, **each} for each in record.fields[named]]
    if rows:
        session.connection.execute(insert(table), rows)


def _delete_rooms(session: WriteSession, record: Record) -> None:
    _, table, owner = _IN_ROOMS[record.kind]
    session.connection.execute(delete(table).where(table.c[owner] == record.id))


def _one(
    scope: Scope,
    connection: Connection,
    kind: str,
    query: Select[*tuple[Any, ...]],
    values: Mapping[str, Any],
) -> Record | None:
    row = connection.execute(query, values).mappings().one_or_none()
    # Looked at afterwards, so that one prepared statement serves every scope.
    return None if row is None or not scope.sees(row["site_id"]) else reader_of(kind)(row)


def _many(
    scope: Scope,
    connection: Connection,
    kind: str,
    query: Select[*tuple[Any, ...]],
    ids: Iterable[str],
) -> list[Record]:
    read = reader_of(kind)
    return [
        read(row)
        for some in in_parts(ids)
        for row in connection.execute(query, {"some": some}).mappings()
        if scope.sees(row["site_id"])
    ]


def _records(connection: Connection, kind: str, query: Select[*tuple[Any, ...]]) -> list[Record]:
    read = reader_of(kind)
    return [read(row) for row in connection.execute(query).mappings()]


def _ids(connection: Connection, query: Select[str]) -> list[str]:
    return list(connection.execute(query).scalars())


def _seen(scope: Scope, kind: str, query: Select[*tuple[Any, ...]]) -> Select[*tuple[Any, ...]]:
    return within(scope, query, TABLES[kind].c["site_id"], shared=kind in _SHARED)


def _record_order(record: Record) -> str:
    return record.id


# The statements by key, built once: building one costs as much as running it.

_SOME: BindParameter[str] = bindparam("some", expanding=True)


@cache
def _by_id(kind: str) -> Select[*tuple[Any, ...]]:
    table = TABLES[kind]
    return select(table).where(table.c["id"] == bindparam("id"))


@cache
def _by_ids(kind: str) -> Select[*tuple[Any, ...]]:
    table = TABLES[kind]
    return select(table).where(table.c["id"].in_(_SOME))


@cache
def _by_rooms(kind: str) -> Select[*tuple[Any, ...]]:
    table = TABLES[kind]
    if kind == _LINE:
        running, vessels = SUPPLY_LINE_ROOM, TABLES["vessel"]
        here = select(running.c["line_id"]).where(running.c["room_id"].in_(_SOME))
        fills = select(vessels.c["filling_line_id"]).where(vessels.c["room_id"].in_(_SOME))
        return select(table).where(or_(table.c["id"].in_(here), table.c["id"].in_(fills)))
    serving = VENTILATION_UNIT_ROOM
    if kind == _CONTROL:
        vessels = TABLES["vessel"]
        standing = select(vessels.c["id"]).where(vessels.c["room_id"].in_(_SOME))
        either = table.c["room_id"].in_(_SOME) | table.c["vessel_id"].in_(standing)
        return select(table).where(either)
    if kind == _OPENING:
        sides = (table.c["room_id"].in_(_SOME), table.c["other_room_id"].in_(_SOME))
        return select(table).where(or_(*sides))
    if kind != _UNIT:
        return _naming(kind, "room_id")
    joined = table.join(serving, serving.c["unit_id"] == table.c["id"])
    return select(*table.c).select_from(joined).where(serving.c["room_id"].in_(_SOME))


@cache
def _naming(kind: str, column: str) -> Select[*tuple[Any, ...]]:
    table = TABLES[kind]
    return select(table).where(table.c[column].in_(_SOME))


@cache
def _by_tag(kind: str) -> Select[*tuple[Any, ...]]:
    table = TABLES[kind]
    return select(table).where(table.c["tag_folded"] == bindparam("tag"))


@cache
def _by_tag_of_site(kind: str) -> Select[*tuple[Any, ...]]:
    return _by_tag(kind).where(TABLES[kind].c["site_id"] == bindparam("site"))


@cache
def _by_shared_tag(kind: str) -> Select[*tuple[Any, ...]]:
    return _by_tag(kind).where(TABLES[kind].c["site_id"].is_(None))


@cache
def _by_external_id(kind: str) -> Select[*tuple[Any, ...]]:
    table = TABLES[kind]
    return select(table).where(table.c["external_id"] == bindparam("external"))


@cache
def _by_external_id_of_site(kind: str) -> Select[*tuple[Any, ...]]:
    return _by_external_id(kind).where(TABLES[kind].c["site_id"] == bindparam("site"))


@cache
def _insert(kind: str) -> Insert:
    return insert(TABLES[kind])


@cache
def _update(kind: str) -> Update:
    table = TABLES[kind]
    kept = ("id", "site_id")
    names = [column.name for column in table.c if column.name not in kept]
    new: dict[str, Any] = {name: bindparam(name) for name in names}
    return _at_revision(update(table), table).values(new)


@cache
def _delete(kind: str) -> Delete:
    table = TABLES[kind]
    return _at_revision(delete(table), table)


def _at_revision(statement: Changing, table: Table) -> Changing:
    return statement.where(table.c["id"] == bindparam("record")).where(
        table.c["revision"] == bindparam("expected")
    )


@cache
def _referring(kind: str) -> tuple[tuple[str, Select[str, str]], ...]:
    """Return the queries for what can name a record of a kind, by the kind that names it."""
    referred: BindParameter[str] = bindparam("referred")
    found = [
        (referring, _tagged(TABLES[referring]).where(TABLES[referring].c[name] == referred))
        for referring, names in _NAMED_BY[kind].items()
        for name in names
    ]
    if kind == "room":
        for other, (_, joining, owner) in _IN_ROOMS.items():
            theirs = select(joining.c[owner]).where(joining.c["room_id"] == referred)
            table = TABLES[other]
            found.append((other, _tagged(table).where(table.c["id"].in_(theirs))))
    return tuple(found)


def _tagged(table: Table) -> Select[str, str]:
    return select(table.c["id"], table.c["tag"])


#: Kinds that have several rooms: the field, the table that can be joined, and its owner's column.
_IN_ROOMS: Final[Mapping[str, tuple[str, Table, str]]] = {
    _UNIT: ("serves", VENTILATION_UNIT_ROOM, "unit_id"),
    _LINE: ("rooms", SUPPLY_LINE_ROOM, "line_id"),
}
_NAMED_BY: Final[Mapping[str, Mapping[str, tuple[str, ...]]]] = {
    "site": {kind: ("site_id",) for kind in TABLES if kind != "site"},
    "room": {
        "opening": ("room_id", "other_room_id"),
        "detector": ("room_id",),
        "vessel": ("room_id",),
        _CONTROL: ("room_id",),
    },
    "basis": {"site": ("basis_id",), "basis": ("derived_from_id",)},
    "fluid": {"room": ("purge_fluid_id",), "vessel": ("fluid_id",), _LINE: ("fluid_id",)},
    "opening": {},
    "detector": {_UNIT: ("boost_detector_id",), _LINE: ("trigger_detector_id",)},
    _UNIT: {},
    "vessel": {_CONTROL: ("vessel_id",), _LINE: ("source_vessel_id",)},
    _LINE: {"vessel": ("filling_line_id",)},
    _CONTROL: {},
}
