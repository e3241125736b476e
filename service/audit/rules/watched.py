"""Rules on rooms without a detector for what their gas can do; an oxygen detector is for oxygen."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from service.audit.bases import COMMON_PRACTICE
from service.audit.columns import (
    CARBON_DIOXIDE,
    DETECTOR_STATES,
    NITROUS_OXIDE,
    PLACES,
)
from service.audit.conditions import fraction_of_low_mark
from service.audit.hazards import (
    ABOUT_OXYGEN,
    FLAMMABLE,
    FLAMMABLE_GAS,
    HAZARDS,
    TOXIC,
    flammable_limit,
    of_fluid,
)
from service.audit.inventory import CYLINDER
from service.audit.outages import out_now
from service.audit.rules.kinds import never
from service.audit.rules.rooms import any_of_room, beyond_a_mark, sources_of, sources_there
from service.audit.rules.rule import Direction, Judged, Said, Subject, Tables
from service.audit.rules.words import as_record, listed, number
from service.audit.safeguards import OXYGEN_GAS
from service.audit.severity import MAJOR, MINOR, OBSERVATION
from service.audit.sources import NO_VESSEL
from service.physics.arrays import Integers, Mask

HYDROGEN: Final = "hydrogen"

_IN_SERVICE = DETECTOR_STATES.index("in-service")
_ENTRANCE = PLACES.index("entrance")
_PERCENT: Final = 100.0
_HAZARDS: Final = {(hazard.slug, hazard.gas): row for row, hazard in enumerate(HAZARDS)}


def _watched(tables: Tables, at: np.datetime64) -> npt.NDArray[np.bool_]:
    """Which gases, of (rooms, gases), have a detector that is in service inside the room."""
    given = tables.cases.table.given
    detectors = given.detectors
    works = (detectors.state == _IN_SERVICE) & (detectors.placed != _ENTRANCE)
    works &= ~out_now(detectors.outage_begins, detectors.outage_ends, at)
    watched = np.zeros((given.count, len(given.gases)), dtype=np.bool_)
    watched[detectors.room[works], detectors.gas[works]] = True
    return watched


def _unwatched_rooms(tables: Tables, sources: Integers, at: np.datetime64) -> Mask:
    """Rooms where some of these sources are of a gas that no detector there is for."""
    table = tables.cases.table
    room = table.sources.room[sources]
    gas = table.given.fluids.gas[table.sources.fluid[sources]]
    return any_of_room(tables, room, ~_watched(tables, at)[room, gas])


def _all_sources(tables: Tables) -> Integers:
    return np.flatnonzero(sources_there(tables))


def _is_liquid_hydrogen(tables: Tables, sources: Integers) -> Mask:
    table = tables.cases.table
    vessel = table.sources.vessel[sources]
    hydrogen = np.array([name == HYDROGEN for name in table.given.gases])[table.given.fluids.gas]
    in_vessel = np.flatnonzero(vessel != NO_VESSEL)
    liquid = np.zeros(sources.size, dtype=np.bool_)
    liquid[in_vessel] = table.given.vessels.kind[vessel[in_vessel]] != CYLINDER
    return liquid & of_fluid(hydrogen, table.sources.fluid[sources])


def _is_carbon_dioxide(tables: Tables, sources: Integers) -> Mask:
    table = tables.cases.table
    return of_fluid(table.given.fluids.carbon_dioxide, table.sources.fluid[sources])


def _is_nitrous_oxide(tables: Tables, sources: Integers) -> Mask:
    table = tables.cases.table
    return of_fluid(table.given.fluids.nitrous_oxide, table.sources.fluid[sources])


def _burns(tables: Tables, sources: Integers) -> Mask:
    """Flammable gases; liquid hydrogen has a rule of its own."""
    table = tables.cases.table
    burns = of_fluid(table.given.fluids.flammable, table.sources.fluid[sources])
    return burns & ~_is_liquid_hydrogen(tables, sources)


def _immediate_danger(tables: Tables, row: int) -> tuple[float, str]:
    limit = float(tables.cases.table.given.bases.carbon_dioxide[row, 2])
    return limit, "the level that is an immediate danger"


def _limit_of_shift(tables: Tables, row: int) -> tuple[float, str]:
    return float(tables.cases.table.given.bases.nitrous_oxide[row, 0]), "its limit for 8 h"


def _lower_limit(tables: Tables, row: int) -> tuple[float, str]:
    """The lowest lower flammable limit of the gases in a room."""
    table = tables.cases.table
    mine = sources_of(tables, row)
    mine = mine[_burns(tables, mine)]
    limits = flammable_limit(table.given, table.sources.room[mine], table.sources.fluid[mine])
    lowest = float(np.fmin.reduce(limits, initial=np.nan))
    return lowest, "its lower flammable limit"


@dataclass(frozen=True, slots=True)
class NoOxygenDetector:
    """Rooms that can go beyond a mark of oxygen, with no oxygen detector in service."""

    slug: str = "detectors/missing"
    subject: Subject = Subject.ROOMS
    gas: str | None = "oxygen"
    worse_is: Direction = Direction.HIGHER
    method: str = "records/present"
    source: str = COMMON_PRACTICE

    def judge(self, tables: Tables, at: np.datetime64) -> Judged:
        """Broken where a case that counts is beyond a mark of oxygen."""
        table = tables.cases.table
        beyond = beyond_a_mark(tables, table.counts & ABOUT_OXYGEN[table.hazard])
        return _judged(beyond & ~_watched(tables, at)[:, OXYGEN_GAS], MINOR)

    def say(self, tables: Tables, judged: Judged, rows: Sequence[int]) -> Said:
        """Name the room and the detectors that it has."""
        tag = tables.room(rows[0]).record.tag
        return Said(
            f"{tag} can go beyond a mark of oxygen and has no oxygen detector in service.",
            "Put an oxygen detector where the gas goes first, with an alarm outside every "
            "entrance.",
            _evidence(tables, rows[0]),
        )


@dataclass(frozen=True, slots=True)
class NoDetectorOfItsOwn:
    """Rooms with a gas that harms in another way than by oxygen, and no detector for it.

    Where no case goes beyond a mark of the gas it is an observation, and only if there is an
    oxygen detector: somebody may take that for one.
    """

    slug: str
    gas: str | None
    hazard: str
    is_of_it: Callable[[Tables, Integers], Mask]  # of some sources
    harms: Callable[[Tables, int], tuple[float, str]]  # fraction of the gas, and what it is
    source: str
    subject: Subject = Subject.ROOMS
    worse_is: Direction = Direction.HIGHER
    method: str = "records/present"

    def judge(self, tables: Tables, at: np.datetime64) -> Judged:
        """Broken where a gas of the family has no detector of its own in service."""
        table = tables.cases.table
        sources = _all_sources(tables)
        of_it = sources[self.is_of_it(tables, sources)]
        unwatched = _unwatched_rooms(tables, of_it, at)
        hazard = _HAZARDS[self.hazard, self.gas or ""]
        beyond = beyond_a_mark(tables, table.counts & (table.hazard == hazard))
        relied_on = _watched(tables, at)[:, OXYGEN_GAS]
        judged = _judged(unwatched & (beyond | relied_on), MINOR)
        judged.consequence[~beyond] = OBSERVATION
        return judged

    def say(self, tables: Tables, judged: Judged, rows: Sequence[int]) -> Said:
        """Say that an oxygen detector is none for it, in figures."""
        row = rows[0]
        room, table = tables.room(row).record, tables.cases.table
        mine = sources_of(tables, row)
        fluid = table.sources.fluid[mine[self.is_of_it(tables, mine)]]
        fluids = sorted({table.given.gases[gas] for gas in table.given.fluids.gas[fluid]})
        gas = listed([name.replace("-", " ") for name in fluids])
        first = float(table.conditions.low_marks[row, 0])
        fraction = float(fraction_of_low_mark(np.array(first)))
        limit, name = self.harms(tables, row)
        times = _times_text(fraction / limit)
        return Said(
            f"{room.tag} holds {gas} and has no detector of its own for it in service; an oxygen "
            f"detector is none: when oxygen is down to {_PERCENT * first:.4g} % there is "
            f"{_PERCENT * fraction:.3g} % of the gas in the air, {times} times {name}.",
            f"Put a detector of {gas} where the gas goes first, with an alarm outside every "
            "entrance.",
            {
                "fluids": fluids,
                "gas_at_oxygen_alarm_pct": number(_PERCENT * fraction),
                "limit_pct": number(_PERCENT * limit),
                **_evidence(tables, row),
            },
        )


@dataclass(frozen=True, slots=True)
class NoHydrogenDetector:
    """Rooms with liquid hydrogen and no hydrogen detector in service."""

    slug: str = "detectors/hydrogen-missing"
    subject: Subject = Subject.ROOMS
    gas: str | None = HYDROGEN
    worse_is: Direction = Direction.HIGHER
    method: str = "records/present"
    source: str = COMMON_PRACTICE

    def judge(self, tables: Tables, at: np.datetime64) -> Judged:
        """Broken wherever liquid hydrogen is, however large the room."""
        sources = _all_sources(tables)
        liquid = sources[_is_liquid_hydrogen(tables, sources)]
        return _judged(_unwatched_rooms(tables, liquid, at), MAJOR)

    def say(self, tables: Tables, judged: Judged, rows: Sequence[int]) -> Said:
        """Name the vessels."""
        row, table = rows[0], tables.cases.table
        room, mine = tables.room(row), sources_of(tables, row)
        liquid = mine[_is_liquid_hydrogen(tables, mine)]
        vessels = [
            room.vessels[int(table.given.vessels.source[vessel])].record
            for vessel in table.sources.vessel[liquid]
        ]
        return Said(
            f"{room.record.tag} holds liquid hydrogen in "
            f"{listed([vessel.tag for vessel in vessels])} and has no hydrogen detector in "
            "service.",
            "Put a hydrogen detector within 0.5 m of the ceiling, with an alarm outside every "
            "entrance, or keep liquid hydrogen outdoors.",
            {"vessels": [as_record(vessel) for vessel in vessels], **_evidence(tables, row)},
        )


def _times_text(times: float) -> str:
    return f"{times:.2f}" if times < 100.0 else f"{times:.0f}"


def _judged(broken: Mask, consequence: int) -> Judged:
    none = np.full(broken.size, np.nan)
    # What turns here are outages, which are asked for apart.
    return Judged(broken, none, none, np.full(broken.size, consequence), never(broken.size))


def _evidence(tables: Tables, row: int) -> dict[str, object]:
    room = tables.room(row)
    return {
        "record": as_record(room.record),
        "detectors": [as_record(detector.record) for detector in room.detectors],
    }


RULES: Final = (
    NoOxygenDetector(),
    NoDetectorOfItsOwn(
        slug="detectors/carbon-dioxide-missing",
        gas=CARBON_DIOXIDE,
        hazard=TOXIC,
        is_of_it=_is_carbon_dioxide,
        harms=_immediate_danger,
        source="NIOSH IDLH (from memory); " + COMMON_PRACTICE,
    ),
    NoDetectorOfItsOwn(
        slug="detectors/nitrous-oxide-missing",
        gas=NITROUS_OXIDE,
        hazard=TOXIC,
        is_of_it=_is_nitrous_oxide,
        harms=_limit_of_shift,
        source="NIOSH REL or EH40 WEL (from memory); " + COMMON_PRACTICE,
    ),
    NoDetectorOfItsOwn(
        slug="detectors/flammable-missing",
        gas=FLAMMABLE_GAS,
        hazard=FLAMMABLE,
        is_of_it=_burns,
        harms=_lower_limit,
        source="lower limits of IEC 60079-20-1 or NFPA (from memory); " + COMMON_PRACTICE,
    ),
    NoHydrogenDetector(),
)
