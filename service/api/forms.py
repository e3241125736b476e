"""The form of an answer that has several: by the parameter ``format``, else by ``Accept``."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Mapping, Sequence
from typing import Annotated, Final

from fastapi import Query
from starlette.requests import Request

from service.api.access import LONGEST_PARAMETER
from service.api.deps import JSON
from service.errors import FieldsRefused, NotAcceptable

CSV: Final = "text/csv"
SVG: Final = "image/svg+xml"
FORMATS: Final[Mapping[str, str]] = {"json": JSON, "csv": CSV, "svg": SVG}

# What a program that opens tables would take for a formula.
_FORMULA: Final = ("=", "+", "-", "@", "\t", "\r", "\n")
_MOST_RANGES: Final = 50

FormatText = Annotated[
    str | None,
    Query(
        alias="format",
        max_length=LONGEST_PARAMETER,
        description="The form of the answer, before what Accept says.",
        json_schema_extra={"enum": list(FORMATS)},
    ),
]


def form_of(request: Request, asked: str | None) -> str:
    """Give the media type to answer with.

    Raises
    ------
    FieldsRefused
        There is no such format.
    NotAcceptable
        Accept takes none of the forms there are.
    """
    if asked is not None:
        if asked not in FORMATS:
            detail = f"One of {', '.join(FORMATS)} is expected."
            raise FieldsRefused.parameter("format", "not-one-of", detail)
        return FORMATS[asked]
    ranges = _ranges(", ".join(request.headers.getlist("accept")))
    if not ranges:
        return JSON
    quality = {form: _quality(form, ranges) for form in FORMATS.values()}
    # Of equal ones the first, which is JSON.
    best = max(quality, key=lambda form: quality[form])
    if quality[best] <= 0.0:
        raise NotAcceptable(f"This is answered as {', '.join(FORMATS.values())}.")
    return best


def _ranges(accept: str) -> dict[str, float]:
    """Read the media ranges of Accept, each with its weight; what cannot be read weighs nothing."""
    ranges: dict[str, float] = {}
    for part in accept.split(",")[:_MOST_RANGES]:
        name, *parameters = (text.strip().lower() for text in part.split(";"))
        if name:
            ranges[name] = _weight(parameters)
    return ranges


def _weight(parameters: Iterable[str]) -> float:
    for parameter in parameters:
        name, _, value = parameter.partition("=")
        if name.strip() == "q":
            try:
                weight = float(value)
            except ValueError:
                return 0.0
            # Written so that what is no number weighs nothing.
            return weight if 0.0 <= weight <= 1.0 else 0.0
    return 1.0


def _quality(form: str, ranges: Mapping[str, float]) -> float:
    """Weight of a form, by the most specific range that it is in."""
    for name in (form, f"{form.partition('/')[0]}/*", "*/*"):
        if name in ranges:
            return ranges[name]
    return 0.0


def csv_bytes(columns: Sequence[str], rows: Iterable[Sequence[str | float | None]]) -> bytes:
    """Write a table by RFC 4180: texts in quotes and never a formula, numbers bare."""
    written = io.StringIO()
    writer = csv.writer(written, quoting=csv.QUOTE_NONNUMERIC, lineterminator="\r\n")
    writer.writerow(columns)
    for row in rows:
        writer.writerow([_cell(value) for value in row])
    return written.getvalue().encode()


def _cell(value: str | float | None) -> str | float:
    if value is None:
        return ""
    if isinstance(value, str) and value.startswith(_FORMULA):
        return f"'{value}"
    return value
