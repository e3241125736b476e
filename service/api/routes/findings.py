"""Findings: what the records of rooms show to be wrong."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from datetime import datetime, timedelta
from typing import Annotated, Any, Final

from fastapi import APIRouter, Depends, Path, Request
from sqlalchemy import Connection
from starlette.responses import Response

from service.api.access import LABEL, READ, allowed
from service.api.conditional import not_modified as has_it_already
from service.api.conditional import record_tag
from service.api.deps import JSON, AsOf, Reader
from service.api.fields import is_record_id
from service.api.lists import Asking, Listing
from service.api.rendering import FRESH
from service.api.resources import Filter
from service.api.routes.declared import (
    LISTING,
    READING_PAST,
    answering,
    not_modified,
)
from service.api.schemas.findings import FindingPage, FindingRead
from service.changes.answers import finding_answer, rendered
from service.changes.cautions import CAUTIONS
from service.errors import AsOfTooEarly, FieldsRefused, RecordNotFound
from service.store.findings import (
    count,
    finding_history,
    findings_at,
    get_finding,
    list_findings,
)
from service.store.heads import heads_of, position_at
from service.store.history import records_at
from service.store.live import record_by_tag
from service.store.scope import Scope

router = APIRouter(prefix="/v1/findings", tags=["Findings"])

SEVERITIES: Final = ("critical", "major", "minor", "observation")
STATES: Final = ("open", "acknowledged", "accepted", "cleared")
NOT_CLEARED: Final = STATES[:-1]
MOST_DAYS: Final = 36525.0
FILTERS: Final[Mapping[str, Filter]] = {
    "site_id": Filter("The id of a site."),
    "site": Filter("The tag of a site."),
    "room_id": Filter("The id of a room."),
    "room": Filter("The tag of a room, of any site that the key may see or of the one asked for."),
    "gas": Filter("The gas judged, such as oxygen or carbon-dioxide."),
    "subject_id": Filter("The id of the record that a finding is about."),
    "rule": Filter("A rule, such as oxygen/largest-vessel."),
    "family": Filter("A family of rules, such as oxygen."),
    "severity": Filter(f"One or more of {', '.join(SEVERITIES)}, with commas between."),
    "state": Filter(
        f"One or more of {', '.join(STATES)}, with commas between; those not cleared where none "
        "is said."
    ),
    "older_than_days": Filter("Opened more than so many days ago."),
    "newer_than_days": Filter("Opened within so many days."),
}
SORTS: Final = frozenset(
    {"id", "opened_at", "changed_at", "rule", "family", "severity", "state", "position"}
)
Id = Annotated[str, Path(description="The id of the finding.")]


@router.get(
    "",
    dependencies=[allowed(READ)],
    operation_id="listFindings",
    response_model=None,
    responses=answering(FindingPage, (*LISTING, AsOfTooEarly), "Link"),
)
async def list_all(
    listing: Annotated[Listing, Depends(Asking(FILTERS, SORTS, "id"))], read: Reader, as_of: AsOf
) -> Response:
    """List findings, now or as they stood at a moment. `label.<name>` asks for a room's label."""
    moment = as_of or read.service.clock.now()
    filters = _filters(listing.filters, moment)
    found = _listed if as_of is None else _listed_at
    items, total = await read(found, filters, listing, as_of)
    keys = [(item[listing.sort], item["id"]) for item in items]
    return listing.page(items, keys, total, cautions=CAUTIONS)


@router.get(
    "/{finding_id}",
    dependencies=[allowed(READ)],
    operation_id="getFinding",
    response_model=None,
    responses=answering(FindingRead, READING_PAST, "ETag") | not_modified(),
)
async def get(finding_id: Id, request: Request, read: Reader, as_of: AsOf) -> Response:
    """Read a finding, as it is or as it stood at a moment."""
    finding = await read(_found, finding_id, as_of)
    tag = record_tag(finding["number"])
    headers = {**FRESH, "ETag": tag}
    if has_it_already(request.headers.get("if-none-match"), tag):
        return Response(status_code=304, headers=headers)
    return Response(rendered(finding_answer(finding)), 200, headers, JSON)


def _filters(asked: Mapping[str, Any], now: datetime) -> dict[str, Any]:
    filters = dict(asked)
    for name, known in (("severity", SEVERITIES), ("state", STATES)):
        if filters.get(name) is not None:
            filters[name] = _some_of(name, filters[name], known)
    filters.setdefault("state", list(NOT_CLEARED))
    for name, moment in (("older_than_days", "older_than"), ("newer_than_days", "newer_than")):
        if name in filters:
            filters[moment] = now - timedelta(days=_days(name, filters.pop(name)))
    return filters


def _some_of(name: str, text: str, known: Sequence[str]) -> list[str]:
    chosen = [word.strip() for word in text.split(",")]
    if not set(chosen) <= set(known):
        raise FieldsRefused.parameter(name, "not-one-of", f"Some of {', '.join(known)}.")
    return chosen


def _days(name: str, text: str | None) -> float:
    try:
        days = float(text or "")
    except ValueError:
        days = -1.0
    # Written so that what is no number is refused as well.
    if not 0.0 <= days <= MOST_DAYS:
        detail = f"A number of days from 0 to {MOST_DAYS:.0f}."
        raise FieldsRefused.parameter(name, "out-of-range", detail)
    return days


def _listed(
    scope: Scope,
    connection: Connection,
    filters: dict[str, Any],
    listing: Listing,
    _as_of: datetime | None,
) -> tuple[list[dict[str, Any]], int | None]:
    if not _resolve(scope, connection, filters):
        return [], 0 if listing.total else None
    rows = list_findings(
        scope,
        connection,
        filters,
        sort=listing.sort,
        descending=listing.descending,
        after=listing.after,
        limit=listing.limit + 1,
    )
    total = count(scope, connection, filters) if listing.total else None
    return [finding_answer(row) for row in rows], total


def _resolve(scope: Scope, connection: Connection, filters: dict[str, Any]) -> bool:
    """Put ids in place of tags; false: nothing of that name is there for this key."""
    return _resolve_site(scope, connection, filters) and _resolve_room(scope, connection, filters)


def _resolve_room(scope: Scope, connection: Connection, filters: dict[str, Any]) -> bool:
    tag = filters.pop("room", None)
    if tag is None:
        return True
    site_id = filters.get("site_id")
    sites = (
        [site_id] if site_id is not None else [head.site_id for head in heads_of(scope, connection)]
    )
    named = [record_by_tag(scope, connection, "room", site, tag) for site in sites]
    ids = [room.id for room in named if room is not None]
    asked = filters.get("room_id")
    filters["room_id"] = ids if asked is None else [one for one in ids if one == asked]
    return bool(filters["room_id"])


def _resolve_site(scope: Scope, connection: Connection, filters: dict[str, Any]) -> bool:
    """Put the id of a site in place of its tag; false: there is no such site for this key."""
    tag = filters.pop("site", None)
    if tag is None:
        return True
    site = record_by_tag(scope, connection, "site", None, tag)
    if site is None or filters.get("site_id", site.id) != site.id:
        return False
    filters["site_id"] = site.id
    return True


def _listed_at(
    scope: Scope,
    connection: Connection,
    filters: dict[str, Any],
    listing: Listing,
    as_of: datetime,
) -> tuple[list[dict[str, Any]], int | None]:
    if not _resolve(scope, connection, filters):
        return [], 0 if listing.total else None
    wanted_site = filters.pop("site_id", None)
    labels = {name: filters.pop(name) for name in list(filters) if name.startswith(LABEL)}
    older_than, newer_than = filters.pop("older_than", None), filters.pop("newer_than", None)
    rows: list[dict[str, Any]] = []
    for head in heads_of(scope, connection):
        if wanted_site in (None, head.site_id):
            position = position_at(scope, connection, head.site_id, as_of)
            found = findings_at(scope, connection, head.site_id, position)
            rooms = _rooms_labelled(scope, connection, head.site_id, position, labels)
            rows += [row for row in found if rooms is None or row["room_id"] in rooms]
    matching = [
        row
        for row in rows
        if all(_matches(row[name], wanted) for name, wanted in filters.items())
        and (older_than is None or row["opened_at"] < older_than)
        and (newer_than is None or row["opened_at"] >= newer_than)
    ]
    return _page_of(matching, listing), len(matching) if listing.total else None


def _rooms_labelled(
    scope: Scope, connection: Connection, site_id: str, position: int, labels: Mapping[str, Any]
) -> frozenset[str] | None:
    """Name the rooms that had some labels; null: no label was asked for."""
    if not labels:
        return None
    wanted = {name.removeprefix(LABEL): value for name, value in labels.items()}
    return frozenset(
        room.id
        for room in records_at(scope, connection, "room", site_id, position)
        if all(room.fields["labels"].get(name) == value for name, value in wanted.items())
    )


def _matches(value: Any, wanted: Any) -> bool:
    return value in wanted if isinstance(wanted, list) else value == wanted


def _page_of(rows: Sequence[Mapping[str, Any]], listing: Listing) -> list[dict[str, Any]]:
    """Take one page of findings of the past, in the order in which the database gives those now."""
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


def _found(
    scope: Scope, connection: Connection, finding_id: str, as_of: datetime | None
) -> dict[str, Any]:
    finding = get_finding(scope, connection, finding_id) if is_record_id(finding_id) else None
    if finding is None:
        raise RecordNotFound.of("finding")
    if as_of is None:
        return finding
    position = position_at(scope, connection, finding["site_id"], as_of)
    if position == 0:
        raise AsOfTooEarly
    versions = [
        version
        for version in finding_history(scope, connection, finding_id)
        if version["position"] <= position
    ]
    if not versions:
        raise RecordNotFound.of("finding")
    return versions[-1]
