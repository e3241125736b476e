"""Values -> assessments and findings: the pure middle of every change and every question."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from types import MappingProxyType
from typing import Final

from service.audit.assessment import Assessment
from service.audit.findings import Finding, clear, reconcile, standing
from service.audit.inputs import RoomValues
from service.audit.judge import assess_rooms
from service.changes.apply import Applied
from service.changes.neighbourhood import Neighbourhood, ReadRecord
from service.changes.room_values import values_of_rooms
from service.store.records import Record

_NOTHING_READ: Final[Mapping[str, frozenset[ReadRecord]]] = MappingProxyType({})


@dataclass(frozen=True, slots=True)
class Assessed:
    """One room: what its records say, what of that is news, and all findings as they then stand."""

    values: RoomValues
    assessment: Assessment
    news: tuple[Finding, ...]
    findings: tuple[Finding, ...]
    returned: frozenset[str]  # findings that were cleared or accepted and stand open again
    standing: str

    @property
    def worst_oxygen_pct(self) -> float | None:
        """Give the lowest oxygen of the cases that count; none for an empty room."""
        lowest = [
            case.oxygen_pct
            for case in (*self.assessment.cases, *self.assessment.incoming)
            if case.counts and case.hazard == "oxygen-low"
        ]
        return min(lowest, default=None)


def assess(
    records: Mapping[str, Record],
    room_ids: Iterable[str],
    findings: Mapping[str, Sequence[Finding]],
    *,
    at: datetime,
    positions: Mapping[str, int],
    new_id: Callable[[], str],
    around: frozenset[str] = frozenset(),
    last_read: Mapping[str, frozenset[ReadRecord]] = _NOTHING_READ,
) -> tuple[Assessed, ...]:
    """Assess rooms at a moment and match the outcome with earlier findings.

    ``positions`` are the positions that the sites' changes will have. Rooms of ``around`` are
    there for the gas between rooms; of these the ones in ``last_read`` are assessed as well, where
    they now rest on other records than those they were last assessed from.
    """
    asked = frozenset(room_ids)
    if not asked:
        return ()
    joined = last_read.keys() - asked
    rooms = values_of_rooms(records, asked | joined)
    beside = values_of_rooms(records, around - asked - joined)
    return tuple(
        _matched(
            room, assessment, findings.get(room.record.id, ()), at, positions[room.site.id], new_id
        )
        for room, assessment in zip(rooms, assess_rooms(rooms, at=at, beside=beside), strict=True)
        if room.record.id in asked or _read(assessment) != last_read[room.record.id]
    )


def _read(assessment: Assessment) -> frozenset[ReadRecord]:
    return frozenset((record.id, record.revision) for record in assessment.read)


def findings_of_gone(
    after: Applied, before: Neighbourhood, *, at: datetime, positions: Mapping[str, int]
) -> tuple[Finding, ...]:
    """Clear the findings of rooms that the change removes: no calculation will do it later."""
    gone = [pair.before for pair in after.pairs if pair.after is None and pair.before is not None]
    return tuple(
        finding
        for room in gone
        if room.kind == "room" and room.site_id is not None
        for finding in clear(
            before.findings.get(room.id, ()), at=at, position=positions[room.site_id]
        )
    )


def _matched(
    room: RoomValues,
    assessment: Assessment,
    prior: Sequence[Finding],
    at: datetime,
    position: int,
    new_id: Callable[[], str],
) -> Assessed:
    news = reconcile(
        prior,
        assessment.judgements,
        room=room,
        at=at,
        position=position,
        reopen_days=int(room.basis.values["reopen_days"]),
        new_id=new_id,
    )
    replaced = {finding.id for finding in news}
    after = tuple(f for f in prior if f.id not in replaced) + tuple(news)
    rested = {finding.id for finding in prior if finding.state in ("cleared", "accepted")}
    returned = frozenset(f.id for f in news if f.state == "open" and f.id in rested)
    failed = assessment.failed is not None
    return Assessed(room, assessment, tuple(news), after, returned, standing(after, failed=failed))
