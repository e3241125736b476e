"""What would keep a case inside its first mark, in figures."""

from __future__ import annotations

import math

import numpy as np

from service.audit.air import AIRFLOWS, LOST
from service.audit.columns import ROOM_KINDS
from service.audit.hazards import CLEAN, HAZARDS
from service.audit.releases import (
    ALL_VESSELS,
    LINE_BREAK,
    OVERFILL,
    QUENCH,
    RELEASES,
    SPILL,
    VACUUM_LOSS,
)
from service.audit.rules.rule import Tables
from service.audit.rules.words import at_least, at_most, listed
from service.audit.sources import NO_LINE
from service.physics.constants import SECONDS_PER_HOUR

_LITRES = 1000.0  # in a cubic metre
_CARRIED = ("lift", "vehicle")


def remedy(tables: Tables, row: int) -> str:
    """What would keep a case inside its first mark."""
    release = RELEASES[int(tables.cases.table.release[row])]
    if release.sustained:
        return _sustained_remedy(tables, row)
    if release.slug == OVERFILL:
        return _overfill_remedy(tables, row)
    if release.slug == LINE_BREAK:
        return _line_remedy(tables, row)
    if release.slug == VACUUM_LOSS:
        return _vacuum_remedy(tables, row)
    if release.slug == QUENCH:
        return _quench_remedy(tables, row)
    if release.slug == SPILL and tables.cases.table.instant[row] == 0.0:
        return _spill_remedy(tables, row)
    return _at_once_remedy(tables, row)


def _line_remedy(tables: Tables, row: int) -> str:
    """A restrictor, a shut-off, or less behind the line."""
    table = tables.cases.table
    source = tables.records.sources[row][0]
    line = int(table.sources.line[source])
    share = max(_steady_share(tables, row), _still_share(tables, row))
    if line == NO_LINE:
        vessel = int(table.sources.vessel[source])
        held = share * float(table.stock.held_mass[vessel])
        return (
            f"Draw liquid where at most {at_most(held)} kg can run out, fit an excess-flow valve "
            "to the vessel, or draw in a room with more outdoor air."
        )
    flow = share * float(table.lines.broken[line]) * SECONDS_PER_HOUR
    return (
        f"Restrict the line to {at_most(flow)} kg/h before it enters the room, or fit a shut-off "
        "that acts by itself, fails closed and is tested; else bring more outdoor air."
    )


def _vacuum_remedy(tables: Tables, row: int) -> str:
    """A smaller vessel, or its relief outdoors with an area that is shown to suffice."""
    table = tables.cases.table
    share = max(_steady_share(tables, row), _still_share(tables, row))
    held = share * float(table.stock.held_mass[_vessels(tables, row)[0]])
    return (
        f"Keep at most {at_most(held)} kg in such a vessel here, or lead its relief outdoors, of "
        "an area that suffices for the loss of its vacuum; else bring more outdoor air."
    )


def _quench_remedy(tables: Tables, row: int) -> str:
    """A pipe that is inspected and clear, and a warning outside."""
    table = tables.cases.table
    has_pipe = bool(table.given.vessels.has_pipe[_vessels(tables, row)[0]])
    first = (
        "Have the quench pipe inspected and its outlet shown clear"
        if has_pipe
        else "Fit a quench pipe that takes the helium outdoors"
    )
    return (
        f"{first}, with detection of oxygen that warns outside every entrance and a door that a "
        "pressure in the room cannot hold shut."
    )


def _sustained_remedy(tables: Tables, row: int) -> str:
    """More outdoor air, in figures; or less gas."""
    table = tables.cases.table
    room, airflow = int(table.room[row]), int(table.airflow[row])
    required = float(tables.cases.results.required[row]) * SECONDS_PER_HOUR
    moved = float(table.air.by_fans[airflow, room]) * SECONDS_PER_HOUR
    if AIRFLOWS[airflow] != LOST:
        missing = at_least(max(required - moved, 0.0))
        return (
            f"Bring {missing} m3/h more outdoor air by fans ({at_least(required)} m3/h in all), "
            "vent the vessels outdoors, or keep fewer here."
        )
    return (
        f"Put fans that move {at_least(required)} m3/h of outdoor air on standby power, add an "
        "alarm when they fail, or vent the vessels outdoors."
    )


def _overfill_remedy(tables: Tables, row: int) -> str:
    """A shut-off that does not depend on what failed; or a smaller flow."""
    table = tables.cases.table
    flow = _litres_a_minute(tables, row) * _steady_share(tables, row)
    held = bool(table.stock.shut_off_holds[_vessels(tables, row)].all())
    if held:
        first = "Let the independent shut-off close sooner"
    else:
        first = "Fit an independent high level that closes the supply, and test it"
    smaller = "" if flow <= 0.0 else f", or restrict the filling to {at_most(flow)} L/min"
    return f"{first}{smaller}, or fill in a room with more outdoor air."


def _spill_remedy(tables: Tables, row: int) -> str:
    """Less ice in a box, or a box that cannot tip."""
    table = tables.cases.table
    vessel = _vessels(tables, row)[0]
    share = max(_steady_share(tables, row), _still_share(tables, row))
    allowed = at_most(share * float(table.stock.held_mass[vessel]))
    return (
        f"Keep at most {allowed} kg in a box that can be emptied on the floor, or fix the box so "
        "that it cannot tip, with a detector of its own gas."
    )


def _at_once_remedy(tables: Tables, row: int) -> str:
    """Fewer litres, another room, a warning outside the door; more air cannot hold it."""
    allowed = _allowed_amount(tables, row)
    where = ROOM_KINDS[int(tables.cases.table.given.rooms.kind[tables.cases.table.room[row]])]
    if where in _CARRIED:
        return (
            f"Let nobody ride with it and record that as unaccompanied; else {allowed} may be "
            "carried."
        )
    spilt = RELEASES[int(tables.cases.table.release[row])].slug == SPILL
    everything = RELEASES[int(tables.cases.table.release[row])].slug == ALL_VESSELS
    place = "in all" if everything else "in one vessel or manifold group"
    place = "in a vessel that can tip" if spilt else place
    gas = HAZARDS[int(tables.cases.table.hazard[row])].gas.replace("-", " ")
    return (
        f"{allowed[0].upper()}{allowed[1:]} may stand here {place}; keep more in a larger room, "
        f"with detection of {gas} that warns outside every entrance."
    )


def _vessels(tables: Tables, row: int) -> list[int]:
    sources = tables.cases.table.sources
    return [int(sources.vessel[source]) for source in tables.records.sources[row]]


def _litres_a_minute(tables: Tables, row: int) -> float:
    given = tables.cases.table.given
    vessel = _vessels(tables, row)[0]
    recorded = float(given.vessels.fill_flow[vessel])
    flow = float(given.bases.fill_flow[given.vessels.room[vessel]])
    return (flow if math.isnan(recorded) else recorded) * _LITRES * 60.0


def _steady_share(tables: Tables, row: int) -> float:
    """Share of a rate that the air of the case holds inside the first mark however long it lasts.

    What has evaporated before takes its part of the mark.
    """
    table = tables.cases.table
    air = max(float(table.supply[row, 0]), float(table.exhaust[row, 0]))
    left = float(table.first_mark[row]) - _start(tables, row)
    rate = float(table.rates_level[row, 0])
    return max(left, 0.0) * air / rate if rate > 0.0 else 0.0


def _still_share(tables: Tables, row: int) -> float:
    """Share of all the gas that the room holds inside the first mark without any air."""
    table = tables.cases.table
    gas = float((table.rates_level[row] * table.durations[row]).sum())
    left = float(table.first_mark[row]) - _start(tables, row)
    return max(left, 0.0) * float(table.volume[row]) / gas if gas > 0.0 else 0.0


def _allowed_amount(tables: Tables, row: int) -> str:
    """The largest amount that stays inside the first mark, by the same calculation."""
    table = tables.cases.table
    share = _allowed_share(tables, row)
    gas = listed(tables.records.fluids[row])
    if share <= 0.0:
        return f"no {gas}"
    vessels = _vessels(tables, row)
    mass = [float(table.stock.held_mass[vessel]) for vessel in vessels]
    given = table.given
    volume = np.where(
        np.isnan(given.vessels.charge_pressure), given.vessels.capacity_volume, np.nan
    )
    if any(math.isnan(float(volume[vessel])) for vessel in vessels):
        return f"at most {at_most(share * sum(mass))} kg of {gas}"
    litres = [
        each / float(given.fluids.liquid_density[given.vessels.fluid[vessel]]) * _LITRES
        for each, vessel in zip(mass, vessels, strict=True)
    ]
    return f"at most {at_most(share * sum(litres))} L of {gas}"


def _allowed_share(tables: Tables, row: int) -> float:
    """Share of what is let go that would reach the first mark from where the case starts."""
    table = tables.cases.table
    gas, volume = float(table.instant[row]), float(table.volume[row])
    strength = float(table.instant_level[row]) / gas if gas > 0.0 else 0.0
    limit, start = float(table.first_mark[row]), _start(tables, row)
    if start >= limit or strength <= limit:
        return 0.0
    if table.given.bases.by_displacement[table.room[row]]:
        turned = (limit - start) / (strength - start)
    else:
        turned = math.log((strength - start) / (strength - limit))
    return turned * volume / gas


def _start(tables: Tables, row: int) -> float:
    table = tables.cases.table
    base = int(table.starts_from[row])
    return float(tables.cases.results.level[base] if base >= 0 else CLEAN[table.hazard[row]])
