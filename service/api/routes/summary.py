"""The summary for dashboards: counts of sites, and the rooms that stand worst."""

from __future__ import annotations

from hashlib import sha256
from typing import Annotated

from fastapi import APIRouter, Query, Request
from sqlalchemy import Connection
from starlette.responses import Response

from service.api.access import READ, allowed
from service.api.conditional import EntityTag
from service.api.conditional import not_modified as has_it_already
from service.api.deps import JSON, Reader
from service.api.rendering import FRESH
from service.api.routes.declared import READING, answering, not_modified
from service.api.schemas.summary import SummaryRead
from service.changes.answers import rendered
from service.changes.summary import MOST_WORST, summary_document
from service.clock import Clock
from service.errors import RecordNotFound
from service.store.live import get_record, record_by_tag
from service.store.scope import Scope

router = APIRouter(prefix="/v1/summary", tags=["Summary"])

SiteTag = Annotated[str | None, Query(max_length=200, description="The tag of a site.")]
SiteId = Annotated[str | None, Query(max_length=200, description="The id of a site.")]
Worst = Annotated[int, Query(ge=0, le=MOST_WORST, description="How many of the worst rooms.")]


@router.get(
    "",
    dependencies=[allowed(READ)],
    operation_id="getSummary",
    response_model=None,
    responses=answering(SummaryRead, READING, "ETag") | not_modified(),
)
async def get_summary(
    request: Request,
    read: Reader,
    site: SiteTag = None,
    site_id: SiteId = None,
    worst: Worst = 10,
) -> Response:
    """Sum up the sites that a key may see, or one of them: rooms by standing, findings, the worst.

    Send the ETag as If-None-Match; 304 says that nothing has changed.
    """
    body = await read(_summary, read.service.clock, site, site_id, worst)
    tag = str(EntityTag(sha256(body).hexdigest()[:32]))
    headers = {**FRESH, "ETag": tag}
    if has_it_already(request.headers.get("if-none-match"), tag):
        return Response(status_code=304, headers=headers)
    return Response(body, 200, headers, JSON)


def _summary(
    scope: Scope,
    connection: Connection,
    clock: Clock,
    tag: str | None,
    site_id: str | None,
    worst: int,
) -> bytes:
    sites = _sites(scope, connection, tag, site_id)
    return rendered(summary_document(scope, connection, sites, now=clock.now(), worst=worst))


def _sites(
    scope: Scope, connection: Connection, tag: str | None, site_id: str | None
) -> list[str] | None:
    """The site asked for; none: every site that the key may see."""
    if tag is None and site_id is None:
        return None
    by_tag = None if tag is None else record_by_tag(scope, connection, "site", None, tag)
    by_id = None if site_id is None else get_record(scope, connection, "site", site_id)
    found = by_tag or by_id
    told_apart = tag is not None and site_id is not None and by_tag != by_id
    if found is None or told_apart:
        raise RecordNotFound.of("site")
    return [found.id]
