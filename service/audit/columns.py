"""Records of many rooms as a structure of arrays, flattened once."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence, Sized
from dataclasses import dataclass, field, fields, replace
from datetime import UTC, datetime
from itertools import pairwise
from typing import Any, Final, Generic, TypeAlias, TypeVar

import numpy as np
import numpy.typing as npt

from service.audit.assessment import SEVERITIES
from service.audit.inputs import FluidValues, Outage, QuenchValues, RoomValues, VesselValues
from service.physics.arrays import Floats, Integers, Mask
from service.physics.constants import SECONDS_PER_DAY, SECONDS_PER_HOUR
from service.physics.fluids import FLUIDS
from service.physics.gas import gas_density

Moments: TypeAlias = npt.NDArray[np.datetime64]

PERCENT: Final = 0.01
KILOPASCAL: Final = 1000.0  # [Pa]
UNKNOWN: Final = -1
_FLAMMABLE: Final = ("methane", "hydrogen")  # those whose lower limit the basis names
_LITRES_A_MINUTE: Final = 1e-3 / 60.0  # [m3/s]
OXYGEN: Final = "oxygen"  # the gas of an oxygen detector; row 0 of the gases

ROOM_KINDS: Final = ("room", "corridor", "walk-in", "pit", "lift", "vehicle")
VESSEL_KINDS: Final = (
    "open-dewar",
    "pressurised-dewar",
    "freezer",
    "tank",
    "cryostat",
    "magnet",
    "dry-ice-box",
    "cylinder",
)
VESSEL_STATES: Final = ("in-service", "empty", "withdrawn")
FILLED_BY: Final = ("automatic", "attended", "exchanged")
_BY_LINE: Final = "automatic"
VENTS: Final = ("room", "outdoors")
ARRANGEMENTS: Final = ("supply", "exhaust", "balanced")
UNIT_STATES: Final = ("running", "stopped", "failed")
TERMINALS: Final = ("low", "high")
INSULATIONS: Final = ("vacuum-multilayer", "vacuum-powder", "foam", "none")
PHASES: Final = ("liquid", "gas")
DETECTOR_STATES: Final = ("in-service", "fault", "off")
PLACES: Final = ("inside", "entrance")
SETTLES: Final = ("low", "high", "methane")
NECK_PLUGS: Final = ("vented", "sealed")
CONTROL_KINDS: Final = (
    "signage",
    "procedure",
    "training",
    "personal-monitor",
    "alarm-response",
    "rescue",
    "lone-working",
    "protective-equipment",
    "access",
    "delivery-route",
    "bund",
)
MANUAL: Final = "manual"  # a boost or a shut-off that a person starts
#: What closes a shut-off besides a detector.
TRIGGERS: Final = ("high-level", "excess-flow", MANUAL)
BY_HAND: Final = -2  # the row of its detector
CARBON_DIOXIDE: Final = "carbon-dioxide"
NITROUS_OXIDE: Final = "nitrous-oxide"
HELIUM: Final = "helium"
_LATENT_HEAT: Final = {slug: fluid.latent_heat_j_kg for slug, fluid in FLUIDS.items()}
_VAPOUR: Final = {slug: fluid.vapour_density_kg_m3 for slug, fluid in FLUIDS.items()}
_GAMMA: Final = {slug: fluid.gamma for slug, fluid in FLUIDS.items()}
# Of a site's own fluid: the least of all but helium, and that of air. Common practice, no source.
_LEAST_HEAT: Final = min(heat for slug, heat in _LATENT_HEAT.items() if slug != HELIUM)
_USUAL_GAMMA: Final = 1.4
# Temperature at which a cylinder is charged to its pressure. [K]  Common practice, no source.
CHARGED_AT: Final = 288.15


@dataclass(frozen=True, slots=True)
class Bases:
    """The numbers of each room's basis; one row a room."""

    deficient: Floats  # oxygen fractions
    danger: Floats
    danger_pressure: Floats  # [Pa]
    critical: Floats
    critical_pressure: Floats  # [Pa]
    enriched: Floats
    rich_second: Floats
    rich_third: Floats
    mixing_factor: Floats
    air_changes_above_ground: Floats  # [1/s]
    air_changes_below_ground: Floats
    air_changes_enclosed: Floats
    by_displacement: Mask  # C1; else C2
    as_recorded: Mask  # contents as recorded; else capacity
    fill_loss: Floats
    fill_margin: Floats  # of what is let go at once from a vessel filled in the room
    fill_flow: Floats  # [m3/s] of liquid, where none is recorded
    warm_fill_loss: Floats
    helium_fill_loss: Floats
    evaporation_factor: Floats
    evaporation_by_kind: Floats  # share of capacity a second, (rooms, kinds of vessel)
    sustained: Floats  # [s]
    restore: Floats  # [s]
    react: Floats  # [s]
    walk: Floats  # [m/s]
    net_volume_share: Floats
    never_measured_share: Floats
    ice_share: Floats  # [1/h]
    loose_ice_share: Floats  # [1/h]
    inspected_pipe_share: Floats
    many_vessels: Floats
    carbon_dioxide: Floats  # (rooms, 3) fractions: mean of 8 h, of 15 min, peak
    nitrous_oxide: Floats  # (rooms, 2) fractions: mean of 8 h, of 15 min
    nitrous_oxide_accident: Floats
    flammable_limits: Floats  # (rooms, 2) fractions: methane, hydrogen
    flammable_shares: Floats  # (rooms, 3) of the lower limit
    severity: Integers  # (rooms, 3 marks, 3 columns), index in SEVERITIES


@dataclass(frozen=True, slots=True)
class Rooms:
    """One row a room; not-a-number and -1 where unknown, else 0 for no and 1 for yes."""

    source: Integers  # which of the rooms given, by position
    kind: Integers
    gross_volume: Floats
    elevation: Floats
    station_pressure: Floats
    floor_area: Floats
    height: Floats
    occupied_fraction: Floats
    temperature: Floats
    below_ground: Integers
    purge_flow: Floats
    purge_fluid: Integers  # row of the fluids
    attended: Integers
    unaccompanied: Integers
    way_out: Floats
    pit_area: Floats
    pit_depth: Floats
    pit_entered: Integers


@dataclass(frozen=True, slots=True)
class Vessels:
    """One row a vessel, in record order within its room."""

    room: Integers
    source: Integers
    fluid: Integers
    kind: Integers
    state: Integers
    capacity_volume: Floats
    capacity_mass: Floats
    contents_volume: Floats
    contents_mass: Floats
    count_due: Moments
    rated_evaporation: Floats
    measured_evaporation: Floats
    measured_loss: Floats
    use: Floats
    vent_to: Integers
    filled_by: Integers  # automatic where a line fills it and nobody says how
    filled_as_said: Mask
    fill_flow: Floats  # [m3/s] of liquid
    high_level: Integers  # an independent one, that closes the supply
    closes_in: Floats  # [s]
    shut_off_test_due: Moments
    gross_volume: Floats
    charge_pressure: Floats  # [Pa] absolute; of a cylinder kept by volume
    neck_plug: Integers
    relief_fitted: Integers
    relief_inspected: Mask
    relief_due: Moments
    relief_to: Integers
    mobile: Integers
    insulation: Integers
    line: Integers  # row of the line that fills it
    cold_area: Floats
    working_pressure: Floats  # [Pa] absolute
    withdrawal_bore: Floats
    has_quench: Mask
    quench_duration: Floats
    quench_share: Floats
    has_pipe: Mask
    pipe_inspected: Mask
    pipe_due: Moments
    outlet_clear: Integers
    on_manifold: Mask  # names one
    group: Integers  # vessels of one manifold share one; unique to its room


@dataclass(frozen=True, slots=True)
class Units:
    """One row a ventilation unit and room that it serves."""

    room: Integers
    source: Integers
    arrangement: Integers
    share: Floats
    design_flow: Floats
    measured_flow: Floats
    measurement_due: Moments
    outdoor_air_fraction: Floats
    mixing_factor: Floats
    state: Integers
    outage_begins: Moments  # (units, most outages); not-a-time where there is none
    outage_ends: Moments
    standby_power: Integers
    flow_proved: Integers
    fail_alarm: Integers
    boost_flow: Floats
    boost_detector: Integers  # row of the detectors; -1 where unknown, BY_HAND by a person
    terminal: Integers  # height of the grille that it draws or blows through


@dataclass(frozen=True, slots=True)
class Detectors:
    """One row a detector; its alarms lie in a padded table."""

    room: Integers
    source: Integers
    gas: Integers  # row of the names of gases
    height: Floats
    placed: Integers
    t90: Floats
    delay: Floats
    alarms: Floats  # (detectors, most alarms) as fractions; not-a-number where there is none
    calibration_due: Moments
    state: Integers
    outage_begins: Moments
    outage_ends: Moments
    silenced_since: Moments
    heard_outside: Integers
    display_outside: Integers
    power_backed: Integers
    monitored: Integers
    zeroed_at: Floats


@dataclass(frozen=True, slots=True)
class Lines:
    """One row a supply line and room that it runs through or fills a vessel in."""

    room: Integers
    source: Integers
    fluid: Integers
    phase: Integers
    bore: Floats
    length: Floats
    source_pressure: Floats  # [Pa] absolute
    restrictor: Floats  # [kg/s]
    has_source: Mask  # the vessel that feeds it is a record
    source_pressure_there: Floats  # [Pa] absolute; the working pressure of that vessel
    source_capacity: Floats  # [kg]
    source_contents: Floats  # [kg]
    source_count_due: Moments
    source_state: Integers
    has_shut_off: Mask
    trigger: Integers  # row of TRIGGERS; -1 where unknown or a detector
    detector: Integers  # row of the detectors; -1 where it is none of this room
    named_detector: Mask  # its trigger is a detector, of this room or another
    closes_in: Floats
    fails_closed: Integers
    tested: Mask
    test_due: Moments
    insulation: Integers


@dataclass(frozen=True, slots=True)
class Controls:
    """One row an administrative measure of a room or of a vessel in it."""

    room: Integers
    source: Integers
    kind: Integers
    vessel: Integers  # row of the vessels; -1 where it is of the room
    area: Floats
    checked: Mask
    check_due: Moments


@dataclass(frozen=True, slots=True)
class Fluids:
    """One row a fluid that is met."""

    molar_mass: Floats
    condensed_density: Floats
    oxygen_fraction: Floats
    settles: Integers
    toxic: Mask
    flammable: Mask
    carbon_dioxide: Mask
    nitrous_oxide: Mask
    helium: Mask
    limit_named: Integers  # column of the basis's flammable limits; -1 where it has none
    own_limit: Floats  # lower flammable limit recorded with the fluid
    liquid_density: Floats  # of what is kept as a liquid [kg/m3]
    gas: Integers  # row of the names of gases
    boiling_point: Floats  # [K]
    latent_heat: Floats  # [J/kg]
    vapour_density: Floats  # at the boiling point [kg/m3]; not-a-number of a site's own fluid
    gamma: Floats


@dataclass(frozen=True, slots=True)
class Columns:
    """Everything that many rooms hold."""

    rooms: Rooms
    bases: Bases
    vessels: Vessels
    units: Units
    detectors: Detectors
    controls: Controls
    lines: Lines
    fluids: Fluids
    gases: tuple[str, ...]  # names that detectors and fluids point at

    @property
    def count(self) -> int:
        """How many rooms."""
        return int(self.rooms.kind.size)


_Item = TypeVar("_Item")


@dataclass(frozen=True)  # a generic class with slots cannot be asked for by its type in 3.11
class _Distinct(Generic[_Item]):
    """Things met, each once, in the order they were met."""

    rows: dict[_Item, int] = field(default_factory=dict)
    # Hashing a whole record a hundred thousand times is slow, and most are the same object.
    by_identity: dict[int, int] = field(default_factory=dict)

    def row(self, item: _Item) -> int:
        row = self.by_identity.get(id(item))
        if row is None:
            row = self.rows.setdefault(item, len(self.rows))
            self.by_identity[id(item)] = row
        return row


def columns(rooms: Sequence[RoomValues]) -> Columns:
    """Flatten rooms with everything in them."""
    fluids = _Distinct[FluidValues]()
    gases = _Distinct[str]()
    gases.row(OXYGEN)
    vessels = _vessels(rooms, fluids)
    table = _rooms(rooms, fluids)
    detectors = _detectors(rooms, gases)
    lines = _lines(rooms, fluids)
    fluid_table = _fluids(tuple(fluids.rows), gases)
    return Columns(
        rooms=table,
        bases=_bases(rooms),
        vessels=vessels,
        units=_units(rooms),
        detectors=detectors,
        controls=_controls(rooms),
        lines=lines,
        fluids=fluid_table,
        gases=tuple(gases.rows),
    )


def taken(given: Columns, index: Integers) -> Columns:
    """Return the columns of some rooms, in the order asked for; a room may be taken twice."""
    vessels, vessel_room = members(given.vessels.room, index, given.count)
    units, unit_room = members(given.units.room, index, given.count)
    detectors, detector_room = members(given.detectors.room, index, given.count)
    controls, control_room = members(given.controls.room, index, given.count)
    lines, line_room = members(given.lines.room, index, given.count)
    picked_vessels = replace(_picked(given.vessels, vessels), room=vessel_room)
    picked_lines = replace(_picked(given.lines, lines), room=line_room)
    picked_units = replace(_picked(given.units, units), room=unit_room)
    picked_controls = replace(_picked(given.controls, controls), room=control_room)
    return replace(
        given,
        rooms=_picked(given.rooms, index),
        bases=_picked(given.bases, index),
        # A row that points at another table follows what stood there in the same room.
        vessels=_regrouped(
            replace(
                picked_vessels,
                line=_followed(picked_vessels.line, vessel_room, lines, line_room),
            )
        ),
        lines=replace(
            picked_lines,
            detector=_followed(picked_lines.detector, line_room, detectors, detector_room),
        ),
        units=replace(
            picked_units,
            boost_detector=_followed(
                picked_units.boost_detector, picked_units.room, detectors, detector_room
            ),
        ),
        detectors=replace(_picked(given.detectors, detectors), room=detector_room),
        controls=replace(
            picked_controls,
            vessel=_followed(picked_controls.vessel, control_room, vessels, vessel_room),
        ),
    )


def members(room: Integers, index: Integers, count: int) -> tuple[Integers, Integers]:
    """Rows of a table in room order that belong to the rooms asked for, and which asked each."""
    sizes = np.bincount(room, minlength=count)
    starts = np.cumsum(sizes) - sizes
    wanted = sizes[index]
    asked = np.repeat(np.arange(index.size), wanted)
    within = np.arange(asked.size) - np.repeat(np.cumsum(wanted) - wanted, wanted)
    return within + np.repeat(starts[index], wanted), asked


def is_one_of(codes: Integers, wanted: Sequence[int]) -> Mask:
    """Tell which codes are among a few; numpy's own search is made for many, and slow for these."""
    found: Mask = codes == wanted[0]
    for code in wanted[1:]:
        found = found | (codes == code)
    return found


def all_of(*conditions: Mask) -> Mask:
    """Tell where every condition holds."""
    held: Mask = np.logical_and.reduce(conditions)
    return held


def _followed(
    target: Integers, room: Integers, taken_rows: Integers, taken_room: Integers
) -> Integers:
    """Where the rows pointed at stand once some were taken, each asked for by its own room."""
    found = target.copy()
    points = np.flatnonzero(target >= 0)
    if points.size:
        place = {
            key: row
            for row, key in enumerate(zip(taken_room.tolist(), taken_rows.tolist(), strict=True))
        }
        pairs = zip(room[points].tolist(), target[points].tolist(), strict=True)
        found[points] = [place.get(pair, UNKNOWN) for pair in pairs]
    return found


_Table = TypeVar("_Table", Rooms, Bases, Vessels, Units, Detectors, Controls, Lines)


def _picked(table: _Table, rows: Integers) -> _Table:
    return replace(table, **{each.name: getattr(table, each.name)[rows] for each in fields(table)})


def _regrouped(vessels: Vessels) -> Vessels:
    """Give each room its own groups again where a room was taken twice."""
    widest = int(vessels.group.max(initial=0)) + 1
    _, group = np.unique(vessels.room * widest + vessels.group, return_inverse=True)
    return replace(vessels, group=group.astype(np.int64))


def _rooms(rooms: Sequence[RoomValues], fluids: _Distinct[FluidValues]) -> Rooms:
    return Rooms(
        source=np.arange(len(rooms)),
        kind=_codes((room.kind for room in rooms), ROOM_KINDS),
        gross_volume=_floats(room.gross_volume for room in rooms),
        elevation=_floats(room.elevation for room in rooms),
        station_pressure=_floats(room.station_pressure for room in rooms),
        floor_area=_floats(room.floor_area for room in rooms),
        height=_floats(room.height for room in rooms),
        occupied_fraction=_floats(room.occupied_fraction for room in rooms),
        temperature=_floats(room.temperature for room in rooms),
        below_ground=_flags(room.below_ground for room in rooms),
        purge_flow=_floats(room.purge_flow for room in rooms),
        purge_fluid=_integers(
            UNKNOWN if room.purge_fluid is None else fluids.row(room.purge_fluid) for room in rooms
        ),
        attended=_flags(room.attended for room in rooms),
        unaccompanied=_flags(room.unaccompanied for room in rooms),
        way_out=_floats(room.way_out for room in rooms),
        pit_area=_floats(None if room.pit is None else room.pit.area for room in rooms),
        pit_depth=_floats(None if room.pit is None else room.pit.depth for room in rooms),
        pit_entered=_flags(None if room.pit is None else room.pit.entered for room in rooms),
    )


def _vessels(rooms: Sequence[RoomValues], fluids: _Distinct[FluidValues]) -> Vessels:
    all_of = [vessel for room in rooms for vessel in room.vessels]
    group = _Distinct[tuple[int, str | int]]()
    return Vessels(
        room=_owners([room.vessels for room in rooms]),
        source=_positions([room.vessels for room in rooms]),
        fluid=_integers(fluids.row(vessel.fluid) for vessel in all_of),
        kind=_codes((vessel.kind for vessel in all_of), VESSEL_KINDS),
        state=_codes((vessel.state for vessel in all_of), VESSEL_STATES),
        capacity_volume=_floats(vessel.capacity_volume for vessel in all_of),
        capacity_mass=_floats(vessel.capacity_mass for vessel in all_of),
        contents_volume=_floats(vessel.contents_volume for vessel in all_of),
        contents_mass=_floats(vessel.contents_mass for vessel in all_of),
        count_due=moments(vessel.count_due for vessel in all_of),
        rated_evaporation=_floats(vessel.rated_evaporation for vessel in all_of),
        measured_evaporation=_floats(vessel.measured_evaporation for vessel in all_of),
        measured_loss=_floats(vessel.measured_loss for vessel in all_of),
        use=_floats(vessel.use for vessel in all_of),
        vent_to=_codes((vessel.vent_to for vessel in all_of), VENTS),
        filled_by=_codes(
            (
                vessel.filled_by or (None if vessel.supply_line_id is None else _BY_LINE)
                for vessel in all_of
            ),
            FILLED_BY,
        ),
        filled_as_said=_mask(vessel.filled_by is not None for vessel in all_of),
        fill_flow=_floats(vessel.fill_flow for vessel in all_of),
        high_level=_flags(vessel.independent_high_level for vessel in all_of),
        closes_in=_floats(vessel.closes_in for vessel in all_of),
        shut_off_test_due=moments(vessel.shut_off_test_due for vessel in all_of),
        gross_volume=_floats(vessel.gross_volume for vessel in all_of),
        charge_pressure=_floats(vessel.charge_pressure for vessel in all_of),
        neck_plug=_codes((vessel.neck_plug for vessel in all_of), NECK_PLUGS),
        relief_fitted=_flags(vessel.relief_fitted for vessel in all_of),
        relief_inspected=_mask(vessel.relief_inspected for vessel in all_of),
        relief_due=moments(vessel.relief_inspection_due for vessel in all_of),
        relief_to=_codes((vessel.relief_to for vessel in all_of), VENTS),
        mobile=_flags(vessel.mobile for vessel in all_of),
        insulation=_codes((vessel.insulation for vessel in all_of), INSULATIONS),
        line=_filling_lines(rooms),
        cold_area=_floats(vessel.cold_area for vessel in all_of),
        working_pressure=_floats(vessel.working_pressure for vessel in all_of),
        withdrawal_bore=_floats(vessel.withdrawal_bore for vessel in all_of),
        **_quenches([vessel.quench for vessel in all_of]),
        on_manifold=_mask(vessel.manifold is not None for vessel in all_of),
        group=_integers(
            group.rows.setdefault((row, vessel.manifold or place), len(group.rows))
            for row, room in enumerate(rooms)
            for place, vessel in enumerate(room.vessels)
        ),
    )


def _quenches(quenches: Sequence[QuenchValues | None]) -> dict[str, Any]:
    """What is recorded of the quench of each vessel; nothing of one that is no magnet."""
    nothing = QuenchValues()
    known = [quench or nothing for quench in quenches]
    return {
        "has_quench": _mask(quench is not None for quench in quenches),
        "quench_duration": _floats(quench.duration for quench in known),
        "quench_share": _floats(quench.share_to_room for quench in known),
        "has_pipe": _mask(quench.has_pipe for quench in known),
        "pipe_inspected": _mask(quench.pipe_inspected for quench in known),
        "pipe_due": moments(quench.pipe_inspection_due for quench in known),
        "outlet_clear": _flags(quench.outlet_clear for quench in known),
    }


def _filling_lines(rooms: Sequence[RoomValues]) -> Integers:
    """Row of the line that fills each vessel."""
    found: list[int] = []
    first = 0
    for room in rooms:
        rows = {line.record.id: first + place for place, line in enumerate(room.lines)}
        found += [
            UNKNOWN if vessel.supply_line_id is None else rows.get(vessel.supply_line_id, UNKNOWN)
            for vessel in room.vessels
        ]
        first += len(room.lines)
    return _integers(found)


def _lines(rooms: Sequence[RoomValues], fluids: _Distinct[FluidValues]) -> Lines:
    all_of = [line for room in rooms for line in room.lines]
    detectors = [detector.record.id for room in rooms for detector in room.detectors]
    firsts = np.cumsum([0, *(len(room.detectors) for room in rooms)]).tolist()
    here = [
        {name: row for row, name in enumerate(detectors[begin:end], begin)}
        for begin, end in pairwise(firsts)
    ]
    owners = _owners([room.lines for room in rooms])
    triggers = [line.trigger for line in all_of]
    sources = [line.source for line in all_of]
    return Lines(
        room=owners,
        source=_positions([room.lines for room in rooms]),
        fluid=_integers(fluids.row(line.fluid) for line in all_of),
        phase=_codes((line.phase for line in all_of), PHASES),
        bore=_floats(line.bore for line in all_of),
        length=_floats(line.length for line in all_of),
        source_pressure=_floats(line.source_pressure for line in all_of),
        restrictor=_floats(line.restrictor for line in all_of),
        has_source=_mask(source is not None for source in sources),
        source_pressure_there=_floats(
            None if each is None else each.working_pressure for each in sources
        ),
        source_capacity=_floats(_mass(each, "capacity") for each in sources),
        source_contents=_floats(_mass(each, "contents") for each in sources),
        source_count_due=moments(None if each is None else each.count_due for each in sources),
        source_state=_codes(
            (None if each is None else each.state for each in sources), VESSEL_STATES
        ),
        has_shut_off=_mask(line.has_shut_off for line in all_of),
        trigger=_codes((each if each in TRIGGERS else None for each in triggers), TRIGGERS),
        detector=_integers(
            here[owner].get(trigger or "", UNKNOWN)
            for owner, trigger in zip(owners.tolist(), triggers, strict=True)
        ),
        named_detector=_mask(each is not None and each not in TRIGGERS for each in triggers),
        closes_in=_floats(line.closes_in for line in all_of),
        fails_closed=_flags(line.fails_closed for line in all_of),
        tested=_mask(line.shut_off_tested for line in all_of),
        test_due=moments(line.shut_off_test_due for line in all_of),
        insulation=_codes((line.insulation for line in all_of), INSULATIONS),
    )


def _mass(vessel: VesselValues | None, of: str) -> float | None:
    """Capacity or contents of a vessel by mass [kg]; litres are of liquid at its boiling point."""
    if vessel is None:
        return None
    volume, mass = getattr(vessel, f"{of}_volume"), getattr(vessel, f"{of}_mass")
    if volume is None:
        return None if mass is None else float(mass)
    fluid = vessel.fluid
    if vessel.charge_pressure is not None:
        compressed = gas_density(
            fluid.molar_mass, pressure=vessel.charge_pressure, temperature=CHARGED_AT
        )
        return float(volume * compressed)
    density = fluid.pressure_liquid_density or fluid.condensed_density
    return float(volume) * density


def _units(rooms: Sequence[RoomValues]) -> Units:
    all_of = [unit for room in rooms for unit in room.units]
    begins, ends = _outages([unit.outages for unit in all_of])
    return Units(
        room=_owners([room.units for room in rooms]),
        source=_positions([room.units for room in rooms]),
        arrangement=_codes((unit.arrangement for unit in all_of), ARRANGEMENTS),
        share=_floats(unit.share for unit in all_of),
        design_flow=_floats(unit.design_flow for unit in all_of),
        measured_flow=_floats(unit.measured_flow for unit in all_of),
        measurement_due=moments(unit.measurement_due for unit in all_of),
        outdoor_air_fraction=_floats(unit.outdoor_air_fraction for unit in all_of),
        mixing_factor=_floats(unit.mixing_factor for unit in all_of),
        state=_codes((unit.state for unit in all_of), UNIT_STATES),
        outage_begins=begins,
        outage_ends=ends,
        standby_power=_flags(unit.standby_power for unit in all_of),
        flow_proved=_flags(unit.flow_proved for unit in all_of),
        fail_alarm=_flags(unit.fail_alarm for unit in all_of),
        boost_flow=_floats(unit.boost_flow for unit in all_of),
        boost_detector=_boost_detectors(rooms),
        terminal=_codes((unit.terminal_height for unit in all_of), TERMINALS),
    )


def _boost_detectors(rooms: Sequence[RoomValues]) -> Integers:
    """Row of the detector that starts the boost of each unit; one of another room is unknown."""
    starts: list[int] = []
    first = 0
    for room in rooms:
        rows = {detector.record.id: first + place for place, detector in enumerate(room.detectors)}
        rows[MANUAL] = BY_HAND
        starts += [
            UNKNOWN if unit.boost_trigger is None else rows.get(unit.boost_trigger, UNKNOWN)
            for unit in room.units
        ]
        first += len(room.detectors)
    return _integers(starts)


def _outages(of_each: Sequence[Sequence[Outage]]) -> tuple[Moments, Moments]:
    """When planned outages begin and end, (rows, most outages)."""
    width = max((len(outages) for outages in of_each), default=0)
    shape = (len(of_each), width)
    begins = np.full(shape, np.datetime64("NaT", "us"))
    ends = begins.copy()
    for row, outages in enumerate(of_each):
        if outages:
            begins[row, : len(outages)] = moments(outage.begins for outage in outages)
            ends[row, : len(outages)] = moments(outage.ends for outage in outages)
    return begins, ends


def _controls(rooms: Sequence[RoomValues]) -> Controls:
    all_of = [control for room in rooms for control in room.controls]
    vessels: list[int] = []
    first = 0
    for room in rooms:
        rows = {vessel.record.id: first + place for place, vessel in enumerate(room.vessels)}
        vessels += [
            UNKNOWN if control.vessel_id is None else rows.get(control.vessel_id, UNKNOWN)
            for control in room.controls
        ]
        first += len(room.vessels)
    return Controls(
        room=_owners([room.controls for room in rooms]),
        source=_positions([room.controls for room in rooms]),
        kind=_codes((control.kind for control in all_of), CONTROL_KINDS),
        vessel=_integers(vessels),
        area=_floats(control.area for control in all_of),
        checked=_mask(control.checked for control in all_of),
        check_due=moments(control.check_due for control in all_of),
    )


def _detectors(rooms: Sequence[RoomValues], gases: _Distinct[str]) -> Detectors:
    all_of = [detector for room in rooms for detector in room.detectors]
    begins, ends = _outages([detector.outages for detector in all_of])
    return Detectors(
        room=_owners([room.detectors for room in rooms]),
        source=_positions([room.detectors for room in rooms]),
        gas=_integers(gases.row(detector.gas) for detector in all_of),
        height=_floats(detector.height for detector in all_of),
        placed=_codes((detector.placed for detector in all_of), PLACES),
        t90=_floats(detector.t90 for detector in all_of),
        delay=_floats(detector.delay for detector in all_of),
        alarms=_padded([detector.alarms for detector in all_of]) / 100.0,
        calibration_due=moments(detector.calibration_due for detector in all_of),
        state=_codes((detector.state for detector in all_of), DETECTOR_STATES),
        outage_begins=begins,
        outage_ends=ends,
        silenced_since=moments(detector.silenced_since for detector in all_of),
        heard_outside=_flags(detector.heard_outside for detector in all_of),
        display_outside=_flags(detector.display_outside for detector in all_of),
        power_backed=_flags(detector.power_backed for detector in all_of),
        monitored=_flags(detector.monitored for detector in all_of),
        zeroed_at=_floats(detector.zeroed_at for detector in all_of),
    )


def _fluids(fluids: Sequence[FluidValues], gases: _Distinct[str]) -> Fluids:
    return Fluids(
        molar_mass=_floats(fluid.molar_mass for fluid in fluids),
        condensed_density=_floats(fluid.condensed_density for fluid in fluids),
        oxygen_fraction=_floats(fluid.oxygen_fraction for fluid in fluids),
        settles=_codes((fluid.settles for fluid in fluids), SETTLES),
        toxic=_mask("toxic" in fluid.hazards for fluid in fluids),
        flammable=_mask("flammable" in fluid.hazards for fluid in fluids),
        carbon_dioxide=_mask(fluid.record.tag == CARBON_DIOXIDE for fluid in fluids),
        nitrous_oxide=_mask(fluid.record.tag == NITROUS_OXIDE for fluid in fluids),
        helium=_mask(fluid.record.tag == HELIUM for fluid in fluids),
        limit_named=_integers(
            _FLAMMABLE.index(tag) if (tag := fluid.record.tag) in _FLAMMABLE else UNKNOWN
            for fluid in fluids
        ),
        own_limit=_floats(fluid.flammable_limit for fluid in fluids),
        liquid_density=_floats(
            fluid.condensed_density
            if fluid.pressure_liquid_density is None
            else fluid.pressure_liquid_density
            for fluid in fluids
        ),
        gas=_integers(gases.row(fluid.record.tag) for fluid in fluids),
        boiling_point=_floats(fluid.boiling_point for fluid in fluids),
        latent_heat=_floats(_LATENT_HEAT.get(fluid.record.tag, _LEAST_HEAT) for fluid in fluids),
        vapour_density=_floats(_VAPOUR.get(fluid.record.tag) for fluid in fluids),
        gamma=_floats(_GAMMA.get(fluid.record.tag, _USUAL_GAMMA) for fluid in fluids),
    )


def _bases(rooms: Sequence[RoomValues]) -> Bases:
    first: dict[int, int] = {}
    distinct: list[Mapping[str, Any]] = []
    for room in rooms:
        if first.setdefault(id(room.basis), len(distinct)) == len(distinct):
            distinct.append(room.basis.values)
    which = _integers(first[id(room.basis)] for room in rooms)
    return _picked(_basis_table(distinct), which)


def _basis_table(bases: Sequence[Mapping[str, Any]]) -> Bases:
    def number(name: str, scale: float = 1.0) -> Floats:
        return _floats(values[name] for values in bases) * scale

    def named(name: str, parts: Sequence[str]) -> Floats:
        rows = [[values[name][part] for part in parts] for values in bases]
        return np.array(rows, dtype=np.float64).reshape(len(bases), len(parts)) * PERCENT

    def air_changes(where: str) -> Floats:
        changes = _floats(values["natural_air_changes_per_h"][where] for values in bases)
        return changes / SECONDS_PER_HOUR

    return Bases(
        deficient=number("oxygen_deficient_pct", PERCENT),
        danger=number("oxygen_danger_pct", PERCENT),
        danger_pressure=number("oxygen_danger_kpa", KILOPASCAL),
        critical=number("oxygen_critical_pct", PERCENT),
        critical_pressure=number("oxygen_critical_kpa", KILOPASCAL),
        enriched=number("oxygen_enriched_pct", PERCENT),
        rich_second=_floats(values["oxygen_rich_marks_pct"][0] for values in bases) * PERCENT,
        rich_third=_floats(values["oxygen_rich_marks_pct"][1] for values in bases) * PERCENT,
        mixing_factor=number("mixing_factor"),
        air_changes_above_ground=air_changes("above_ground"),
        air_changes_below_ground=air_changes("below_ground"),
        air_changes_enclosed=air_changes("enclosed"),
        by_displacement=_mask(values["instant_mixing"] == "displacement" for values in bases),
        as_recorded=_mask(values["contents"] == "recorded" for values in bases),
        fill_loss=number("fill_loss_fraction"),
        fill_margin=number("fill_loss_fraction"),
        fill_flow=number("default_fill_flow_l_min", _LITRES_A_MINUTE),
        warm_fill_loss=number("warm_fill_loss"),
        helium_fill_loss=number("helium_fill_loss"),
        evaporation_factor=number("evaporation_factor"),
        evaporation_by_kind=_by_kind([values["evaporation_pct_day"] for values in bases]),
        sustained=number("sustained_h", SECONDS_PER_HOUR),
        restore=number("restore_s"),
        react=number("react_s"),
        walk=number("walk_m_s"),
        net_volume_share=number("net_volume_share"),
        never_measured_share=number("never_measured_share"),
        ice_share=number("ice_share_per_h"),
        loose_ice_share=number("loose_ice_share_per_h"),
        inspected_pipe_share=number("inspected_pipe_share"),
        many_vessels=number("many_vessels"),
        carbon_dioxide=named("carbon_dioxide_pct", ("mean_8h", "mean_15min", "peak")),
        nitrous_oxide=named("nitrous_oxide_pct", ("mean_8h", "mean_15min")),
        nitrous_oxide_accident=number("nitrous_oxide_accident_pct", PERCENT),
        flammable_limits=named("lfl_pct", _FLAMMABLE),
        flammable_shares=np.array(
            [values["lfl_shares"] for values in bases], dtype=np.float64
        ).reshape(len(bases), 3),
        severity=_severities([values["severity_table"] for values in bases]),
    )


def _by_kind(shares: Sequence[Mapping[str, float]]) -> Floats:
    """Share of capacity that evaporates a second; none from ice and cylinders."""
    rows = [[share.get(kind, 0.0) for kind in VESSEL_KINDS] for share in shares]
    per_day = np.array(rows, dtype=np.float64).reshape(len(shares), len(VESSEL_KINDS))
    return per_day * PERCENT / SECONDS_PER_DAY


def _severities(tables: Sequence[Mapping[str, Sequence[str]]]) -> Integers:
    rows = [
        [[SEVERITIES.index(cell) for cell in table[row]] for row in ("first", "second", "third")]
        for table in tables
    ]
    return np.array(rows, dtype=np.int64).reshape(len(tables), 3, 3)


def _owners(groups: Sequence[Sized]) -> Integers:
    sizes = np.array([len(group) for group in groups], dtype=np.int64)
    return np.repeat(np.arange(sizes.size), sizes)


def _positions(groups: Sequence[Sized]) -> Integers:
    return _integers(place for group in groups for place in range(len(group)))


def _floats(values: Iterable[float | None]) -> Floats:
    """Numbers in double precision; None becomes not-a-number."""
    return np.array(list(values), dtype=np.float64)


def _integers(values: Iterable[int]) -> Integers:
    return np.array(list(values), dtype=np.int64)


def _mask(values: Iterable[bool]) -> Mask:
    return np.array(list(values), dtype=np.bool_)


def _flags(values: Iterable[bool | None]) -> Integers:
    return _integers(UNKNOWN if value is None else int(value) for value in values)


def _codes(values: Iterable[str | None], names: Sequence[str]) -> Integers:
    code: dict[str | None, int] = {name: place for place, name in enumerate(names)}
    code[None] = UNKNOWN
    return _integers(code[value] for value in values)


def moments(values: Iterable[datetime | None]) -> Moments:
    """Aware times as UTC in microseconds; None becomes not-a-time."""
    naive = [
        None if value is None else value.astimezone(UTC).replace(tzinfo=None) for value in values
    ]
    return np.array(naive, dtype="datetime64[us]")


def _padded(lists: Sequence[Sequence[float]]) -> Floats:
    width = max((len(items) for items in lists), default=0)
    rows = [[*items, *[math.nan] * (width - len(items))] for items in lists]
    return np.array(rows, dtype=np.float64).reshape(len(lists), width)
