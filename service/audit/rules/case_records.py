"""Which records each case lets go, laid out once for many rooms."""

import itertools
from collections.abc import Sequence
from dataclasses import dataclass

from service.audit.cases import CaseTable
from service.audit.inputs import Reference, RoomValues
from service.audit.sources import NO_LINE, NO_VESSEL
from service.physics.arrays import Integers

UNKNOWN_PURGE_GAS = "unknown purge gas"


@dataclass(frozen=True, slots=True)
class CaseRecords:
    """One entry a case, in record order."""

    sources: Sequence[Sequence[int]]  # rows of the sources
    vessels: Sequence[tuple[Reference, ...]]
    lines: Sequence[tuple[Reference, ...]]
    fluids: Sequence[tuple[str, ...]]  # tags, each once


def case_records(rooms: Sequence[RoomValues], sound: Integers, table: CaseTable) -> CaseRecords:
    """Look up what each case lets go."""
    named = _source_records(rooms, sound, table)
    members, starts = table.member_source.tolist(), table.member_start.tolist()
    sources = [members[first:end] for first, end in itertools.pairwise(starts)]
    found = [[named[source] for source in row] for row in sources]
    return CaseRecords(
        sources,
        vessels=[_of_kind(row, "vessel") for row in found],
        lines=[_of_kind(row, "supply-line") for row in found],
        fluids=[tuple(dict.fromkeys(fluid for _, fluid in row)) for row in found],
    )


def _of_kind(found: Sequence[tuple[Reference | None, str]], kind: str) -> tuple[Reference, ...]:
    return tuple(record for record, _ in found if record is not None and record.kind == kind)


def _source_records(
    rooms: Sequence[RoomValues], sound: Integers, table: CaseTable
) -> list[tuple[Reference | None, str]]:
    """The vessel or line and the tag of the fluid of each source; purge gas has neither."""
    place, line_place = table.given.vessels.source.tolist(), table.given.lines.source.tolist()
    named: list[tuple[Reference | None, str]] = []
    for room, vessel, line in zip(
        sound[table.sources.room].tolist(),
        table.sources.vessel.tolist(),
        table.sources.line.tolist(),
        strict=True,
    ):
        if line != NO_LINE:
            supply = rooms[room].lines[line_place[line]]
            named.append((supply.record, supply.fluid.record.tag))
        elif vessel == NO_VESSEL:
            fluid = rooms[room].purge_fluid
            named.append((None, UNKNOWN_PURGE_GAS if fluid is None else fluid.record.tag))
        else:
            found = rooms[room].vessels[place[vessel]]
            named.append((found.record, found.fluid.record.tag))
    return named
