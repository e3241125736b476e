"""The summary for dashboards: an estate in counts, and the rooms that stand worst."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Sequence
from datetime import datetime
from typing import Any, Final

from sqlalchemy import Connection

from service.audit.assessment import METHOD_VERSION, SEVERITIES, STANDINGS
from service.changes.answers import JUDGES
from service.changes.cautions import CAUTIONS
from service.store.scope import Scope
from service.store.summary import (
    IN_SERVICE,
    FindingCount,
    RoomCount,
    SiteLine,
    WorstRoom,
    finding_counts,
    room_counts,
    summary_sites,
    worst_rooms,
)

CURRENCIES: Final = ("current", "recalculating", "behind", "failed")
ROOM_STATES: Final = ("planned", IN_SERVICE, "out-of-service")
MOST_WORST: Final = 100


def summary_document(
    scope: Scope,
    connection: Connection,
    site_ids: Sequence[str] | None,
    *,
    now: datetime,
    worst: int,
) -> dict[str, Any]:
    """Sum up the sites asked for, each and all together; only rooms in service are judged here."""
    sites = summary_sites(scope, connection, site_ids)
    named = [site.site_id for site in sites]
    rooms = room_counts(scope, connection, named, now=now, method_version=METHOD_VERSION)
    findings = finding_counts(scope, connection, named)
    return {
        "judges": JUDGES,
        "method_version": METHOD_VERSION,
        "sites": [_site(site, rooms, findings) for site in sites],
        "total": _counts(rooms, findings),
        "worst_rooms": [
            _worst_room(room, sites) for room in worst_rooms(scope, connection, named, worst)
        ],
        "cautions": CAUTIONS,
    }


def _site(
    site: SiteLine, rooms: Sequence[RoomCount], findings: Sequence[FindingCount]
) -> dict[str, Any]:
    return {
        "site_id": site.site_id,
        "tag": site.tag,
        "name": site.name,
        "demo": site.demo,
        "position": 0 if site.head is None else site.head.position,
        **_counts(
            [room for room in rooms if room.site_id == site.site_id],
            [finding for finding in findings if finding.site_id == site.site_id],
        ),
    }


def _counts(rooms: Sequence[RoomCount], findings: Sequence[FindingCount]) -> dict[str, Any]:
    in_service = [room for room in rooms if room.state == IN_SERVICE]
    return {
        "rooms": _tally(ROOM_STATES, ((room.state, room.count) for room in rooms)),
        "standing": _tally(STANDINGS, ((room.standing, room.count) for room in in_service)),
        "currency": _tally(CURRENCIES, ((room.currency, room.count) for room in in_service)),
        "findings": {
            **_severities(each for each in findings if each.state != "accepted"),
            # What is accepted is never an observation: there would be nothing to accept.
            "accepted": {
                name: count
                for name, count in _severities(
                    each for each in findings if each.state == "accepted"
                ).items()
                if name != SEVERITIES[0]
            },
        },
    }


def _severities(findings: Iterable[FindingCount]) -> dict[str, int]:
    return _tally(reversed(SEVERITIES), ((each.severity, each.count) for each in findings))


def _tally(names: Iterable[str], counted: Iterable[tuple[str, int]]) -> dict[str, int]:
    tally: Counter[str] = Counter()
    for name, count in counted:
        tally[name] += count
    return {name: tally[name] for name in names}


def _worst_room(room: WorstRoom, sites: Sequence[SiteLine]) -> dict[str, Any]:
    site = next(site for site in sites if site.site_id == room.site_id)
    return {
        "room_id": room.room_id,
        "tag": room.tag,
        "name": room.name,
        "site_id": room.site_id,
        "site": site.tag,
        "position": room.position,
        "standing": room.standing,
        "worst_oxygen_pct": room.worst_oxygen_pct,
        "finding": room.finding,
    }
