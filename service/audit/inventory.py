"""What the vessels of many rooms hold and lose, as gas of their rooms (judging 1)."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np

from service.audit.columns import (
    CHARGED_AT,
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
from service.physics.filling import filling_gas_rate, filling_time
from service.physics.gas import gas_density, gas_volume_of_mass
from service.physics.real_gas import REAL_GASES, compressed_gas_density

_AUTOMATIC, _ATTENDED, _EXCHANGED = range(len(FILLED_BY))
_OUTDOORS = VENTS.index("outdoors")
_EMPTY = VESSEL_STATES.index("empty")
_WITHDRAWN = VESSEL_STATES.index("withdrawn")
ICE: Final = VESSEL_KINDS.index("dry-ice-box")
CYLINDER: Final = VESSEL_KINDS.index("cylinder")
MAGNET: Final = VESSEL_KINDS.index("magnet")

# From the high level to the shut valve, where nobody recorded it. [s]  Judging 1.
CLOSES_IN: Final = 60.0


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
    spilt: Floats  # gas from ice emptied on the floor [m3/s]
    filling: Floats  # gas lost into the room while it is filled [m3/s]
    filled_in: Floats  # how long that takes [s]
    overfill: Floats  # gas when automatic filling does not stop [m3/s]
    overfill_lasts: Floats  # until a shut-off that may be relied on closes [s]
    shut_off_holds: Mask


def inventory(given: Columns, room: Conditions, at: np.datetime64) -> Inventory:
    """Work out what each vessel holds and loses."""
    vessels, fluids = given.vessels, given.fluids
    # Litres are of liquid; ice is kept by mass.
    density = fluids.liquid_density[vessels.fluid]
    present = vessels.state != _WITHDRAWN
    capacity = known(vessels.capacity_mass, vessels.capacity_volume * density)
    charged = ~np.isnan(vessels.charge_pressure)
    if charged.any():
        capacity[charged] = _charge(given, charged)
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
    fills = known(vessels.fill_flow, given.bases.fill_flow[vessels.room])
    litres = known(vessels.capacity_volume, 0.0)
    gas_density_here = 1.0 / gas_per_mass

    def lost(share: Floats | float) -> Floats:
        return filling_gas_rate(fills, share, density, gas_density_here)

    loses = present & (vessels.vent_to != _OUTDOORS) & is_filled_in_room(given)
    automatic = present & (vessels.filled_by == _AUTOMATIC)
    automatic &= ~is_one_of(vessels.kind, (ICE, CYLINDER))
    closes = shut_off_holds(given, at)
    loose = given.bases.loose_ice_share[vessels.room]
    spills = present & (vessels.kind == ICE) & (vessels.mobile != 0)
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
        spilt=np.where(spills, dry_ice_mass_rate(held, loose) * gas_per_mass, 0.0),
        filling=np.where(loses, lost(_transfer_loss(given)), 0.0),
        filled_in=np.where(loses, filling_time(litres, fills), 0.0),
        overfill=np.where(automatic, lost(1.0), 0.0),
        overfill_lasts=np.where(closes, known(vessels.closes_in, CLOSES_IN), np.inf),
        shut_off_holds=closes,
    )


def is_filled_in_room(given: Columns) -> Mask:
    """Tell which vessels lose gas in the room each time they are filled.

    A magnet is filled there only where somebody says so; others unless they are exchanged.
    """
    vessels = given.vessels
    recorded = is_one_of(vessels.filled_by, (_AUTOMATIC, _ATTENDED))
    magnet: Mask = (vessels.kind == MAGNET) & recorded
    filled: Mask = magnet | (
        is_filled_by_transfer(vessels.kind) & (vessels.filled_by != _EXCHANGED)
    )
    return filled


def shut_off_holds(given: Columns, at: np.datetime64) -> Mask:
    """Tell where an independent high level may be relied on: fitted, and tested in date."""
    holds: Mask = (given.vessels.high_level == 1) & (given.vessels.shut_off_test_due > at)
    return holds


def _transfer_loss(given: Columns) -> Floats:
    """Share of the liquid that is lost: more into a warm vessel, and more of helium."""
    vessels, bases = given.vessels, given.bases
    loss = bases.fill_loss[vessels.room]
    helium = given.fluids.helium[vessels.fluid]
    loss = np.where(helium, np.maximum(loss, bases.helium_fill_loss[vessels.room]), loss)
    warm = vessels.state == _EMPTY
    return np.where(warm, np.maximum(loss, bases.warm_fill_loss[vessels.room]), loss)


def _charge(given: Columns, charged: Mask) -> Floats:
    """Mass of compressed gas in cylinders: their volume, by the density of the real gas."""
    vessels = given.vessels
    rows = np.flatnonzero(charged)
    names = [given.gases[gas] for gas in given.fluids.gas[vessels.fluid[rows]].tolist()]
    molar_mass = given.fluids.molar_mass[vessels.fluid[rows]]
    density = charge_density(names, molar_mass, vessels.charge_pressure[rows])
    return vessels.capacity_volume[rows] * density


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


def charge_density(names: Sequence[str], molar_mass: Floats, pressure: Floats) -> Floats:
    """Density of gas in charged cylinders: real where its equation is known, else ideal."""
    density = gas_density(molar_mass, pressure=pressure, temperature=CHARGED_AT)
    for name in sorted(set(names) & REAL_GASES):
        rows = np.flatnonzero(np.array(names) == name)
        density[rows] = compressed_gas_density(name, pressure[rows], CHARGED_AT)
    return density


def purge_gas(given: Columns) -> tuple[Mask, Floats]:
    """Tell which rooms are purged, and the oxygen of the purge gas; one unknown counts as none."""
    rooms = given.rooms
    purged = known(rooms.purge_flow, 0.0) > 0.0
    named = rooms.purge_fluid != UNKNOWN
    oxygen = np.zeros(given.count)
    oxygen[named] = given.fluids.oxygen_fraction[rooms.purge_fluid[named]]
    return purged, oxygen
