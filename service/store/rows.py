"""Between records and rows: which column holds which field, and in which form."""

from collections.abc import Callable
from dataclasses import fields
from datetime import datetime
from functools import cache
from typing import Any

from sqlalchemy import RowMapping

from service.clock import moment_of, text_of
from service.store.records import COMMON_FIELDS, Record, folded_tag
from service.store.tables.registry import TABLES
from service.store.tables.supply_lines import TRIGGERS
from service.store.tables.ventilation_units import MANUAL
from service.store.types import Instant, Number

_NOT_FIELDS = frozenset(
    {
        "id",
        "site_id",
        "revision",
        "created_at",
        "updated_at",
        # What follows from another field, kept to be sought or joined by.
        "tag_folded",
        "boost_detector_id",
        "trigger_detector_id",
        "filling_line_id",
    }
)


@cache
def field_names(kind: str) -> tuple[str, ...]:
    """Return the fields of a kind in the order in which they are answered."""
    own = [column.name for column in TABLES[kind].columns if column.name not in _NOT_FIELDS]
    return (*COMMON_FIELDS, *(name for name in own if name not in COMMON_FIELDS))


@cache
def instant_names(kind: str) -> frozenset[str]:
    """Return the fields of a kind that hold a moment."""
    columns = TABLES[kind].columns
    return frozenset(name for name in field_names(kind) if isinstance(columns[name].type, Instant))


def columns_of(value: Any) -> dict[str, Any]:
    """Return the fields of a value that is kept as it is; `asdict` would copy each deeply."""
    return {field.name: getattr(value, field.name) for field in fields(value)}


@cache
def number_names(kind: str) -> frozenset[str]:
    """Return the fields of a kind that hold a number which need not be whole."""
    columns = TABLES[kind].columns
    return frozenset(name for name in field_names(kind) if isinstance(columns[name].type, Number))


def row_of(record: Record) -> dict[str, Any]:
    """Return the values of a record's columns.

    Raises
    ------
    ValueError
        The record lacks a field of its kind, or has one that its kind does not have.
    """
    names = field_names(record.kind)
    if record.fields.keys() != set(names):
        odd = sorted(record.fields.keys() ^ set(names))
        raise ValueError(f"A {record.kind} has other fields; these differ: {', '.join(odd)}.")
    row: dict[str, Any] = {
        "id": record.id,
        "site_id": record.site_id,
        "revision": record.revision,
        "created_at": record.created_at,
        "updated_at": record.updated_at,
        **record.fields,
        "tag_folded": folded_tag(record.fields["tag"]),
    }
    for name in instant_names(record.kind):
        row[name] = None if row[name] is None else moment_of(row[name])
    if record.kind == "ventilation-unit":
        row["boost_detector_id"] = triggering_detector(record)
    elif record.kind == "supply-line":
        row["trigger_detector_id"] = triggering_detector(record)
    elif record.kind == "vessel":
        row["filling_line_id"] = filling_line(record)
    return row


def triggering_detector(record: Record) -> str | None:
    """Return the detector that boosts a ventilation unit or shuts a line, where one does."""
    if record.kind == "supply-line":
        trigger: str | None = (record.fields["shutoff"] or {}).get("trigger")
        return None if trigger in TRIGGERS else trigger
    trigger = record.fields["boost_trigger"]
    return None if trigger == MANUAL else trigger


def filling_line(vessel: Record) -> str | None:
    """Return the line that fills a vessel, where one does."""
    line: str | None = (vessel.fields["filling"] or {}).get("supply_line_id")
    return line


@cache
def reader_of(kind: str) -> Callable[[RowMapping], Record]:
    """Return the function that makes records of one kind from rows."""
    names, instants = field_names(kind), instant_names(kind)

    def read(row: RowMapping) -> Record:
        given = {name: row[name] for name in names}
        for name in instants:
            given[name] = _text(given[name])
        return Record(
            kind=kind,
            id=row["id"],
            site_id=row["site_id"],
            revision=row["revision"],
            created_at=row["created_at"],
            updated_at=row["updated_at"],
            fields=given,
        )

    return read


def _text(moment: datetime | None) -> str | None:
    return None if moment is None else text_of(moment)
