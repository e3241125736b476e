"""Rules on numbers that can stand in a record and hardly be: one finding a record."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np

from service.audit.air import AIRFLOWS, AS_MEASURED
from service.audit.bases import COMMON_PRACTICE
from service.audit.columns import VESSEL_KINDS, all_of, is_one_of
from service.audit.rules.kinds import never
from service.audit.rules.rule import (
    Direction,
    Judged,
    Said,
    Subject,
    Tables,
    record_of,
    rooms_of,
)
from service.audit.rules.vessels import ABOVE_RATED
from service.audit.rules.words import as_record, listed, number
from service.audit.severity import OBSERVATION
from service.physics.arrays import Floats, Integers, Mask, quotient, rounded
from service.physics.constants import SECONDS_PER_DAY, SECONDS_PER_HOUR

_AS_MEASURED: Final = AIRFLOWS.index(AS_MEASURED)
_PERCENT: Final = 100.0
_CLOSED: Final = [
    VESSEL_KINDS.index(kind)
    for kind in ("pressurised-dewar", "freezer", "tank", "cryostat", "magnet")
]

# What is hardly met in practice. Common practice, no source.
VOLUME_OFF_BY: Final = 20.0  # [%] of floor times height
HIGHEST_ROOM: Final = 20.0  # [m]
MOST_OCCUPIED: Final = 70.0  # [%]
MOST_AIR_CHANGES: Final = 60.0  # [1/h]
MOST_OF_DESIGN: Final = 150.0  # [%]
MOST_EVAPORATION: Final = 20.0  # [%/day] of the capacity of a closed vessel


@dataclass(frozen=True, slots=True)
class Doubt:
    """A number of a record that is hardly met above a limit."""

    name: str  # in the evidence, with its unit
    value: Callable[[Tables, Integers], Floats]  # of some rows
    limit: float
    reason: str

    def holds(self, tables: Tables, rows: Integers) -> Mask:
        """Tell where it is above; not-a-number, which is not recorded, is not."""
        above: Mask = self.value(tables, rows) > self.limit
        return above


@dataclass(frozen=True, slots=True)
class Implausible:
    """Records with numbers that are hardly met, all of them in one finding."""

    slug: str
    subject: Subject
    doubts: Sequence[Doubt]
    gas: str | None = None
    worse_is: Direction = Direction.HIGHER
    method: str = "records/plausible"
    source: str = COMMON_PRACTICE

    def judge(self, tables: Tables, at: np.datetime64) -> Judged:
        """Broken where any number is doubtful; the measure is how many are."""
        rows = np.arange(rooms_of(tables, self.subject).size)
        doubtful = np.stack([doubt.holds(tables, rows) for doubt in self.doubts])
        many = doubtful.sum(axis=0).astype(np.float64)
        return Judged(
            broken=many > 0.0,
            measure=many,
            limit=np.zeros(many.size),
            consequence=np.full(many.size, OBSERVATION),
            turns_at=never(many.size),
        )

    def say(self, tables: Tables, judged: Judged, rows: Sequence[int]) -> Said:
        """Name each number with what is met in practice."""
        record, row = record_of(tables, self.subject, rows[0]), np.array(rows[:1])
        found = [doubt for doubt in self.doubts if doubt.holds(tables, row)[0]]
        values = {doubt.name: float(doubt.value(tables, row)[0]) for doubt in found}
        reasons = [
            doubt.reason.format(value=values[doubt.name], limit=doubt.limit) for doubt in found
        ]
        return Said(
            statement=f"Of {record.tag} it is recorded that {listed(reasons)}.",
            remedy=f"Check these numbers of {record.tag} against the thing itself; they are "
            "computed with as they stand.",
            evidence={
                "record": as_record(record),
                "reasons": reasons,
                "values": {name: number(value) for name, value in values.items()},
                "limits": {doubt.name: doubt.limit for doubt in found},
            },
        )


def _volume_off(tables: Tables, rows: Integers) -> Floats:
    rooms = tables.cases.table.given.rooms
    measured = rooms.floor_area[rows] * rooms.height[rows]
    share = quotient(rooms.gross_volume[rows], measured, where_zero=np.nan)
    return rounded(np.abs(share - 1.0) * _PERCENT)


def _height(tables: Tables, rows: Integers) -> Floats:
    height: Floats = tables.cases.table.given.rooms.height[rows]
    return height


def _occupied(tables: Tables, rows: Integers) -> Floats:
    return rounded(tables.cases.table.given.rooms.occupied_fraction[rows] * _PERCENT)


def _air_changes(tables: Tables, rows: Integers) -> Floats:
    table = tables.cases.table
    fans = table.air.by_fans[_AS_MEASURED, rows] * SECONDS_PER_HOUR
    return rounded(fans / table.conditions.volume[rows])


def _of_design(tables: Tables, rows: Integers) -> Floats:
    units = tables.cases.table.given.units
    share = quotient(units.measured_flow[rows], units.design_flow[rows], where_zero=np.nan)
    return rounded(share * _PERCENT)


def _evaporation(tables: Tables, rows: Integers) -> Floats:
    """Of closed vessels; one above its own rating has a rule for that."""
    table = tables.cases.table
    vessels = table.given.vessels
    measured = vessels.measured_evaporation[rows]
    a_day = measured * SECONDS_PER_DAY * _PERCENT
    share = rounded(quotient(a_day, vessels.capacity_volume[rows], where_zero=np.nan))
    asked = all_of(
        table.stock.present[rows],
        is_one_of(vessels.kind[rows], _CLOSED),
        ~(measured > ABOVE_RATED * vessels.rated_evaporation[rows]),
    )
    return np.where(asked, share, np.nan)


RULES: Final = (
    Implausible(
        slug="records/room-implausible",
        subject=Subject.ROOMS,
        doubts=(
            Doubt(
                "volume_off_pct",
                _volume_off,
                VOLUME_OFF_BY,
                "its volume differs by {value:.4g} % from its floor times its height",
            ),
            Doubt("height_m", _height, HIGHEST_ROOM, "it is {value:.4g} m high"),
            Doubt(
                "occupied_pct", _occupied, MOST_OCCUPIED, "its fittings take {value:.4g} % of it"
            ),
            Doubt(
                "air_changes_per_h",
                _air_changes,
                MOST_AIR_CHANGES,
                "fans change its air {value:.4g} times an hour",
            ),
        ),
    ),
    Implausible(
        slug="records/vessel-implausible",
        subject=Subject.VESSELS,
        doubts=(
            Doubt(
                "evaporation_pct_day",
                _evaporation,
                MOST_EVAPORATION,
                "it evaporates {value:.4g} % of its capacity a day",
            ),
        ),
    ),
    Implausible(
        slug="records/unit-implausible",
        subject=Subject.UNITS,
        doubts=(
            Doubt(
                "flow_pct_of_design",
                _of_design,
                MOST_OF_DESIGN,
                "it moves {value:.4g} % of its design flow",
            ),
        ),
    ),
)
