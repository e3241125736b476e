"""Arrays become what an assessment answers of one room: cases, air, figures, assumptions."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Final

import numpy as np

from service.audit.air import AIRFLOWS, AS_MEASURED
from service.audit.assessment import Assumed, Case, Network, Ventilation
from service.audit.assumptions import ASSUMPTIONS
from service.audit.cases import CaseTable
from service.audit.incoming import Incoming
from service.audit.releases import RELEASES
from service.audit.rules.rule import Tables, assumed_record
from service.audit.rules.words import number
from service.audit.solve import solve
from service.audit.told_cases import told_cases
from service.audit.told_networks import told_incoming, told_network
from service.physics.arrays import Floats, Integers, Mask, rounded, sum_by_group
from service.physics.constants import SECONDS_PER_HOUR, ZERO_CELSIUS

_AS_MEASURED: Final = AIRFLOWS.index(AS_MEASURED)
_PERCENT: Final = 100.0
_KILOPASCAL: Final = 1000.0  # [Pa]


@dataclass(frozen=True, slots=True)
class Leading:
    """The case that each room's standing rests on: of the room itself, or of another; else -1."""

    own: Integers
    incoming: Integers  # goes before the room's own where there is one


@dataclass(frozen=True, slots=True)
class Told:
    """Evaluated rooms, and how to tell one of them by its row of the columns."""

    tables: Tables
    without: CaseTable  # the same cases with every stacked factor at 1
    incoming_without: Incoming | None
    leading: Leading
    _all_cases: Sequence[Case] = field(init=False)  # by row, whether shown or not
    _all_incoming: Sequence[Case] = field(init=False)
    _incoming: tuple[Integers, ...] = field(init=False)
    _cases: tuple[Integers, ...] = field(init=False)  # rows shown, by room
    _assumed: tuple[Integers, ...] = field(init=False)
    _ventilation: Mapping[str, Floats] = field(init=False)
    _figures: Mapping[str, Floats] = field(init=False)

    def __post_init__(self) -> None:
        """Lay out once what every room is told from."""
        for name, value in (
            ("_all_cases", told_cases(self.tables, self.without, solve(self.without))),
            ("_all_incoming", told_incoming(self.tables, self.incoming_without)),
            ("_cases", _rows_by_room(self.tables)),
            ("_incoming", _incoming_by_room(self.tables)),
            ("_assumed", _by_room(self.tables.assumed.room, self.tables)),
            ("_ventilation", _ventilation(self.tables)),
            ("_figures", _figures(self.tables)),
        ):
            object.__setattr__(self, name, value)

    def rows(self, row: int) -> Integers:
        """Rows of the table that the cases of a room are, in the order of its cases."""
        return self._cases[row]

    def cases(self, row: int) -> tuple[Case, ...]:
        """The cases of a room, in the order of releases, the largest first."""
        return tuple(self._all_cases[case] for case in self.rows(row).tolist())

    def incoming(self, row: int) -> tuple[Case, ...]:
        """The cases of other rooms as their gas comes to a room."""
        return tuple(self._all_incoming[case] for case in self._incoming[row].tolist())

    def deciding(self, row: int) -> int | None:
        """Place of the case that the standing rests on, among its own and then what came."""
        came = np.flatnonzero(self._incoming[row] == self.leading.incoming[row])
        if came.size:
            return int(self._cases[row].size + came[0])
        found = np.flatnonzero(self._cases[row] == self.leading.own[row])
        return int(found[0]) if found.size else None

    def network(self, row: int) -> Network | None:
        """Where the gas of a room can go."""
        return told_network(self.tables, row)

    def assumed(self, row: int) -> tuple[Assumed, ...]:
        """What was assumed of a room and what stands in it."""
        return tuple(self._assumption(int(place)) for place in self._assumed[row])

    def ventilation(self, row: int) -> Ventilation:
        """The air of a room."""
        found = self._ventilation
        decides = int(found["decides"][row])
        return Ventilation(
            outdoor_air_m3_h=float(found["moved"][row]),
            credited_m3_h=float(found["credited"][row]),
            air_changes_per_h=float(found["changes"][row]),
            sustained_release_m3_h=float(found["release"][row]),
            required_m3_h=float(found["required"][row]),
            shortfall_m3_h=float(found["shortfall"][row]),
            restore_m3_h=float(found["restore"][row]),
            deciding_case=None if decides < 0 else f"{RELEASES[decides].slug}/{AS_MEASURED}",
        )

    def figures(self, row: int) -> Mapping[str, float | str | None]:
        """What the numbers rest on besides the records, and both readings of the contents."""
        read_as = self.tables.cases.table.given.bases.as_recorded[row]
        found: dict[str, float | str | None] = {
            name: number(float(values[row])) for name, values in self._figures.items()
        }
        return {**found, "contents": "recorded" if read_as else "capacity"}

    def _assumption(self, place: int) -> Assumed:
        assumed = self.tables.assumed
        basis = self.tables.room(int(assumed.room[place])).basis
        assumption = ASSUMPTIONS[int(assumed.code[place])]
        return Assumed(
            record=assumed_record(self.tables, place),
            field=assumption.field,
            value=assumed.value[place],
            reason=assumption.reason,
            source=basis.sources.get(assumption.source, assumption.source),
            matters=bool(assumed.matters[place]),
            decides=bool(self.tables.decides[place]),
        )


def _by_room(room: Integers, tables: Tables) -> tuple[Integers, ...]:
    """Rows of a table by room, in their order."""
    order = np.argsort(room, kind="stable")
    ends = np.searchsorted(room[order], np.arange(1, tables.sound.size))
    return tuple(np.split(order, ends)) if tables.sound.size else ()


def _rows_by_room(tables: Tables) -> tuple[Integers, ...]:
    """Cases shown, by room: by release, airflow and hazard, the nearest to a mark first."""
    table = tables.cases.table
    shown = np.flatnonzero(table.shown)
    order = np.lexsort(
        (
            -tables.cases.results.nearness[shown],
            table.hazard[shown],
            table.airflow[shown],
            table.release[shown],
            table.room[shown],
        )
    )
    rows = shown[order]
    ends = np.searchsorted(table.room[rows], np.arange(1, tables.sound.size))
    return tuple(np.split(rows, ends)) if tables.sound.size else ()


def _incoming_by_room(tables: Tables) -> tuple[Integers, ...]:
    if tables.came is None:
        return (np.empty(0, dtype=np.int64),) * tables.sound.size
    return _rows_by_room(tables.beside(tables.came))


def _ventilation(tables: Tables) -> Mapping[str, Floats]:
    """The air of every room; what holds its sustained releases needs no more."""
    table, results = tables.cases.table, tables.cases.results
    count = table.given.count
    lasting = table.sustained & (table.airflow == _AS_MEASURED)
    required, restore, holds = np.zeros(count), np.zeros(count), np.ones(count)
    np.maximum.at(required, table.room[lasting], results.required[lasting])
    np.maximum.at(restore, table.room[table.counts], results.restore[table.counts])
    holds[table.room[lasting & (results.mark > 0)]] = 0.0
    moved, by_fans = table.air.moved[_AS_MEASURED], table.air.by_fans[_AS_MEASURED]
    credited = np.maximum(table.air.supply[_AS_MEASURED], table.air.exhaust[_AS_MEASURED])
    short = np.where(holds > 0.0, 0.0, np.maximum(required - by_fans, 0.0))
    release = sum_by_group(table.sources.rate, table.sources.room, count)
    per_hour = {
        "moved": moved,
        "credited": credited,
        "changes": moved / table.conditions.volume,
        "release": release,
        "required": required,
        "shortfall": short,
        "restore": restore,
    }
    answered = {name: rounded(flow * SECONDS_PER_HOUR) for name, flow in per_hour.items()}
    return {**answered, "decides": _most_demanding(tables, lasting).astype(np.float64)}


def _most_demanding(tables: Tables, lasting: Mask) -> Integers:
    """Row of RELEASES whose case asks for the room's required air; -1 where none lasts."""
    table, required = tables.cases.table, tables.cases.results.required
    rows = np.flatnonzero(lasting)
    order = rows[np.lexsort((rows, -required[rows], table.room[rows]))]
    found = np.full(table.given.count, -1)
    room, first = np.unique(table.room[order], return_index=True)
    found[room] = table.release[order[first]]
    return found


def _figures(tables: Tables) -> Mapping[str, Floats]:
    table = tables.cases.table
    room, stock, count = table.conditions, table.stock, table.given.count
    owner = table.given.vessels.room
    low, high = _PERCENT * room.low_marks, _PERCENT * room.high_marks
    return {
        "pressure_kpa_abs": room.pressure / _KILOPASCAL,
        "temperature_c": room.temperature - ZERO_CELSIUS,
        "gross_volume_m3": table.given.rooms.gross_volume,
        "net_volume_m3": room.volume,
        "natural_air_m3_h": room.natural_flow * SECONDS_PER_HOUR,
        "way_out_m": room.way_out,
        "oxygen_deficient_pct": low[:, 0],
        "oxygen_danger_pct": low[:, 1],
        "oxygen_critical_pct": low[:, 2],
        "oxygen_enriched_pct": high[:, 0],
        "gas_at_capacity_m3": sum_by_group(stock.full_mass * stock.gas_per_mass, owner, count),
        "gas_as_recorded_m3": sum_by_group(stock.recorded_mass * stock.gas_per_mass, owner, count),
    }
