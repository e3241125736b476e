"""Lists: what was asked for in the query, and the page that is answered."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from inspect import Parameter, Signature
from typing import Annotated, Any, Final

from fastapi import Query, Request
from starlette.responses import Response

from service.api.access import LABEL
from service.api.deps import JSON
from service.api.paging import (
    USUAL_PAGE,
    Cursor,
    CursorText,
    Limit,
    decode_cursor,
    encode_cursor,
    filter_hash,
    next_link,
)
from service.api.rendering import FRESH
from service.api.resources import Filter
from service.api.service import service_of
from service.changes.answers import rendered
from service.errors import FieldsRefused

LONGEST_VALUE: Final = 500
# As in records: anything else would be part of a path into the labels.
_LABEL_NAME: Final = re.compile("[A-Za-z0-9][A-Za-z0-9._/-]{0,62}")


@dataclass(frozen=True, slots=True)
class Listing:
    """Which page of a list is asked for."""

    filters: Mapping[str, Any]
    sort: str
    descending: bool
    after: tuple[Any, str] | None
    limit: int
    total: bool
    path: str
    parameters: Sequence[tuple[str, str]]
    secret: bytes

    def page(
        self,
        items: Sequence[Mapping[str, Any]],
        keys: Sequence[tuple[Any, str]],
        total: int | None,
        **besides: Any,
    ) -> Response:
        """Answer a page; ``keys`` are the sort values and ids of one record more than fit."""
        more = len(keys) > self.limit
        document: dict[str, Any] = {"items": list(items[: self.limit]), "next": None, **besides}
        headers = dict(FRESH)
        if more:
            value, record_id = keys[self.limit - 1]
            cursor = encode_cursor(Cursor((value,), record_id), self._hash(), self.secret)
            document["next"] = cursor
            headers |= next_link(self.path, self.parameters, cursor)
        if total is not None:
            document["total"] = total
        return Response(rendered(document), 200, headers, JSON)

    def _hash(self) -> str:
        return filter_hash(self.path, self.parameters)


class Asking:
    """The dependency that reads a list's query: its filters by name, its order and its page."""

    def __init__(
        self,
        filters: Mapping[str, Filter],
        sorts: frozenset[str],
        usual_sort: str,
        *,
        labels: bool = True,
    ) -> None:
        self.takes_labels = labels
        self._filters = filters
        self._sorts = sorts
        self._usual_sort = usual_sort
        self.__signature__ = Signature(list(self._parameters()))

    def _parameters(self) -> list[Parameter]:
        told: list[tuple[str, Any, Any]] = [("request", Request, Parameter.empty)]
        told += [(name, _filter_type(asked), None) for name, asked in self._filters.items()]
        sorts = ", ".join(sorted(self._sorts))
        told += [
            (
                "sort",
                Annotated[
                    str,
                    Query(
                        max_length=64,
                        pattern=f"^-?({'|'.join(sorted(self._sorts))})$",
                        description=f"One of {sorts}; with a - before it, descending. Ties are in "
                        "the order of ids, and what is not known comes last.",
                    ),
                ],
                self._usual_sort,
            ),
            ("limit", Limit, USUAL_PAGE),
            ("cursor", CursorText, None),
            (
                "total",
                Annotated[bool, Query(description="Count what matches, in all pages together.")],
                False,
            ),
        ]
        return [
            Parameter(name, Parameter.KEYWORD_ONLY, default=default, annotation=annotation)
            for name, annotation, default in told
        ]

    async def __call__(self, **asked: Any) -> Listing:
        """Read the query of this request."""
        request: Request = asked["request"]
        parameters = request.query_params.multi_items()
        sort = asked["sort"].removeprefix("-")
        secret = service_of(request).cursor_secret
        path = request.url.path
        return Listing(
            filters=self._given(asked, parameters),
            sort=sort,
            descending=asked["sort"].startswith("-"),
            after=_after(asked["cursor"], filter_hash(path, parameters), secret),
            limit=asked["limit"],
            total=asked["total"],
            path=path,
            parameters=parameters,
            secret=secret,
        )

    def _given(self, asked: Mapping[str, Any], sent: Sequence[tuple[str, str]]) -> dict[str, Any]:
        """Gather the filters; an empty value asks for what has none."""
        given = {name: asked[name] for name in self._filters if asked[name] is not None}
        given |= {name: _label_value(name, value) for name, value in sent if name.startswith(LABEL)}
        return {name: value or None for name, value in given.items()}


def _filter_type(asked: Filter) -> Any:
    """Give the type of a filter's parameter; the words it knows are published, and checked later.

    An empty value stands for what has none.
    """
    known = {"enum": [*asked.words, ""]} if asked.words else {}
    query = Query(max_length=LONGEST_VALUE, description=asked.text, json_schema_extra=known)
    return Annotated[str | None, query]


def _label_value(name: str, value: str) -> str:
    if not _LABEL_NAME.fullmatch(name.removeprefix(LABEL)):
        raise FieldsRefused.parameter(name[:100], "wrong-form", "No label has such a name.")
    if len(value) > LONGEST_VALUE:
        raise FieldsRefused.parameter(name, "too-long", f"At most {LONGEST_VALUE} characters.")
    return value


def _after(text: str | None, filters: str, secret: bytes) -> tuple[Any, str] | None:
    if text is None:
        return None
    cursor = decode_cursor(text, filters, secret)
    return cursor.sort_keys[0], cursor.record_id
