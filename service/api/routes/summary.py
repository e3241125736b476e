"""The summary for dashboards: counts of sites, and the rooms that stand worst."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
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
from service.api.service import Service
from service.audit.assessment import METHOD_VERSION
from service.changes.answers import rendered
from service.changes.summary import MOST_WORST, summary_document
from service.errors import RecordNotFound
from service.store.live import get_record, record_by_tag
from service.store.scope import Scope
from service.store.summary import SiteState, site_states

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
    asked = _Asked(site, site_id, worst, request.headers.get("if-none-match"))
    tag, body = await read(_summary, read.service, asked)
    headers = {**FRESH, "ETag": tag}
    if body is None:
        return Response(status_code=304, headers=headers)
    return Response(body, 200, headers, JSON)


@dataclass(frozen=True, slots=True)
class _Asked:
    """Which summary is asked for, and which the caller has."""

    tag: str | None
    site_id: str | None
    worst: int
    held: str | None


def _summary(
    scope: Scope, connection: Connection, service: Service, asked: _Asked
) -> tuple[str, bytes | None]:
    """Give the tag of a summary and its body; none where the caller has it already."""
    now = service.clock.now()
    sites = _sites(scope, connection, asked.tag, asked.site_id)
    tag = _tag(site_states(scope, connection, sites, now=now), asked.worst)
    if has_it_already(asked.held, tag):
        return tag, None
    body = service.summaries.get(tag)
    if body is None:
        document = summary_document(scope, connection, sites, now=now, worst=asked.worst)
        body = rendered(document)
        service.summaries.put(tag, body)
    return tag, body


def _tag(sites: Sequence[SiteState], worst: int) -> str:
    """Name a summary by where its sites stand: found without making it."""
    stands = repr((METHOD_VERSION, worst, sites))
    return str(EntityTag(sha256(stands.encode()).hexdigest()[:32]))


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
