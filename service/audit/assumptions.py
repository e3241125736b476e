"""What is taken where a record says nothing: the value, why, and its mildest sound bound.

A value is judged to decide a room's standing when its mildest sound bound would change the worst
mark or severity of the room's cases (judging 5). The bounds are in `ASSUMPTIONS`, beside each.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Final

import numpy as np
import numpy.typing as npt

from service.audit.air import AIRFLOWS, AS_MEASURED, unknown_outdoor_share
from service.audit.assumed_equipment import EQUIPMENT
from service.audit.assumption import Assumption
from service.audit.bases import COMMON_PRACTICE
from service.audit.cases import CaseTable
from service.audit.columns import (
    ARRANGEMENTS,
    CARBON_DIOXIDE,
    DETECTOR_STATES,
    FILLED_BY,
    NITROUS_OXIDE,
    UNKNOWN,
    VENTS,
    VESSEL_STATES,
    Columns,
    all_of,
    is_one_of,
)
from service.audit.conditions import SEA_LEVEL, is_enclosed
from service.audit.hazards import ABOUT_OXYGEN, FLAMMABLE, HAZARDS, flammable_limit
from service.audit.inventory import CLOSES_IN, CYLINDER, ICE
from service.audit.safeguards import OXYGEN_GAS, UNKNOWN_T90
from service.physics.arrays import Floats, Integers, Mask
from service.physics.constants import (
    ROOM_TEMPERATURE,
    SECONDS_PER_DAY,
    SECONDS_PER_HOUR,
    ZERO_CELSIUS,
)
from service.physics.real_gas import REAL_GASES

_LITRES: Final = 1000.0  # in a cubic metre
_MILDEST_TEMPERATURE: Final = ZERO_CELSIUS + 15.0
_FAR: Final = np.datetime64("9999-01-01", "us")
_IN_SERVICE = DETECTOR_STATES.index("in-service")
_EMPTY = VESSEL_STATES.index("empty")
_NITROUS_OXIDE = [hazard.gas for hazard in HAZARDS].index(NITROUS_OXIDE)
_FLAMMABLE = [hazard.slug for hazard in HAZARDS].index(FLAMMABLE)
# The least of what hoses are used for. [m3/s] of liquid  Common practice, no source.
_SLOW_FILLING: Final = 1e-3 / 60.0


def _has_cases(table: CaseTable) -> Mask:
    rooms = np.zeros(table.given.count, dtype=np.bool_)
    rooms[table.room] = True
    return rooms


def _no_occupied(table: CaseTable) -> Mask:
    return all_of(np.isnan(table.given.rooms.occupied_fraction), _has_cases(table))


def _occupied(table: CaseTable) -> Floats:
    return 1.0 - table.given.bases.net_volume_share


def _nothing_occupied(given: Columns, rooms: Mask) -> Columns:
    values = given.rooms.occupied_fraction
    filled = np.where(np.isnan(values) & rooms, 0.0, values)
    return replace(given, rooms=replace(given.rooms, occupied_fraction=filled))


def _no_temperature(table: CaseTable) -> Mask:
    return all_of(np.isnan(table.given.rooms.temperature), _has_cases(table))


def _room_temperature(table: CaseTable) -> Floats:
    return np.full(table.given.count, ROOM_TEMPERATURE - ZERO_CELSIUS)


def _cool(given: Columns, rooms: Mask) -> Columns:
    values = given.rooms.temperature
    filled = np.where(np.isnan(values) & rooms, _MILDEST_TEMPERATURE, values)
    return replace(given, rooms=replace(given.rooms, temperature=filled))


def _no_elevation(table: CaseTable) -> Mask:
    rooms = table.given.rooms
    unknown = all_of(np.isnan(rooms.elevation), np.isnan(rooms.station_pressure))
    return all_of(unknown, _has_cases(table))


def _sea_level(table: CaseTable) -> Floats:
    return np.full(table.given.count, SEA_LEVEL)


def _no_ground(table: CaseTable) -> Mask:
    relies = table.air.natural[AIRFLOWS.index(AS_MEASURED)] & ~is_enclosed(table.given)
    return all_of(table.given.rooms.below_ground == UNKNOWN, relies, _has_cases(table))


def _below_ground(table: CaseTable) -> bool:
    return True


def _above_ground(given: Columns, rooms: Mask) -> Columns:
    values = given.rooms.below_ground
    filled = np.where((values == UNKNOWN) & rooms, 0, values)
    return replace(given, rooms=replace(given.rooms, below_ground=filled))


def _no_way_out(table: CaseTable) -> Mask:
    watched = np.zeros(table.given.count, dtype=np.bool_)
    watched[table.given.detectors.room] = True
    return all_of(np.isnan(table.given.rooms.way_out), watched, _has_cases(table))


def _way_out(table: CaseTable) -> Floats:
    return table.conditions.way_out


def _at_the_door(given: Columns, rooms: Mask) -> Columns:
    values = given.rooms.way_out
    filled = np.where(np.isnan(values) & rooms, 0.0, values)
    return replace(given, rooms=replace(given.rooms, way_out=filled))


def _no_purge_fluid(table: CaseTable) -> Mask:
    rooms = table.given.rooms
    return all_of(rooms.purge_flow > 0.0, rooms.purge_fluid == UNKNOWN)


def _nitrogen(table: CaseTable) -> str:
    return "nitrogen"


def _no_arrangement(table: CaseTable) -> Mask:
    return all_of(table.given.units.arrangement == UNKNOWN, table.air.units.runs)


def _exhaust(table: CaseTable) -> str:
    return "exhaust"


def _supply(given: Columns, rooms: Mask) -> Columns:
    values = given.units.arrangement
    chosen = (values == UNKNOWN) & rooms[given.units.room]
    filled = np.where(chosen, ARRANGEMENTS.index("supply"), values)
    return replace(given, units=replace(given.units, arrangement=filled))


def _no_outdoor_share(table: CaseTable) -> Mask:
    return all_of(np.isnan(table.given.units.outdoor_air_fraction), table.air.units.runs)


def _outdoor_share(table: CaseTable) -> Floats:
    return unknown_outdoor_share(table.given.units.arrangement)


def _all_outdoor(given: Columns, rooms: Mask) -> Columns:
    values = given.units.outdoor_air_fraction
    filled = np.where(np.isnan(values) & rooms[given.units.room], 1.0, values)
    return replace(given, units=replace(given.units, outdoor_air_fraction=filled))


def _never_measured(table: CaseTable) -> Mask:
    return table.air.units.never_measured & table.air.units.runs


def _measured_long_ago(table: CaseTable) -> Mask:
    units = table.air.units
    return ~units.never_measured & ~units.measurement_holds & units.runs


def _flow(table: CaseTable) -> Floats:
    return table.air.units.whole_flow * SECONDS_PER_HOUR


def _as_designed(given: Columns, rooms: Mask) -> Columns:
    units = given.units
    unmeasured = np.isnan(units.measured_flow) & rooms[units.room]
    flow = np.where(unmeasured, units.design_flow, units.measured_flow)
    due = np.where(unmeasured & ~np.isnan(units.design_flow), _FAR, units.measurement_due)
    return replace(given, units=replace(units, measured_flow=flow, measurement_due=due))


def _still_as_measured(given: Columns, rooms: Mask) -> Columns:
    units = given.units
    measured = ~np.isnan(units.measured_flow) & rooms[units.room]
    due = np.where(measured, _FAR, units.measurement_due)
    return replace(given, units=replace(units, measurement_due=due))


def _rated_by_kind(table: CaseTable) -> Mask:
    return table.stock.evaporates_by_kind & _gives_off(table)


def _gives_off(table: CaseTable) -> Mask:
    """Vessels whose evaporation reaches the room."""
    return all_of(table.stock.present, table.stock.evaporation > 0.0)


def _by_kind(table: CaseTable) -> Floats:
    vessels = table.given.vessels
    share = table.given.bases.evaporation_by_kind[vessels.room, vessels.kind]
    litres = vessels.capacity_volume * _LITRES
    return np.where(np.isnan(litres), 0.0, litres) * share * SECONDS_PER_DAY


def _by_kind_without_factor(given: Columns, rooms: Mask) -> Columns:
    vessels, bases = given.vessels, given.bases
    chosen = rooms[vessels.room]
    chosen &= np.isnan(vessels.measured_evaporation) & np.isnan(vessels.rated_evaporation)
    rate = bases.evaporation_by_kind[vessels.room, vessels.kind] * vessels.capacity_volume
    measured = np.where(chosen, rate, vessels.measured_evaporation)
    return replace(given, vessels=replace(vessels, measured_evaporation=measured))


def _no_loss(table: CaseTable) -> Mask:
    vessels = table.given.vessels
    return all_of(vessels.kind == ICE, np.isnan(vessels.measured_loss), _gives_off(table))


def _loss_of_ice(table: CaseTable) -> Floats:
    return table.stock.evaporation * SECONDS_PER_DAY


def _no_filling(table: CaseTable) -> Mask:
    vessels = table.given.vessels
    filled = ~is_one_of(vessels.kind, (ICE, CYLINDER))
    return all_of(vessels.filled_by == UNKNOWN, filled, table.stock.present)


def _attended(table: CaseTable) -> str:
    return "attended"


def _exchanged(given: Columns, rooms: Mask) -> Columns:
    values = given.vessels.filled_by
    chosen = (values == UNKNOWN) & rooms[given.vessels.room]
    filled = np.where(chosen, FILLED_BY.index("exchanged"), values)
    return replace(given, vessels=replace(given.vessels, filled_by=filled))


def _no_vent(table: CaseTable) -> Mask:
    return all_of(table.given.vessels.vent_to == UNKNOWN, _gives_off(table))


def _into_room(table: CaseTable) -> str:
    return "room"


def _outdoors(given: Columns, rooms: Mask) -> Columns:
    values = given.vessels.vent_to
    chosen = (values == UNKNOWN) & rooms[given.vessels.room]
    filled = np.where(chosen, VENTS.index("outdoors"), values)
    return replace(given, vessels=replace(given.vessels, vent_to=filled))


def _no_count(table: CaseTable) -> Mask:
    """Vessels taken full although less is recorded or wanted, since no count holds."""
    vessels = table.given.vessels
    wanted = table.given.bases.as_recorded[vessels.room] | (vessels.state == _EMPTY)
    return all_of(wanted, ~table.stock.count_holds, table.stock.present)


def _no_count_in_litres(table: CaseTable) -> Mask:
    return all_of(_no_count(table), np.isnan(table.given.vessels.capacity_mass))


def _no_count_in_kilograms(table: CaseTable) -> Mask:
    return all_of(_no_count(table), ~np.isnan(table.given.vessels.capacity_mass))


def _full_litres(table: CaseTable) -> Floats:
    vessels = table.given.vessels
    most: Floats = np.fmax(vessels.capacity_volume, vessels.contents_volume)
    litres: Floats = most * _LITRES
    return litres


def _full_kilograms(table: CaseTable) -> Floats:
    vessels = table.given.vessels
    most: Floats = np.fmax(vessels.capacity_mass, vessels.contents_mass)
    return most


def _as_last_counted(given: Columns, rooms: Mask) -> Columns:
    vessels = given.vessels
    due = np.where(rooms[vessels.room], _FAR, vessels.count_due)
    return replace(given, vessels=replace(vessels, count_due=due))


def _no_alarms(table: CaseTable) -> Mask:
    detectors = table.given.detectors
    unset = np.isnan(detectors.alarms)
    return all_of(np.logical_and.reduce(unset, axis=1), _watched(table))


def _watched(table: CaseTable) -> Mask:
    """Detectors in service of a gas that a case of their room is about."""
    given = table.given
    detectors = given.detectors
    gases = len(given.gases)
    about = np.zeros((given.count, gases), dtype=np.bool_)
    about[table.room, OXYGEN_GAS] = True
    own = ~ABOUT_OXYGEN[table.hazard[table.member_row]]
    rows = table.member_row[own]
    gas = given.fluids.gas[table.sources.fluid[table.member_source[own]]]
    about[table.room[rows], gas] = True
    return all_of(about[detectors.room, detectors.gas], detectors.state == _IN_SERVICE)


def _second_mark(table: CaseTable) -> Floats:
    """The second mark of the gas of each detector, in percent of it."""
    given = table.given
    detectors, bases = given.detectors, given.bases
    marks = table.conditions.low_marks[detectors.room, 1].copy()
    gases = np.array(given.gases)[detectors.gas]
    for tag, levels in (
        (CARBON_DIOXIDE, bases.carbon_dioxide[:, 1]),
        (NITROUS_OXIDE, bases.nitrous_oxide[:, 1]),
    ):
        marks = np.where(gases == tag, levels[detectors.room], marks)
    fluid_of = np.full(len(given.gases), UNKNOWN)
    fluid_of[given.fluids.gas] = np.arange(given.fluids.gas.size)
    limit = flammable_limit(given, detectors.room, fluid_of[detectors.gas])
    half = limit * bases.flammable_shares[detectors.room, 1]
    marks_pct: Floats = 100.0 * np.where(np.isnan(half), marks, half)
    return marks_pct


def _no_response(table: CaseTable) -> Mask:
    return all_of(np.isnan(table.given.detectors.t90), _watched(table))


def _usual_response(table: CaseTable) -> Floats:
    return np.full(table.given.detectors.room.size, UNKNOWN_T90)


def _no_people(table: CaseTable) -> Mask:
    """Rooms judged by a mean of 8 h that is for those who work there."""
    asked = np.zeros(table.given.count, dtype=np.bool_)
    asked[table.room[table.sustained & (table.hazard == _NITROUS_OXIDE)]] = True
    return all_of(table.given.rooms.attended == UNKNOWN, asked)


def _attended_room(table: CaseTable) -> bool:
    return True


def _unattended(given: Columns, rooms: Mask) -> Columns:
    values = given.rooms.attended
    filled = np.where((values == UNKNOWN) & rooms, 0, values)
    return replace(given, rooms=replace(given.rooms, attended=filled))


def _no_measures(table: CaseTable) -> Mask:
    """Rooms of unknown height with flammable gas, whose zones follow from it."""
    asked = np.zeros(table.given.count, dtype=np.bool_)
    asked[table.room[table.hazard == _FLAMMABLE]] = True
    return all_of(np.isnan(table.conditions.height), asked)


def _as_a_cube(table: CaseTable) -> Floats:
    tall: Floats = np.cbrt(table.given.rooms.gross_volume)
    return tall


def _no_fill_flow(table: CaseTable) -> Mask:
    filled = (table.stock.filling > 0.0) | (table.stock.overfill > 0.0)
    return all_of(np.isnan(table.given.vessels.fill_flow), filled)


def _usual_fill_flow(table: CaseTable) -> Floats:
    flow: Floats = table.given.bases.fill_flow[table.given.vessels.room] * _LITRES * 60.0
    return flow


def _slow_filling(given: Columns, rooms: Mask) -> Columns:
    vessels = given.vessels
    chosen = np.isnan(vessels.fill_flow) & rooms[vessels.room]
    slow = np.minimum(_SLOW_FILLING, given.bases.fill_flow[vessels.room])
    filled = np.where(chosen, slow, vessels.fill_flow)
    return replace(given, vessels=replace(vessels, fill_flow=filled))


def _no_closing_time(table: CaseTable) -> Mask:
    closes = table.stock.shut_off_holds & (table.stock.overfill > 0.0)
    return all_of(np.isnan(table.given.vessels.closes_in), closes)


def _a_minute(table: CaseTable) -> Floats:
    return np.full(table.given.vessels.room.size, CLOSES_IN)


def _at_once_closed(given: Columns, rooms: Mask) -> Columns:
    vessels = given.vessels
    chosen = np.isnan(vessels.closes_in) & rooms[vessels.room]
    filled = np.where(chosen, 0.0, vessels.closes_in)
    return replace(given, vessels=replace(vessels, closes_in=filled))


def _no_mobility(table: CaseTable) -> Mask:
    tips = (table.stock.spilt > 0.0) | (table.stock.tipped > 0.0)
    return all_of(table.given.vessels.mobile == UNKNOWN, tips)


def _tips(table: CaseTable) -> bool:
    return True


def _stands_fast(given: Columns, rooms: Mask) -> Columns:
    vessels = given.vessels
    chosen = (vessels.mobile == UNKNOWN) & rooms[vessels.room]
    filled = np.where(chosen, 0, vessels.mobile)
    return replace(given, vessels=replace(vessels, mobile=filled))


def _of_unknown_equation(table: CaseTable) -> Mask:
    """Cylinders by volume of a gas that no equation of state is at hand for."""
    given = table.given
    real = np.array([gas in REAL_GASES for gas in given.gases])
    own = ~real[given.fluids.gas[given.vessels.fluid]]
    return all_of(~np.isnan(given.vessels.charge_pressure), own, table.stock.present)


def _charge(table: CaseTable) -> Floats:
    return table.stock.full_mass


ASSUMPTIONS: Final = (
    Assumption(
        "vessel",
        "capacity_kg",
        _of_unknown_equation,
        _charge,
        "Its mass is that of an ideal gas at its pressure: a mixture of the site's own.",
        COMMON_PRACTICE,
        True,
        None,
    ),
    Assumption(
        "room",
        "people.attended",
        _no_people,
        _attended_room,
        "Whether people work there is not recorded: somebody does.",
        COMMON_PRACTICE,
        True,
        _unattended,
    ),
    Assumption(
        "room",
        "height_m",
        _no_measures,
        _as_a_cube,
        "Neither height nor floor is recorded: as high as it is wide.",
        COMMON_PRACTICE,
        True,
        None,
    ),
    Assumption(
        "vessel",
        "filling.flow_l_min",
        _no_fill_flow,
        _usual_fill_flow,
        "How fast it is filled is not recorded.",
        "default_fill_flow_l_min",
        False,
        _slow_filling,  # 1 L/min
    ),
    Assumption(
        "vessel",
        "filling.closes_in_s",
        _no_closing_time,
        _a_minute,
        "How long its independent shut-off takes is not recorded.",
        COMMON_PRACTICE,
        True,
        _at_once_closed,
    ),
    Assumption(
        "vessel",
        "mobile",
        _no_mobility,
        _tips,
        "Whether it can tip is not recorded.",
        COMMON_PRACTICE,
        True,
        _stands_fast,
    ),
    Assumption(
        "room",
        "occupied_fraction",
        _no_occupied,
        _occupied,
        "How much of the room its fittings take is not recorded.",
        "net_volume_share",
        True,
        _nothing_occupied,
    ),
    Assumption(
        "room",
        "temperature_c",
        _no_temperature,
        _room_temperature,
        "The temperature of the room is not recorded.",
        COMMON_PRACTICE,
        False,
        _cool,  # 15 degrees Celsius
    ),
    Assumption(
        "site",
        "elevation_m",
        _no_elevation,
        _sea_level,
        "Neither the elevation nor the air pressure of the site is recorded.",
        COMMON_PRACTICE,
        True,
        None,
    ),
    Assumption(
        "room",
        "below_ground",
        _no_ground,
        _below_ground,
        "Whether the room lies below the ground is not recorded.",
        "natural_air_changes_per_h",
        True,
        _above_ground,
    ),
    Assumption(
        "room",
        "egress_m",
        _no_way_out,
        _way_out,
        "The way out is not recorded: the diagonal of a square floor and a metre.",
        COMMON_PRACTICE,
        False,
        _at_the_door,  # no way at all
    ),
    Assumption(
        "room",
        "purge_fluid",
        _no_purge_fluid,
        _nitrogen,
        "What the room is purged with is not recorded: a gas without oxygen.",
        COMMON_PRACTICE,
        True,
        None,
    ),
    Assumption(
        "ventilation-unit",
        "arrangement",
        _no_arrangement,
        _exhaust,
        "Whether the unit blows in or draws out is not recorded.",
        COMMON_PRACTICE,
        True,
        _supply,
    ),
    Assumption(
        "ventilation-unit",
        "outdoor_air_fraction",
        _no_outdoor_share,
        _outdoor_share,
        "How much of its air is outdoor air is not recorded.",
        COMMON_PRACTICE,
        True,
        _all_outdoor,
    ),
    Assumption(
        "ventilation-unit",
        "measured_flow_m3_h",
        _never_measured,
        _flow,
        "Its flow was never measured: a share of the design flow, or none.",
        "never_measured_share",
        False,  # a finding of its own
        _as_designed,  # the whole design flow
    ),
    Assumption(
        "ventilation-unit",
        "measured_flow_m3_h",
        _measured_long_ago,
        _flow,
        "The measurement of its flow is overdue: the lower of design and measurement.",
        COMMON_PRACTICE,
        False,  # a finding of its own
        _still_as_measured,
    ),
    Assumption(
        "vessel",
        "rated_evaporation_l_day",
        _rated_by_kind,
        _by_kind,
        "Its evaporation is neither measured nor rated: by kind of vessel.",
        "evaporation_pct_day",
        True,
        _by_kind_without_factor,
    ),
    Assumption(
        "vessel",
        "measured_loss_kg_day",
        _no_loss,
        _loss_of_ice,
        "Its loss was never measured.",
        "ice_share_per_h",
        False,
        None,
    ),
    Assumption(
        "vessel",
        "filling.by",
        _no_filling,
        _attended,
        "How it is filled is not recorded: in the room.",
        "fill_loss_fraction",
        True,
        _exchanged,
    ),
    Assumption(
        "vessel",
        "vent_to",
        _no_vent,
        _into_room,
        "Where its gas goes is not recorded.",
        COMMON_PRACTICE,
        True,
        _outdoors,
    ),
    Assumption(
        "vessel",
        "contents_l",
        _no_count_in_litres,
        _full_litres,
        "Its contents are not counted in date, or a line fills it: full.",
        "contents",
        True,
        _as_last_counted,
    ),
    Assumption(
        "vessel",
        "contents_kg",
        _no_count_in_kilograms,
        _full_kilograms,
        "Its contents are not counted in date: full.",
        "contents",
        True,
        _as_last_counted,
    ),
    Assumption(
        "detector",
        "alarms_pct",
        _no_alarms,
        _second_mark,
        "Its alarm points are not recorded: late, at the second mark.",
        COMMON_PRACTICE,
        True,
        None,
    ),
    Assumption(
        "detector",
        "t90_s",
        _no_response,
        _usual_response,
        "Its time of response is not recorded.",
        COMMON_PRACTICE,
        False,
        None,
    ),
    *EQUIPMENT,
)


@dataclass(frozen=True, slots=True)
class Assumptions:
    """One row a field of a record that was assumed, in order of rooms."""

    code: Integers  # row of ASSUMPTIONS
    room: Integers
    row: Integers  # of the table of its record
    value: npt.NDArray[np.object_]
    matters: Mask


def assumptions(table: CaseTable) -> Assumptions:
    """List what was assumed."""
    blocks = [_rows_of(table, each) for each in ASSUMPTIONS]
    sizes = [rows.size for rows, _, _ in blocks]
    code = np.repeat(np.arange(len(ASSUMPTIONS)), sizes)
    rows = np.concatenate([rows for rows, _, _ in blocks])
    room = np.concatenate([room for _, room, _ in blocks])
    value = np.concatenate([value for _, _, value in blocks])
    order = np.lexsort((rows, code, room))
    matters = np.array([each.matters for each in ASSUMPTIONS])
    return Assumptions(code[order], room[order], rows[order], value[order], matters[code[order]])


def _rows_of(
    table: CaseTable, assumption: Assumption
) -> tuple[Integers, Integers, npt.NDArray[np.object_]]:
    rows = np.flatnonzero(assumption.missing(table))
    taken = assumption.value(table)
    values = np.empty(rows.size, dtype=np.object_)
    if isinstance(taken, str | bool):
        values[:] = taken
    else:
        values[:] = [float(f"{value:.10g}") for value in taken[rows]]
    return rows, _rooms_of(table.given, assumption.record)[rows], values


def _rooms_of(given: Columns, record: str) -> Integers:
    tables = {
        "vessel": given.vessels.room,
        "ventilation-unit": given.units.room,
        "detector": given.detectors.room,
        "supply-line": given.lines.room,
    }
    return tables.get(record, np.arange(given.count))
