"""Inserts that meet a row that is there already, on either database."""

from collections.abc import Mapping, Sequence
from typing import Any

from sqlalchemy import Connection, Table
from sqlalchemy.dialects import postgresql, sqlite

from service.store.urls import SQLITE


def insert_missing(connection: Connection, table: Table, rows: Sequence[Mapping[str, Any]]) -> None:
    """Insert the rows that are not there; the others stay as they are."""
    if rows:
        insert = _insert(connection, table).on_conflict_do_nothing()
        connection.execute(insert, rows)


def insert_or_replace(
    connection: Connection, table: Table, rows: Sequence[Mapping[str, Any]]
) -> None:
    """Insert rows, and give those that are there by primary key the new values."""
    if not rows:
        return
    insert = _insert(connection, table)
    key = {column.name for column in table.primary_key}
    changed = {name: insert.excluded[name] for name in rows[0] if name not in key}
    connection.execute(insert.on_conflict_do_update(index_elements=sorted(key), set_=changed), rows)


def _insert(connection: Connection, table: Table) -> "sqlite.Insert | postgresql.Insert":
    on_sqlite = connection.dialect.name == SQLITE
    return sqlite.insert(table) if on_sqlite else postgresql.insert(table)
