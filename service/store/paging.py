"""Filters, order and pages of a list, alike on both databases.

A page goes on after the sort value and id of the last record seen, not after a count: what is
inserted or removed between two pages moves nothing else.
"""

from collections.abc import Callable, Collection, Mapping
from datetime import datetime
from math import isfinite
from typing import Any, TypeVar

from sqlalchemy import (
    Column,
    ColumnElement,
    LargeBinary,
    Select,
    Table,
    and_,
    cast,
    exists,
    func,
    or_,
)
from sqlalchemy.dialects.postgresql import JSON

from service.clock import moment_of
from service.errors import FieldsRefused
from service.store.records import folded_tag
from service.store.types import Document, Flag, Instant, Number, Text, Whole
from service.store.urls import SQLITE

Selected = TypeVar("Selected", bound=Select[*tuple[Any, ...]])
LABEL = "label."
_FOLDED = {"tag": "tag_folded"}


def filtered(
    query: Selected, table: Table, filters: Mapping[str, Any], *, dialect: str
) -> Selected:
    """Narrow a query to the rows that match every filter.

    A value is equalled, a list of values has it as one of them, None means that nothing is there.

    Raises
    ------
    FieldsRefused
        A filter is no column of the table, or its value is of another type.
    """
    for name, value in filters.items():
        query = query.where(_condition(table, name, value, dialect))
    return query


def paged(
    query: Selected,
    table: Table,
    *,
    sort: str,
    descending: bool,
    after: tuple[Any, str] | None,
    limit: int,
) -> Selected:
    """Order a query by a column, then by id, nulls last, and begin after the last row seen.

    Raises
    ------
    FieldsRefused
        The sort is no column of the table that has an order.
    """
    column = _sortable(table, sort)
    identity = table.c["id"]
    if after is not None:
        query = query.where(_beyond(column, identity, sort, descending, after))
    ordered = column.desc() if descending else column.asc()
    if column.name == identity.name:
        return query.order_by(ordered).limit(limit)
    return query.order_by(ordered.nulls_last(), identity).limit(limit)


def has_label(table: Table, name: str, value: str | None, *, dialect: str) -> ColumnElement[bool]:
    """Return the condition that a row has a label with a value; None: that it has no such label."""
    labels = table.c["labels"]
    if dialect == SQLITE:
        # A path into the document could not hold every name that a label can have.
        each = func.json_each(labels).table_valued("key", "value")
        named = exists().select_from(each).where(each.c.key == name)
        return ~named if value is None else named.where(each.c.value == value)
    held: ColumnElement[str] = cast(labels, JSON).op("->>", return_type=Text())(name)
    return held.is_(None) if value is None else held == value


def _condition(table: Table, name: str, value: Any, dialect: str) -> ColumnElement[bool]:
    if name.startswith(LABEL):
        return has_label(table, name.removeprefix(LABEL), value, dialect=dialect)
    column = _column(table, _FOLDED.get(name, name), name)
    if value is None:
        return column.is_(None)
    read = _reader(column, name)
    if isinstance(value, Collection) and not isinstance(value, str):
        return column.in_([read(one) for one in value])
    equal: ColumnElement[bool] = column == read(value)
    return equal


def _beyond(
    column: Column[Any],
    identity: ColumnElement[str],
    sort: str,
    descending: bool,
    after: tuple[Any, str],
) -> ColumnElement[bool]:
    value, last_id = after
    if sort == "id":
        return identity < last_id if descending else identity > last_id
    later = identity > last_id
    if value is None:
        return and_(column.is_(None), later)
    value = _reader(column, sort)(value)
    further = column < value if descending else column > value
    beyond = or_(further, and_(column == value, later))
    return or_(beyond, column.is_(None)) if column.nullable else beyond


def _sortable(table: Table, name: str) -> Column[Any]:
    return _column(table, _FOLDED.get(name, name), "sort")


def _column(table: Table, name: str, parameter: str) -> Column[Any]:
    column = table.columns.get(name)
    if column is None or isinstance(column.type, Document | LargeBinary):
        raise FieldsRefused.parameter(
            parameter, "unknown-field", "There is no field of that name to go by."
        )
    return column


def _reader(column: Column[Any], parameter: str) -> Callable[[Any], Any]:
    """Return the function that takes a value, or its text, for one of the column's type."""
    kind: type[Any] = type(column.type)
    read: Callable[[Any], Any] = _READERS.get(kind, _text)
    folds = column.name in _FOLDED.values()

    def checked(value: Any) -> Any:
        try:
            taken = read(value)
        except (AttributeError, KeyError, OverflowError, TypeError, ValueError):
            raise FieldsRefused.parameter(
                parameter, "wrong-type", "The field holds values of another type."
            ) from None
        return folded_tag(taken) if folds else taken

    return checked


def _text(value: Any) -> str:
    if not isinstance(value, str):
        raise TypeError(value)
    return value


def _number(value: Any) -> float:
    if isinstance(value, bool) or not isfinite(number := float(value)):
        raise ValueError(value)
    return number


def _whole(value: Any) -> int:
    if isinstance(value, bool | float) or not -(2**63) <= (number := int(value)) < 2**63:
        raise ValueError(value)
    return number


def _flag(value: Any) -> bool:
    if isinstance(value, bool):
        return value
    return {"true": True, "false": False}[value]


def _instant(value: Any) -> datetime:
    return value if isinstance(value, datetime) else moment_of(value)


_READERS: Mapping[type, Callable[[Any], Any]] = {
    Number: _number,
    Whole: _whole,
    Flag: _flag,
    Instant: _instant,
}
