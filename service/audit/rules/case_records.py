"""Which records a case lets go."""

from service.audit.inputs import FluidValues, Reference, VesselValues
from service.audit.releases import NO_VESSEL
from service.audit.rules.rule import Tables

UNKNOWN_PURGE_GAS = "unknown purge gas"


def members_of(tables: Tables, row: int) -> list[int]:
    """Rows of the sources that a case lets go, in record order."""
    table = tables.cases.table
    first, end = table.member_start[row], table.member_start[row + 1]
    return [int(source) for source in table.member_source[first:end]]


def vessel_values(tables: Tables, row: int) -> list[VesselValues]:
    """The vessels that a case lets go, in record order."""
    table = tables.cases.table
    room = tables.room(int(table.room[row]))
    vessels = table.sources.vessel[members_of(tables, row)]
    return [
        room.vessels[int(table.given.vessels.source[vessel])]
        for vessel in vessels
        if vessel != NO_VESSEL
    ]


def vessels_of(tables: Tables, row: int) -> list[Reference]:
    """References to the vessels that a case lets go, in record order."""
    return [vessel.record for vessel in vessel_values(tables, row)]


def fluids_of(tables: Tables, row: int) -> list[str]:
    """Tags of the fluids that a case lets go, each once."""
    table = tables.cases.table
    room = tables.room(int(table.room[row]))
    tags = [vessel.fluid.record.tag for vessel in vessel_values(tables, row)]
    purges = any(table.sources.vessel[source] == NO_VESSEL for source in members_of(tables, row))
    if purges:
        tags.append(_purge_gas(room.purge_fluid))
    return list(dict.fromkeys(tags))


def _purge_gas(fluid: FluidValues | None) -> str:
    return UNKNOWN_PURGE_GAS if fluid is None else fluid.record.tag
