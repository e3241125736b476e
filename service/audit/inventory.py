"""What the vessels of many rooms hold and lose, as gas of their rooms (judging 1)."""

from dataclasses import dataclass
from typing import Final

import numpy as np

from service.audit.columns import (
    FILLED_BY,
    UNKNOWN,
    VENTS,
    VESSEL_KINDS,
    VESSEL_STATES,
    Columns,
    Moments,
    is_one_of,
)
from service.audit.conditions import Conditions, known
from service.physics.arrays import Floats, Integers, Mask
from service.physics.constants import OXYGEN_IN_AIR
from service.physics.evaporation import dry_ice_mass_rate
from service.physics.gas import gas_volume_of_mass

_AUTOMATIC, _ATTENDED, _EXCHANGED = range(len(FILLED_BY))
_OUTDOORS = VENTS.index("outdoors")
_EMPTY = VESSEL_STATES.index("empty")
_WITHDRAWN = VESSEL_STATES.index("withdrawn")
ICE: Final = VESSEL_KINDS.index("dry-ice-box")
CYLINDER: Final = VESSEL_KINDS.index("cylinder")
MAGNET: Final = VESSEL_KINDS.index("magnet")


@dataclass(frozen=True, slots=True)
class Inventory:
    """One row a vessel; amounts in kilograms, gas at the pressure and temperature of its room."""

    present: Mask  # withdrawn vessels count as nothing
    oxygen: Floats  # of its gas [1]
    gas_per_mass: Floats  # [m3/kg]
    full_mass: Floats  # when filled to capacity
    recorded_mass: Floats  # by the other reading: as recorded where that may be relied on
    held_mass: Floats  # by the reading of the basis
    count_holds: Mask  # what is recorded may be relied on
    filled_here: Mask  # loses gas in the room while it is filled
    refilled: Mask  # goes on evaporating, since it does not run empty
    evaporates_by_kind: Mask  # neither measured nor rated
    evaporation: Floats  # into the room [kg/s], without what is used
    at_once: Floats  # gas let go when the vessel fails, filling loss included [m3]
    rate: Floats  # gas into the room by evaporation and use [m3/s]
    lasts: Floats  # how long that goes on [s]; infinite where it is refilled


def inventory(given: Columns, room: Conditions, at: np.datetime64) -> Inventory:
    """Work out what each vessel holds and loses."""
    vessels, fluids = given.vessels, given.fluids
    density = fluids.condensed_density[vessels.fluid]
    present = vessels.state != _WITHDRAWN
    capacity = known(vessels.capacity_mass, vessels.capacity_volume * density)
    contents = known(vessels.contents_mass, vessels.contents_volume * density)
    # More than its capacity is a record of its own, and then that is what it holds.
    full = np.fmax(capacity, contents)
    holds = count_holds(vessels.count_due, vessels.filled_by, at)
    empty = holds & (vessels.state == _EMPTY)
    recorded = np.where(empty, 0.0, np.where(holds, known(contents, full), full))
    as_recorded = given.bases.as_recorded[vessels.room]
    held = np.where(empty, 0.0, np.where(as_recorded, recorded, full))
    gas_per_mass = gas_volume_of_mass(
        1.0,
        fluids.molar_mass[vessels.fluid],
        pressure=room.pressure[vessels.room],
        temperature=room.temperature[vessels.room],
    )
    filled_here = is_filled_by_transfer(vessels.kind) & (vessels.filled_by != _EXCHANGED)
    loss = np.where(filled_here, given.bases.fill_margin[vessels.room], 0.0)
    evaporation = np.where(
        (vessels.vent_to == _OUTDOORS) | empty | ~present,
        0.0,
        _evaporation(given, capacity, density, full),
    )
    use = np.where(empty | ~present, 0.0, known(vessels.use, 0.0) * density)
    refilled = (vessels.filled_by != _EXCHANGED) & ~is_one_of(vessels.kind, (ICE, CYLINDER))
    mass_rate = evaporation + use
    return Inventory(
        present=present,
        oxygen=fluids.oxygen_fraction[vessels.fluid],
        gas_per_mass=gas_per_mass,
        full_mass=np.where(present, full, 0.0),
        recorded_mass=np.where(present, recorded, 0.0),
        held_mass=np.where(present, held, 0.0),
        count_holds=holds,
        filled_here=filled_here,
        refilled=refilled,
        evaporates_by_kind=_by_kind(given),
        evaporation=evaporation,
        at_once=np.where(present, held * (1.0 + loss) * gas_per_mass, 0.0),
        rate=mass_rate * gas_per_mass,
        lasts=_lasts(held, mass_rate, refilled),
    )


def count_holds(count_due: Moments, filled_by: Integers, at: np.datetime64) -> Mask:
    """Tell where a count may be relied on: not overdue, and no line fills the vessel meanwhile."""
    # A comparison with not-a-time is false, so what was never counted does not hold.
    holds: Mask = (count_due > at) & (filled_by != _AUTOMATIC)
    return holds


def is_filled_by_transfer(kind: Integers) -> Mask:
    """Tell which kinds lose gas in the room while they are filled."""
    return ~is_one_of(kind, (ICE, CYLINDER, MAGNET))


def poorer(oxygen: Floats) -> Mask:
    """Tell which gases have no more oxygen than air."""
    return oxygen <= OXYGEN_IN_AIR


def _by_kind(given: Columns) -> Mask:
    vessels = given.vessels
    nothing = np.isnan(vessels.measured_evaporation) & np.isnan(vessels.rated_evaporation)
    return nothing & ~is_one_of(vessels.kind, (ICE, CYLINDER))


def _evaporation(given: Columns, capacity: Floats, density: Floats, full: Floats) -> Floats:
    """Mass a second: measured, else rated, else by kind; the factor never on what was measured."""
    vessels, bases = given.vessels, given.bases
    by_kind = bases.evaporation_by_kind[vessels.room, vessels.kind] * capacity
    rated = known(vessels.rated_evaporation * density, by_kind)
    expected = rated * bases.evaporation_factor[vessels.room]
    liquid = known(vessels.measured_evaporation * density, expected)
    ice = known(vessels.measured_loss, dry_ice_mass_rate(full, bases.ice_share[vessels.room]))
    return np.where(vessels.kind == ICE, ice, liquid)


def _lasts(held: Floats, mass_rate: Floats, refilled: Mask) -> Floats:
    forever = np.full(held.shape, np.inf)
    gone = np.divide(held, mass_rate, out=forever.copy(), where=mass_rate > 0.0)
    return np.where(refilled, forever, gone)


def purge_gas(given: Columns) -> tuple[Mask, Floats]:
    """Tell which rooms are purged, and the oxygen of the purge gas; one unknown counts as none."""
    rooms = given.rooms
    purged = known(rooms.purge_flow, 0.0) > 0.0
    named = rooms.purge_fluid != UNKNOWN
    oxygen = np.zeros(given.count)
    oxygen[named] = given.fluids.oxygen_fraction[rooms.purge_fluid[named]]
    return purged, oxygen
