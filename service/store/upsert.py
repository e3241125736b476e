"""Inserts that meet a row that is there already, on either database."""

from collections.abc import Mapping, Sequence
from functools import cache
from typing import Any

from sqlalchemy import Connection, Table
from sqlalchemy.dialects import postgresql, sqlite

from service.store.urls import SQLITE


def insert_missing(connection: Connection, table: Table, rows: Sequence[Mapping[str, Any]]) -> None:
    """Insert the rows that are not there; the others stay as they are."""
    if rows:
        insert = _insert(connection.dialect.name, table).on_conflict_do_nothing()
        connection.execute(insert, rows)


def insert_or_replace(
    connection: Connection, table: Table, rows: Sequence[Mapping[str, Any]]
) -> None:
    """Insert rows, and give those that are there by primary key the new values."""
    if not rows:
        return
    statement = _replacing(connection.dialect.name, table, tuple(rows[0]))
    connection.execute(statement, rows)


@cache
def _replacing(
    dialect: str, table: Table, names: tuple[str, ...]
) -> "sqlite.Insert | postgresql.Insert":
    """Make the statement once: to build it takes longer than to run it."""
    insert = _insert(dialect, table)
    key = {column.name for column in table.primary_key}
    changed = {name: insert.excluded[name] for name in names if name not in key}
    return insert.on_conflict_do_update(index_elements=sorted(key), set_=changed)


def _insert(dialect: str, table: Table) -> "sqlite.Insert | postgresql.Insert":
    return sqlite.insert(table) if dialect == SQLITE else postgresql.insert(table)
