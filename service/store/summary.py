"""Rooms and findings counted, and the rooms that stand worst: a few queries for any estate."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Any, Final

from sqlalchemy import Connection, Select, Subquery, case, func, or_, select

from service.store.heads import INSTALLATION, Head, heads_of
from service.store.scope import Scope, within
from service.store.tables.registry import FINDING, HEAD, ROOM_STATE, TABLES

IN_SERVICE: Final = "in-service"

_ROOM: Final = TABLES["room"]
_SITE: Final = TABLES["site"]
_RANKS: Final = {"stop": 3, "action": 2, "attention": 1, "in-order": 0}
_STANDS: Final = ("open", "acknowledged", "accepted")
_NOT_ACCEPTED: Final = ("open", "acknowledged")
_GRAVEST_FIRST: Final = ("critical", "major", "minor")
# How far a finding takes the standing of its room; what is accepted counts one step lower, and
# never nothing where it was major or critical.
_STEPS: Final = {"critical": 3, "major": 2, "minor": 1, "observation": 0}
_ACCEPTED_STEPS: Final = {"critical": 2, "major": 1, "minor": 0, "observation": 0}
# Rooms that cannot be computed stand before those whose oxygen is known.
_UNKNOWN_OXYGEN: Final = -1.0
_NO_CASE: Final = 101.0


@dataclass(frozen=True, slots=True)
class SiteLine:
    """A site of the summary, and where its history stands."""

    site_id: str
    tag: str
    name: str | None
    demo: bool
    head: Head | None


@dataclass(frozen=True, slots=True)
class SiteState:
    """What the line of a site can change by: its history, and the clock."""

    site_id: str
    position: int
    chain_hash: str
    wanted_position: int
    due: int
    """How many of its rooms may have turned by the clock alone."""


@dataclass(frozen=True, slots=True)
class RoomCount:
    """How many rooms of a site are in a state, a standing and a currency."""

    site_id: str
    state: str
    standing: str
    currency: str
    count: int


@dataclass(frozen=True, slots=True)
class FindingCount:
    """How many findings of rooms in service are in a state and of a severity."""

    site_id: str
    state: str
    severity: str
    count: int


@dataclass(frozen=True, slots=True)
class WorstRoom:
    """A room of the summary's list, with the finding that sets its standing."""

    room_id: str
    site_id: str
    tag: str
    name: str | None
    standing: str
    worst_oxygen_pct: float | None
    position: int
    finding: dict[str, Any] | None


def site_states(
    scope: Scope, connection: Connection, site_ids: Sequence[str] | None, *, now: datetime
) -> list[SiteState]:
    """Return where sites stand, without a look at any room that is not due; none named: all.

    Two summaries of equal states are equal: whatever else they tell moves a head when it changes.
    """
    # What belongs to no site is in no summary.
    heads = select(HEAD).where(HEAD.c.site_id != INSTALLATION).order_by(HEAD.c.site_id)
    # Counted here: where the database groups by site, SQLite walks through all rooms for it.
    turned = select(ROOM_STATE.c.site_id).where(ROOM_STATE.c.turns_at <= now)
    of_sites = _asked(within(scope, turned, ROOM_STATE.c.site_id), ROOM_STATE.c.site_id, site_ids)
    due = Counter(connection.execute(of_sites).scalars())
    asked = _asked(within(scope, heads, HEAD.c.site_id), HEAD.c.site_id, site_ids)
    return [
        SiteState(
            row.site_id,
            row.position,
            row.chain_hash,
            row.wanted_position,
            due[row.site_id],
        )
        for row in connection.execute(asked)
    ]


def summary_sites(
    scope: Scope, connection: Connection, site_ids: Sequence[str] | None
) -> list[SiteLine]:
    """Return the sites of a summary in the order of their tags; none named: all of the scope."""
    columns = (_SITE.c.id, _SITE.c.tag, _SITE.c.name, _SITE.c.demo)
    query = _asked(within(scope, select(*columns), _SITE.c.id), _SITE.c.id, site_ids)
    heads = {head.site_id: head for head in heads_of(scope, connection)}
    return [
        SiteLine(row.id, row.tag, row.name, bool(row.demo), heads.get(row.id))
        for row in connection.execute(query.order_by(_SITE.c.tag_folded, _SITE.c.id))
    ]


def room_counts(
    scope: Scope,
    connection: Connection,
    site_ids: Sequence[str],
    *,
    now: datetime,
    method_version: str,
) -> list[RoomCount]:
    """Return rooms counted by site, state, standing and currency."""
    old = or_(
        ROOM_STATE.c.position < HEAD.c.wanted_position,
        ROOM_STATE.c.method_version != method_version,
    )
    currency = case(
        (ROOM_STATE.c.failed, "failed"),
        (old, "recalculating"),
        (ROOM_STATE.c.turns_at <= now, "behind"),
        else_="current",
    ).label("currency")
    keys = (ROOM_STATE.c.site_id, _ROOM.c.state, ROOM_STATE.c.standing)
    query = (
        select(*keys, currency, func.count().label("counted"))
        .join(_ROOM, _ROOM.c.id == ROOM_STATE.c.room_id)
        .join(HEAD, HEAD.c.site_id == ROOM_STATE.c.site_id)
        .group_by(*keys, currency)
    )
    asked = _asked(within(scope, query, ROOM_STATE.c.site_id), ROOM_STATE.c.site_id, site_ids)
    return [
        RoomCount(row.site_id, row.state, row.standing, row.currency, row.counted)
        for row in connection.execute(asked)
    ]


def finding_counts(
    scope: Scope, connection: Connection, site_ids: Sequence[str]
) -> list[FindingCount]:
    """Return findings that stand in rooms in service, counted by site, state and severity.

    Those cleared may be many times as many; naming sites and states lets the index skip them.
    """
    keys = (FINDING.c.site_id, FINDING.c.state, FINDING.c.severity)
    query = (
        select(*keys, func.count().label("counted"))
        .join(_ROOM, _ROOM.c.id == FINDING.c.room_id)
        .where(FINDING.c.state.in_(_STANDS), _ROOM.c.state == IN_SERVICE)
        .group_by(*keys)
    )
    asked = _asked(within(scope, query, FINDING.c.site_id), FINDING.c.site_id, site_ids)
    return [
        FindingCount(row.site_id, row.state, row.severity, row.counted)
        for row in connection.execute(asked)
    ]


def worst_rooms(
    scope: Scope, connection: Connection, site_ids: Sequence[str], limit: int
) -> list[WorstRoom]:
    """Return the rooms in service that stand worst.

    By standing, then by how many findings of each severity are not accepted, the gravest first,
    then by their lowest oxygen.
    """
    found = _found_by_severity(scope, site_ids)
    most = [func.coalesce(found.c[severity], 0).desc() for severity in _GRAVEST_FIRST]
    rank = case(_RANKS, value=ROOM_STATE.c.standing, else_=0)
    oxygen = case(
        (ROOM_STATE.c.failed, _UNKNOWN_OXYGEN),
        else_=func.coalesce(ROOM_STATE.c.worst_oxygen_pct, _NO_CASE),
    )
    query = (
        select(
            ROOM_STATE.c.room_id,
            ROOM_STATE.c.site_id,
            _ROOM.c.tag,
            _ROOM.c.name,
            ROOM_STATE.c.standing,
            ROOM_STATE.c.worst_oxygen_pct,
            ROOM_STATE.c.position,
        )
        .join(_ROOM, _ROOM.c.id == ROOM_STATE.c.room_id)
        .outerjoin(found, found.c.room_id == ROOM_STATE.c.room_id)
        .where(_ROOM.c.state == IN_SERVICE, ROOM_STATE.c.standing != "in-order")
        .order_by(rank.desc(), *most, oxygen, _ROOM.c.tag_folded, ROOM_STATE.c.room_id)
        .limit(limit)
    )
    asked = _asked(within(scope, query, ROOM_STATE.c.site_id), ROOM_STATE.c.site_id, site_ids)
    rows = connection.execute(asked).mappings().all()
    findings = _deciding(scope, connection, [row["room_id"] for row in rows])
    return [WorstRoom(**row, finding=findings.get(row["room_id"])) for row in rows]


def _found_by_severity(scope: Scope, site_ids: Sequence[str]) -> Subquery:
    """How many findings that are not accepted each room has, by severity."""
    counted = [
        func.sum(case((FINDING.c.severity == severity, 1), else_=0)).label(severity)
        for severity in _GRAVEST_FIRST
    ]
    query = select(FINDING.c.room_id, *counted).where(
        FINDING.c.site_id.in_(site_ids),
        FINDING.c.state.in_(_NOT_ACCEPTED),
        FINDING.c.severity.in_(_GRAVEST_FIRST),
    )
    return within(scope, query, FINDING.c.site_id).group_by(FINDING.c.room_id).subquery()


def _deciding(
    scope: Scope, connection: Connection, room_ids: Sequence[str]
) -> dict[str, dict[str, Any]]:
    """The finding that sets the standing of each room, the oldest where there are several."""
    told = ("id", "rule", "gas", "severity", "state", "measure", "limit", "worse_is", "statement")
    query = select(FINDING.c.room_id, *(FINDING.c[name] for name in told)).where(
        FINDING.c.room_id.in_(room_ids), FINDING.c.state.in_(_STANDS)
    )
    severity = FINDING.c.severity
    step = case(
        (FINDING.c.state == "accepted", case(_ACCEPTED_STEPS, value=severity, else_=0)),
        else_=case(_STEPS, value=severity, else_=0),
    )
    ordered = within(scope, query, FINDING.c.site_id).order_by(step.desc(), FINDING.c.id)
    deciding: dict[str, dict[str, Any]] = {}
    for row in connection.execute(ordered).mappings():
        deciding.setdefault(row["room_id"], {name: row[name] for name in told})
    return deciding


def _asked(query: Select[Any], column: Any, site_ids: Sequence[str] | None) -> Select[Any]:
    return query if site_ids is None else query.where(column.in_(site_ids))
