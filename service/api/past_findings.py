"""Findings as they stood at a moment: filtered and paged as those of now are by the database."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from datetime import datetime
from typing import Any, Final

from sqlalchemy import Connection

from service.api.access import LABEL
from service.api.lists import Listing
from service.changes.answers import finding_answer
from service.store.findings import findings_at
from service.store.heads import INSTALLATION, heads_of, position_at
from service.store.history import record_at, records_at
from service.store.records import Record, folded_tag
from service.store.scope import Scope

_BY_PLACE: Final = ("site", "site_id", "room")
_BY_AGE: Final = ("older_than", "newer_than")


def findings_listed_at(
    scope: Scope,
    connection: Connection,
    filters: Mapping[str, Any],
    listing: Listing,
    as_of: datetime,
) -> tuple[list[dict[str, Any]], int | None]:
    """Give a page of findings as they stood, and how many match; tags and labels are those then."""
    by_column = {
        name: wanted
        for name, wanted in filters.items()
        if name not in (*_BY_PLACE, *_BY_AGE) and not name.startswith(LABEL)
    }
    matching = [
        row
        for row in _of_places(scope, connection, filters, as_of)
        if all(_matches(row[name], wanted) for name, wanted in by_column.items())
        and _of_age(row["opened_at"], filters)
    ]
    return _page_of(matching, listing), len(matching) if listing.total else None


def _of_places(
    scope: Scope, connection: Connection, filters: Mapping[str, Any], as_of: datetime
) -> Iterator[dict[str, Any]]:
    """Give the findings of the sites and rooms that are asked for."""
    for site_id in _sites(scope, connection, filters):
        position = position_at(scope, connection, site_id, as_of)
        if not _is_named(scope, connection, site_id, position, filters):
            continue
        rooms = _rooms(scope, connection, site_id, position, filters)
        for row in findings_at(scope, connection, site_id, position):
            if rooms is None or row["room_id"] in rooms:
                yield row


def _sites(scope: Scope, connection: Connection, filters: Mapping[str, Any]) -> list[str]:
    sites = [head.site_id for head in heads_of(scope, connection) if head.site_id != INSTALLATION]
    wanted = filters.get("site_id")
    return [site_id for site_id in sites if "site_id" not in filters or site_id == wanted]


def _is_named(
    scope: Scope,
    connection: Connection,
    site_id: str,
    position: int,
    filters: Mapping[str, Any],
) -> bool:
    if "site" not in filters:
        return True
    site = record_at(scope, connection, "site", site_id, position)
    return site is not None and _has_tag(site, filters["site"])


def _rooms(
    scope: Scope,
    connection: Connection,
    site_id: str,
    position: int,
    filters: Mapping[str, Any],
) -> frozenset[str] | None:
    """Name the rooms that had the tag and the labels; none: neither is asked for."""
    labels = {
        name.removeprefix(LABEL): value for name, value in filters.items() if name.startswith(LABEL)
    }
    if not labels and "room" not in filters:
        return None
    return frozenset(
        room.id
        for room in records_at(scope, connection, "room", site_id, position)
        if ("room" not in filters or _has_tag(room, filters["room"]))
        and all(room.fields["labels"].get(name) == value for name, value in labels.items())
    )


def _has_tag(record: Record, tag: str | None) -> bool:
    return tag is not None and folded_tag(record.fields["tag"]) == folded_tag(tag)


def _matches(value: Any, wanted: Any) -> bool:
    return value in wanted if isinstance(wanted, list) else value == wanted


def _of_age(opened_at: datetime, filters: Mapping[str, Any]) -> bool:
    older, newer = filters.get("older_than"), filters.get("newer_than")
    return (older is None or opened_at < older) and (newer is None or opened_at >= newer)


def _page_of(rows: Sequence[Mapping[str, Any]], listing: Listing) -> list[dict[str, Any]]:
    """Take one page, in the order in which the database gives those of now."""
    answers = sorted((finding_answer(row) for row in rows), key=lambda answer: str(answer["id"]))
    answers.sort(key=lambda answer: answer[listing.sort], reverse=listing.descending)
    if listing.sort == "id" and listing.after is not None:
        last = listing.after[1]
        answers = [a for a in answers if (a["id"] < last if listing.descending else a["id"] > last)]
    elif listing.after is not None:
        at = listing.after
        answers = [a for a in answers if _comes_after(a, listing, at)]
    return answers[: listing.limit + 1]


def _comes_after(answer: Mapping[str, Any], listing: Listing, after: tuple[Any, str]) -> bool:
    value, last_id = after
    if answer[listing.sort] == value:
        return bool(answer["id"] > last_id)
    return bool((answer[listing.sort] < value) == listing.descending)
