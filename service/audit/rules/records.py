"""Rules on what the records leave open."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from service.audit.assumptions import ASSUMPTIONS
from service.audit.bases import COMMON_PRACTICE
from service.audit.columns import FILLED_BY, VESSEL_STATES, Moments, all_of
from service.audit.hazards import flammable_limit, of_fluid
from service.audit.rules import plausible
from service.audit.rules.kinds import Missing, Overdue, never
from service.audit.rules.rooms import any_of_room, sources_of, sources_there
from service.audit.rules.rule import Direction, Judged, Said, Subject, Tables, record_of
from service.audit.rules.words import as_record, listed
from service.audit.severity import MAJOR, MINOR, OBSERVATION
from service.physics.arrays import Integers, Mask

_EMPTY = VESSEL_STATES.index("empty")
_AUTOMATIC = FILLED_BY.index("automatic")


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


def _poisons_unknown(tables: Tables, sources: Integers) -> Mask:
    """Sources of a site's own gas that poisons."""
    fluids = tables.cases.table.given.fluids
    toxic = fluids.toxic & ~fluids.carbon_dioxide & ~fluids.nitrous_oxide
    return of_fluid(toxic, tables.cases.table.sources.fluid[sources])


def _burns_unknown(tables: Tables, sources: Integers) -> Mask:
    """Sources of a site's own gas that burns, with no limit to hold it against."""
    table = tables.cases.table
    room, fluid = table.sources.room[sources], table.sources.fluid[sources]
    limit = flammable_limit(table.given, room, fluid)
    return of_fluid(table.given.fluids.flammable, fluid) & ~(limit > 0.0)


_UNKNOWN_HAZARDS: Final = (("flammable", _burns_unknown), ("toxic", _poisons_unknown))


def _holds_other_hazard(tables: Tables) -> Mask:
    """Rooms that hold a gas whose hazard this method cannot compute."""
    sources = np.flatnonzero(sources_there(tables))
    unknown = _burns_unknown(tables, sources) | _poisons_unknown(tables, sources)
    return any_of_room(tables, tables.cases.table.sources.room[sources], unknown)


def _say_not_computed(tables: Tables, row: int) -> tuple[str, str, Mapping[str, Any]]:
    table = tables.cases.table
    mine = sources_of(tables, row)
    hazards: dict[str, list[str]] = {}
    for name, is_unknown in _UNKNOWN_HAZARDS:
        fluids = table.sources.fluid[mine[is_unknown(tables, mine)]]
        for fluid in dict.fromkeys(fluids.tolist()):
            gas = table.given.gases[int(table.given.fluids.gas[fluid])]
            hazards.setdefault(gas, []).append(name)
    tag = tables.room(row).record.tag
    named = listed([f"{gas} ({', '.join(kinds)})" for gas, kinds in hazards.items()])
    return (
        f"{tag} holds {named}, for which no limit is known: that hazard is not computed, only its "
        "oxygen.",
        "Have this hazard studied by other means, or move the fluid out of the room.",
        {"hazards": hazards},
    )


def _count_due(tables: Tables) -> Moments:
    due: Moments = tables.cases.table.given.vessels.count_due
    return due


def _is_shown_as_recorded(tables: Tables) -> Mask:
    """Vessels whose recorded contents are shown beside the full reading that counts.

    Where the recorded reading is what is wanted, a lapsed count is an assumption, and told as one.
    """
    table = tables.cases.table
    vessels = table.given.vessels
    recorded = ~np.isnan(vessels.contents_volume) | ~np.isnan(vessels.contents_mass)
    wanted = table.given.bases.as_recorded[vessels.room] | (vessels.state == _EMPTY)
    by_hand = vessels.filled_by != _AUTOMATIC
    return all_of(table.stock.present, recorded, ~wanted, by_hand, ~np.isnat(vessels.count_due))


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
    Overdue(
        slug="records/count-stale",
        subject=Subject.VESSELS,
        applies=_is_shown_as_recorded,
        due=_count_due,
        overdue="The count of what {tag} holds has been overdue since {due}.",
        never_done="What {tag} holds was never counted.",
        remedy="Read the contents again and record when; until then it is taken full.",
        consequence=OBSERVATION,
        method="records/due-dates",
        source="count_every_days of the basis; " + COMMON_PRACTICE,
    ),
    AssumedRule(slug="records/assumed", consequence=OBSERVATION, decides=False),
    AssumedRule(slug="records/assumed-deciding", consequence=MINOR, decides=True),
    *plausible.RULES,
)
