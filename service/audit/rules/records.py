"""Rules on what the records leave open."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from service.audit.assumptions import ASSUMPTIONS
from service.audit.bases import COMMON_PRACTICE
from service.audit.columns import UNKNOWN
from service.audit.rules.kinds import Missing, never
from service.audit.rules.rule import Direction, Judged, Said, Subject, Tables, record_of
from service.audit.rules.words import as_record, listed
from service.audit.severity import MAJOR, MINOR, OBSERVATION
from service.physics.arrays import Mask


@dataclass(frozen=True, slots=True)
class AssumedRule:
    """Fields of a record that were assumed: one finding a record, the fields are its evidence."""

    slug: str
    consequence: int
    decides: bool
    subject: Subject = Subject.ASSUMED
    gas: str | None = None
    worse_is: Direction = Direction.HIGHER
    method: str = "records/assumed"
    source: str = COMMON_PRACTICE

    def judge(self, tables: Tables, at: np.datetime64) -> Judged:
        """Broken where a field was assumed and matters, or where it decides."""
        broken = tables.decides if self.decides else tables.assumed.matters & ~tables.decides
        none = np.full(broken.size, np.nan)
        consequence = np.full(broken.size, self.consequence)
        return Judged(broken, none, none, consequence, never(broken.size))

    def say(self, tables: Tables, judged: Judged, rows: Sequence[int]) -> Said:
        """Name the fields and what was taken instead."""
        record = record_of(tables, self.subject, rows[0])
        codes = [int(tables.assumed.code[row]) for row in rows]
        fields = {
            ASSUMPTIONS[code].field: tables.assumed.value[row]
            for code, row in zip(codes, rows, strict=True)
        }
        taken = listed([f"{name} = {_shown(value)}" for name, value in fields.items()])
        decides = ", and the standing rests on it" if self.decides else ""
        reasons = [ASSUMPTIONS[code].reason for code in codes]
        return Said(
            statement=f"Of {record.tag} it was assumed that {taken}{decides}.",
            remedy=f"Record {listed(list(fields))} of {record.tag}.",
            evidence={"record": as_record(record), "fields": fields, "reasons": reasons},
        )


def _shown(value: float | str | bool) -> str:
    if isinstance(value, bool):
        return "yes" if value else "no"
    return value if isinstance(value, str) else f"{value:.4g}"


@dataclass(frozen=True, slots=True)
class CannotCompute:
    """A room whose numbers are impossible."""

    slug: str = "records/cannot-compute"
    subject: Subject = Subject.GIVEN
    gas: str | None = None
    worse_is: Direction = Direction.HIGHER
    method: str = "records/sound"
    source: str = COMMON_PRACTICE

    def judge(self, tables: Tables, at: np.datetime64) -> Judged:
        """Broken where a room has a sentence that says why it cannot be computed."""
        broken = np.array([sentence is not None for sentence in tables.failed], dtype=np.bool_)
        none = np.full(broken.size, np.nan)
        consequence = np.full(broken.size, MAJOR)
        return Judged(broken, none, none, consequence, never(broken.size))

    def say(self, tables: Tables, judged: Judged, rows: Sequence[int]) -> Said:
        """Repeat the sentence."""
        room, sentence = tables.rooms[rows[0]], tables.failed[rows[0]]
        return Said(
            statement=f"{room.record.tag} cannot be computed: {sentence}",
            remedy="Correct the record; until then the room counts as in need of action.",
            evidence={"record": as_record(room.record), "reason": sentence},
        )


def _holds_other_hazard(tables: Tables) -> Mask:
    """Rooms that hold a toxic or flammable fluid, which this method does not compute yet."""
    table = tables.cases.table
    fluids, found = table.given.fluids, table.sources
    counted = np.ones(found.room.size, dtype=np.bool_)
    counted[: table.stock.present.size] = table.stock.present
    named = counted & (found.fluid != UNKNOWN)
    other = fluids.toxic | fluids.flammable
    rooms = np.zeros(table.given.count, dtype=np.bool_)
    rooms[found.room[named][other[found.fluid[named]]]] = True
    return rooms


def _say_not_computed(tables: Tables, row: int) -> tuple[str, str, Mapping[str, Any]]:
    room = tables.room(row)
    fluids = [vessel.fluid for vessel in room.vessels if vessel.state != "withdrawn"]
    if room.purge_fluid is not None:
        fluids.append(room.purge_fluid)
    hazards = {
        fluid.record.tag: sorted(fluid.hazards & {"toxic", "flammable"})
        for fluid in fluids
        if fluid.hazards & {"toxic", "flammable"}
    }
    named = listed([f"{tag} ({', '.join(kinds)})" for tag, kinds in hazards.items()])
    return (
        f"{room.record.tag} holds {named}; that hazard is not computed yet, only its oxygen.",
        "Have this hazard studied by other means, or move the fluid out of the room.",
        {"hazards": hazards},
    )


RULES: Final = (
    CannotCompute(),
    Missing(
        slug="records/hazard-not-computed",
        subject=Subject.ROOMS,
        missing=_holds_other_hazard,
        consequence=MAJOR,
        words=_say_not_computed,
        method="records/sound",
        source="what cannot be computed needs action; " + COMMON_PRACTICE,
    ),
    AssumedRule(slug="records/assumed", consequence=OBSERVATION, decides=False),
    AssumedRule(slug="records/assumed-deciding", consequence=MINOR, decides=True),
)
