"""Values -> assessments and findings: the pure middle of every change and every question."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime

from service.audit.assessment import Assessment
from service.audit.findings import Finding, clear, reconcile, standing
from service.audit.inputs import RoomValues
from service.audit.judge import assess_rooms
from service.changes.apply import Applied
from service.changes.neighbourhood import Neighbourhood
from service.changes.room_values import values_of_rooms
from service.store.records import Record


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
            for case in self.assessment.cases
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
) -> tuple[Assessed, ...]:
    """Assess rooms at a moment and match the outcome with earlier findings.

    ``positions`` are the positions that the sites' changes will have.
    """
    rooms = values_of_rooms(records, room_ids)
    if not rooms:
        return ()
    return tuple(
        _matched(
            room, assessment, findings.get(room.record.id, ()), at, positions[room.site.id], new_id
        )
        for room, assessment in zip(rooms, assess_rooms(rooms, at=at), strict=True)
    )


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
