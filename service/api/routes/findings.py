"""Findings: what the records of rooms show to be wrong."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from datetime import datetime, timedelta
from typing import Annotated, Any, Final

from fastapi import APIRouter, Depends, Path, Request
from sqlalchemy import Connection
from starlette.responses import Response

from service.api.access import READ, READ_PAST, allowed
from service.api.conditional import not_modified as has_it_already
from service.api.conditional import record_tag
from service.api.deps import JSON, AsOf, Reader
from service.api.fields import is_record_id
from service.api.lists import Asking, Listing
from service.api.past_findings import findings_listed_at
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
from service.clock import moment_of
from service.errors import AsOfTooEarly, FieldsRefused, RecordNotFound
from service.store.findings import (
    count,
    count_history,
    finding_at,
    finding_history,
    get_finding,
    list_findings,
)
from service.store.heads import heads_of, position_at
from service.store.live import list_records, record_by_tag
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
    "opened_before": Filter("Opened before a moment, such as 2027-03-01T08:00:00Z."),
    "opened_since": Filter("Opened at a moment or later."),
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
    found = _listed if as_of is None else findings_listed_at
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


@router.get(
    "/{finding_id}/versions",
    dependencies=[allowed(READ_PAST)],
    operation_id="listFindingVersions",
    response_model=None,
    responses=answering(FindingPage, (*LISTING, RecordNotFound), "Link"),
)
async def list_versions(
    finding_id: Id,
    listing: Annotated[Listing, Depends(Asking({}, frozenset({"number"}), "number", labels=False))],
    read: Reader,
) -> Response:
    """List what a finding was: opened, worse or better, owned, accepted by whom, cleared."""
    items, total = await read(_versions, finding_id, listing)
    keys = [(item["number"], item["id"]) for item in items]
    return listing.page(items, keys, total, cautions=CAUTIONS)


def _filters(asked: Mapping[str, Any], now: datetime) -> dict[str, Any]:
    filters = dict(asked)
    for name, known in (("severity", SEVERITIES), ("state", STATES)):
        if filters.get(name) is not None:
            filters[name] = _some_of(name, filters[name], known)
    filters.setdefault("state", list(NOT_CLEARED))
    older, newer = _ages(filters, now)
    if older:
        filters["older_than"] = min(older)
    if newer:
        filters["newer_than"] = max(newer)
    return filters


def _ages(filters: dict[str, Any], now: datetime) -> tuple[list[datetime], list[datetime]]:
    """Take the filters by age out: opened before each of these, and since each of those."""
    days, moments = ("older_than_days", "newer_than_days"), ("opened_before", "opened_since")
    older, newer = (
        [now - timedelta(days=_days(by_days, filters.pop(by_days)))] if by_days in filters else []
        for by_days in days
    )
    for name, found in zip(moments, (older, newer), strict=True):
        if name in filters:
            found.append(_moment(name, filters.pop(name)))
    return older, newer


def _moment(name: str, text: str | None) -> datetime:
    try:
        return moment_of(text or "")
    except ValueError as error:
        raise FieldsRefused.parameter(name, "not-a-moment", str(error)) from None


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
    if not _resolve_site(scope, connection, filters):
        return False
    if not _resolve_room(scope, connection, filters):
        return False
    if not filters.keys() & {"site_id", "room_id"}:
        # By site and state the index skips what is cleared, which is nearly all of it in time.
        filters["site_id"] = [head.site_id for head in heads_of(scope, connection)]
    return True


def _resolve_room(scope: Scope, connection: Connection, filters: dict[str, Any]) -> bool:
    if "room" not in filters:
        return True
    tag = filters.pop("room")
    if tag is None:
        return False
    asked = {name: filters[name] for name in ("site_id",) if name in filters}
    # A tag is there once a site at most.
    sites = len(heads_of(scope, connection)) + 1
    named = list_records(
        scope,
        connection,
        "room",
        {"tag": tag, **asked},
        sort="id",
        descending=False,
        after=None,
        limit=sites,
    )
    ids = [room.id for room in named]
    wanted = filters.get("room_id")
    filters["room_id"] = ids if wanted is None else [one for one in ids if one == wanted]
    return bool(filters["room_id"])


def _resolve_site(scope: Scope, connection: Connection, filters: dict[str, Any]) -> bool:
    """Put the id of a site in place of its tag; false: there is no such site for this key."""
    if "site" not in filters:
        return True
    tag = filters.pop("site")
    site = None if tag is None else record_by_tag(scope, connection, "site", None, tag)
    if site is None or filters.get("site_id", site.id) != site.id:
        return False
    filters["site_id"] = site.id
    return True


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
    then = finding_at(scope, connection, finding_id, position)
    if then is None:
        raise RecordNotFound.of("finding")
    return then


def _versions(
    scope: Scope, connection: Connection, finding_id: str, listing: Listing
) -> tuple[list[dict[str, Any]], int | None]:
    _found(scope, connection, finding_id, None)
    rows = finding_history(
        scope,
        connection,
        finding_id,
        descending=listing.descending,
        after=listing.after,
        limit=listing.limit + 1,
    )
    total = count_history(scope, connection, finding_id) if listing.total else None
    return [finding_answer(row) for row in rows], total
