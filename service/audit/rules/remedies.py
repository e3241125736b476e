"""What would keep a case inside its first mark, in figures."""

from __future__ import annotations

import math

from service.audit.air import AIRFLOWS, AS_MEASURED
from service.audit.columns import ROOM_KINDS
from service.audit.rules.rule import Tables
from service.audit.rules.words import at_least, at_most, listed
from service.physics.constants import SECONDS_PER_HOUR

_LITRES = 1000.0  # in a cubic metre
_CARRIED = ("lift", "vehicle")


def boil_off_remedy(tables: Tables, row: int) -> str:
    """More outdoor air, in figures; or less gas."""
    table = tables.cases.table
    room, airflow = int(table.room[row]), int(table.airflow[row])
    required = float(tables.cases.results.required[row]) * SECONDS_PER_HOUR
    moved = float(table.air.by_fans[airflow, room]) * SECONDS_PER_HOUR
    if AIRFLOWS[airflow] == AS_MEASURED:
        missing = at_least(max(required - moved, 0.0))
        return (
            f"Bring {missing} m3/h more outdoor air by fans ({at_least(required)} m3/h in all), "
            "vent the vessels outdoors, or keep fewer here."
        )
    return (
        f"Put fans that move {at_least(required)} m3/h of outdoor air on standby power, add an "
        "alarm when they fail, or vent the vessels outdoors."
    )


def largest_vessel_remedy(tables: Tables, row: int) -> str:
    """Fewer litres, another room, a warning outside the door; more air cannot hold it."""
    allowed = _allowed_amount(tables, row)
    where = ROOM_KINDS[int(tables.cases.table.given.rooms.kind[tables.cases.table.room[row]])]
    if where in _CARRIED:
        return (
            f"Let nobody ride with it and record that as unaccompanied; else {allowed} may be "
            "carried."
        )
    return (
        f"{allowed[0].upper()}{allowed[1:]} may stand here in one vessel or manifold group; keep "
        "more in a larger room, with oxygen detection that warns outside every entrance."
    )


def _allowed_amount(tables: Tables, row: int) -> str:
    """The largest amount that stays inside the first mark, by the same calculation."""
    table = tables.cases.table
    share = _allowed_share(tables, row)
    gas = listed(tables.records.fluids[row])
    if share <= 0.0:
        return f"no {gas}"
    vessels = [int(table.sources.vessel[source]) for source in tables.records.sources[row]]
    mass = [float(table.stock.held_mass[vessel]) for vessel in vessels]
    given = table.given
    if any(math.isnan(float(given.vessels.capacity_volume[vessel])) for vessel in vessels):
        return f"at most {at_most(share * sum(mass))} kg of {gas}"
    litres = [
        each / float(given.fluids.condensed_density[given.vessels.fluid[vessel]]) * _LITRES
        for each, vessel in zip(mass, vessels, strict=True)
    ]
    return f"at most {at_most(share * sum(litres))} L of {gas}"


def _allowed_share(tables: Tables, row: int) -> float:
    """Share of what is let go that would reach the first mark from where the case starts."""
    table = tables.cases.table
    gas, volume = float(table.instant[row]), float(table.volume[row])
    strength = float(table.instant_diluting[row]) / gas if gas > 0.0 else 0.0
    limit, start = float(table.marks[row, 0]), _start(tables, row)
    if start >= limit or strength <= limit:
        return 0.0
    if table.given.bases.by_displacement[table.room[row]]:
        turned = (limit - start) / (strength - start)
    else:
        turned = math.log((strength - start) / (strength - limit))
    return turned * volume / gas


def _start(tables: Tables, row: int) -> float:
    base = int(tables.cases.table.starts_from[row])
    return float(tables.cases.results.level[base]) if base >= 0 else 0.0
