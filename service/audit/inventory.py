"""What the vessels of many rooms hold and lose, as gas of their rooms (judging 1)."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np

from service.audit.columns import (
    CHARGED_AT,
    FILLED_BY,
    INSULATIONS,
    UNKNOWN,
    VENTS,
    VESSEL_KINDS,
    VESSEL_STATES,
    Columns,
    Moments,
    is_one_of,
)
from service.audit.conditions import Conditions, known
from service.audit.lines import Flows
from service.physics.arrays import Floats, Integers, Mask, quotient, sum_by_group
from service.physics.constants import OXYGEN_IN_AIR, STANDARD_PRESSURE
from service.physics.evaporation import dry_ice_mass_rate
from service.physics.filling import filling_gas_rate, filling_time, flash_fraction
from service.physics.fluids import FLUIDS
from service.physics.gas import gas_density, gas_volume_of_mass
from service.physics.insulation_loss import (
    HELIUM_BARE,
    HELIUM_WITH_MULTILAYER,
    JACKET_LEAKS,
    JACKET_OPEN,
    evaporation_by_heat,
    vessel_surface,
)
from service.physics.outflow import SHORT_PIPE, bore_area, liquid_outflow
from service.physics.real_gas import REAL_GASES, compressed_gas_density

_AUTOMATIC, _ATTENDED, _EXCHANGED = range(len(FILLED_BY))
_OUTDOORS = VENTS.index("outdoors")
_EMPTY = VESSEL_STATES.index("empty")
_WITHDRAWN = VESSEL_STATES.index("withdrawn")
ICE: Final = VESSEL_KINDS.index("dry-ice-box")
CYLINDER: Final = VESSEL_KINDS.index("cylinder")
MAGNET: Final = VESSEL_KINDS.index("magnet")
PRESSURISED: Final = VESSEL_KINDS.index("pressurised-dewar")
_TIPPING: Final = (VESSEL_KINDS.index("open-dewar"), PRESSURISED)
_MULTILAYER: Final = INSULATIONS.index("vacuum-multilayer")
_VACUUM: Final = (_MULTILAYER, INSULATIONS.index("vacuum-powder"))

# A wall colder than this takes all air that reaches it. [K]  Methods G3.
_AIR_FREEZES: Final = 60.0
# Hose of a dewar, where nobody recorded it. Common practice, no source.
HOSE_BORE: Final = 0.010  # [m]
HOSE_PRESSURE: Final = STANDARD_PRESSURE + 150e3  # [Pa] absolute
# How long a quench lasts, where nobody recorded it: a quick one. [s]  Methods G7.
QUENCH_DURATION: Final = 20.0

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
    tipped: Floats  # gas of liquid that is spilt on the floor, at once [m3]
    hose: Floats  # gas out of a withdrawal hose that is broken [m3/s]
    hose_lasts: Floats  # [s]
    leak: Floats  # gas once its insulating vacuum is lost [m3/s]
    torn: Floats  # the same with its jacket open to the room [m3/s]; 0 where that is no more
    leak_lasts: Floats  # [s]
    torn_lasts: Floats  # [s]
    heat_flux: Floats  # through the wall once the vacuum is lost [W/m2]
    cold_area: Floats  # [m2]
    quench: Floats  # gas of a magnet that quenches [m3]
    quench_share: Floats  # of it into the room, as expected [1]
    overfill: Floats  # gas when automatic filling does not stop [m3/s]
    overfill_liquid: Floats  # the same as liquid [kg/s]
    overfill_lasts: Floats  # until a shut-off that may be relied on closes [s]
    shut_off_holds: Mask


def inventory(given: Columns, room: Conditions, flows: Flows, at: np.datetime64) -> Inventory:
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
    holds = count_holds(vessels.count_due, vessels.filled_by, vessels.line, at)
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
    fills = _fill_flow(given, flows, density)
    litres = known(vessels.capacity_volume, 0.0)
    gas_density_here = 1.0 / gas_per_mass
    loses = present & (vessels.vent_to != _OUTDOORS) & is_filled_in_room(given)
    automatic = present & (vessels.filled_by == _AUTOMATIC)
    automatic &= ~is_one_of(vessels.kind, (ICE, CYLINDER))
    closes = shut_off_holds(given, at)
    on_line = vessels.line != UNKNOWN
    over_mass = np.where(automatic, fills * density, 0.0)
    over_lasts = np.where(closes, known(vessels.closes_in, CLOSES_IN), np.inf)
    fed = np.flatnonzero(on_line & (over_mass > 0.0))
    over_lasts[fed] = np.minimum(over_lasts[fed], flows.held[vessels.line[fed]] / over_mass[fed])
    filled_in = _filled_in(given, flows, fills, litres, density, loses)
    lost = filling_gas_rate(
        quotient(litres, filled_in, where_zero=0.0),
        _transfer_loss(given, flows),
        density,
        gas_density_here,
    )
    at_once = np.where(present, held * (1.0 + loss) * gas_per_mass, 0.0)
    leak = _vacuum_loss(given, held, present)
    hose = _hose(given, room, density, held, present)
    quenches = present & vessels.has_quench & (vessels.kind == MAGNET)
    tips = present & is_one_of(vessels.kind, _TIPPING) & (vessels.mobile != 0)
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
        # A magnet that can quench lets its helium go by that, and by nothing else at once.
        at_once=np.where(quenches, 0.0, at_once),
        rate=mass_rate * gas_per_mass,
        lasts=_lasts(held, mass_rate, refilled),
        spilt=np.where(spills, dry_ice_mass_rate(held, loose) * gas_per_mass, 0.0),
        filling=np.where(loses, lost, 0.0),
        filled_in=filled_in,
        tipped=np.where(tips, at_once, 0.0),
        hose=hose * gas_per_mass,
        hose_lasts=_until_gone(held, hose),
        leak=leak.mass_rate * gas_per_mass,
        torn=leak.torn * gas_per_mass,
        leak_lasts=_until_gone(held, leak.mass_rate),
        torn_lasts=_until_gone(held, leak.torn),
        heat_flux=leak.heat_flux,
        cold_area=leak.area,
        quench=np.where(quenches, held * gas_per_mass, 0.0),
        quench_share=_expected_share(given, at),
        overfill=over_mass * gas_per_mass,
        overfill_liquid=over_mass,
        overfill_lasts=over_lasts,
        shut_off_holds=closes,
    )


def _until_gone(held: Floats, mass_rate: Floats) -> Floats:
    gone: Floats = np.full(held.shape, np.inf)
    np.divide(held, mass_rate, out=gone, where=mass_rate > 0.0)
    return gone


def _fill_flow(given: Columns, flows: Flows, density: Floats) -> Floats:
    """Liquid that fills each vessel: as recorded, else what its line brings, else the usual."""
    vessels = given.vessels
    by_line = np.full(vessels.room.size, np.nan)
    on_line = np.flatnonzero(vessels.line != UNKNOWN)
    by_line[on_line] = flows.filling[vessels.line[on_line]] / density[on_line]
    usual = given.bases.fill_flow[vessels.room]
    return known(known(vessels.fill_flow, by_line), usual)


def _filled_in(
    given: Columns, flows: Flows, fills: Floats, litres: Floats, density: Floats, loses: Mask
) -> Floats:
    """How long each vessel fills; those of one line together, with no more than it brings."""
    vessels = given.vessels
    alone = np.where(loses, filling_time(litres, fills), 0.0)
    together = np.flatnonzero(loses & (vessels.line != UNKNOWN))
    if not together.size:
        return alone
    line = vessels.line[together]
    count = given.lines.room.size
    volume = sum_by_group(litres[together], line, count)
    flow = sum_by_group(fills[together], line, count)
    most = np.full(count, np.inf)
    most[line] = known(flows.filling[line] / density[together], np.inf)
    time = quotient(volume, np.minimum(flow, most), where_zero=0.0)
    alone[together] = time[line]
    return alone


@dataclass(frozen=True, slots=True)
class _VacuumLoss:
    area: Floats  # [m2]
    heat_flux: Floats  # [W/m2]
    mass_rate: Floats  # [kg/s]
    torn: Floats  # with the jacket open to the room [kg/s]


def _vacuum_loss(given: Columns, held: Floats, present: Mask) -> _VacuumLoss:
    """What evaporates from each vessel once its vacuum is lost; none where it has no vacuum."""
    vessels, fluids = given.vessels, given.fluids
    evacuated = present & is_evacuated(vessels.insulation, vessels.kind) & (held > 0.0)
    area = known(vessels.cold_area, vessel_surface(known(vessels.capacity_volume, 0.0)))
    cold = fluids.boiling_point[vessels.fluid] < _AIR_FREEZES
    layered = vessels.insulation == _MULTILAYER
    flux = np.where(cold, np.where(layered, HELIUM_WITH_MULTILAYER, HELIUM_BARE), JACKET_LEAKS)
    latent = fluids.latent_heat[vessels.fluid]
    return _VacuumLoss(
        area=area,
        heat_flux=np.where(evacuated, flux, 0.0),
        mass_rate=np.where(evacuated, evaporation_by_heat(area, flux, latent), 0.0),
        torn=np.where(evacuated & ~cold, evaporation_by_heat(area, JACKET_OPEN, latent), 0.0),
    )


def is_evacuated(insulation: Integers, kind: Integers) -> Mask:
    """Tell which vessels have an insulating vacuum; one that nobody describes has."""
    evacuated: Mask = (insulation == UNKNOWN) | is_one_of(insulation, _VACUUM)
    return evacuated & ~is_one_of(kind, (ICE, CYLINDER))


def _hose(given: Columns, room: Conditions, density: Floats, held: Floats, present: Mask) -> Floats:
    """Liquid out of a withdrawal hose that is broken right through [kg/s]."""
    vessels = given.vessels
    has_hose = present & (vessels.kind == PRESSURISED) & (held > 0.0)
    out = np.zeros(vessels.room.size)
    rows = np.flatnonzero(has_hose)
    out[rows] = liquid_outflow(
        bore_area(known(vessels.withdrawal_bore[rows], HOSE_BORE)),
        density[rows],
        known(vessels.working_pressure[rows], HOSE_PRESSURE),
        room.pressure[vessels.room[rows]],
        discharge_coefficient=SHORT_PIPE,
    )
    return out


def _expected_share(given: Columns, at: np.datetime64) -> Floats:
    """Share of a magnet's helium that comes into the room although it has a pipe."""
    vessels = given.vessels
    sound = (vessels.pipe_due > at) & (vessels.outlet_clear == 1)
    by_pipe = np.where(sound, given.bases.inspected_pipe_share[vessels.room], 1.0)
    share = known(vessels.quench_share, by_pipe)
    return np.where(vessels.has_pipe, share, 1.0)


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


def _transfer_loss(given: Columns, flows: Flows) -> Floats:
    """Share of the liquid that is lost: more into a warm vessel, of helium, and under pressure."""
    vessels, bases = given.vessels, given.bases
    loss = bases.fill_loss[vessels.room]
    helium = given.fluids.helium[vessels.fluid]
    loss = np.where(helium, np.maximum(loss, bases.helium_fill_loss[vessels.room]), loss)
    warm = vessels.state == _EMPTY
    loss = np.where(warm, np.maximum(loss, bases.warm_fill_loss[vessels.room]), loss)
    fed = np.flatnonzero((vessels.line != UNKNOWN) & (vessels.filled_by != _EXCHANGED))
    if fed.size:
        loss[fed] = np.maximum(loss[fed], _flash(given, flows, fed))
    return loss


def _flash(given: Columns, flows: Flows, rows: Integers) -> Floats:
    """Share that flashes from the pressure of the line; none of a fluid without an equation."""
    fluid, pressure = given.vessels.fluid[rows], flows.pressure[given.vessels.line[rows]]
    share = np.zeros(rows.size)
    for code in np.unique(fluid).tolist():
        name = given.gases[int(given.fluids.gas[code])]
        of_it = np.flatnonzero(fluid == code)
        if name in FLUIDS and not FLUIDS[name].solid:
            share[of_it] = flash_fraction(name, pressure[of_it])
    return share


def _charge(given: Columns, charged: Mask) -> Floats:
    """Mass of compressed gas in cylinders: their volume, by the density of the real gas."""
    vessels = given.vessels
    rows = np.flatnonzero(charged)
    names = [given.gases[gas] for gas in given.fluids.gas[vessels.fluid[rows]].tolist()]
    molar_mass = given.fluids.molar_mass[vessels.fluid[rows]]
    density = charge_density(names, molar_mass, vessels.charge_pressure[rows])
    return vessels.capacity_volume[rows] * density


def count_holds(count_due: Moments, filled_by: Integers, line: Integers, at: np.datetime64) -> Mask:
    """Tell where a count may be relied on: not overdue, and no line fills the vessel meanwhile."""
    # A comparison with not-a-time is false, so what was never counted does not hold.
    holds: Mask = (count_due > at) & (filled_by != _AUTOMATIC) & (line == UNKNOWN)
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
