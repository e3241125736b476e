"""Records -> the values an audit reads: litres to m3 and hours to seconds happen here, once."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from datetime import date, datetime, timedelta
from typing import Any, Final

from service.audit.bases import effective
from service.audit.inputs import (
    BasisValues,
    ControlValues,
    DetectorValues,
    FluidValues,
    LineValues,
    OpeningValues,
    Outage,
    PitValues,
    QuenchValues,
    Reference,
    RoomValues,
    UnitValues,
    VesselValues,
)
from service.changes.kinds import rooms_reached
from service.clock import end_of_day, moment_of
from service.physics.fluids import FLUIDS
from service.store.records import Record

ATMOSPHERE: Final = 101_325.0  # [Pa]; what gauge pressures are counted from
LITRE: Final = 1e-3  # [m3]
MILLIMETRE: Final = 1e-3  # [m]
MINUTE: Final = 60.0  # [s]
DAY: Final = 86_400.0  # [s]
HOUR: Final = 3_600.0  # [s]
KILOPASCAL: Final = 1e3  # [Pa]
PERCENT: Final = 1e-2  # [1]
ZERO_CELSIUS: Final = 273.15  # [K]


@dataclass(frozen=True, slots=True)
class _Placed:
    """What stands in each room, found once for all rooms; in record order, that is by id."""

    vessels: dict[str, list[Record]]
    units: dict[str, list[Record]]
    detectors: dict[str, list[Record]]
    controls: dict[str, list[Record]]
    openings: dict[str, list[Record]]
    lines: dict[str, list[Record]]


def values_of_rooms(records: Mapping[str, Record], room_ids: Iterable[str]) -> list[RoomValues]:
    """Give the values of rooms that are there, from a neighbourhood that holds all they need."""
    standing = _placed(records)
    return [
        _room_values(records, standing, records[room_id])
        for room_id in sorted(room_ids)
        if room_id in records
    ]


def _placed(records: Mapping[str, Record]) -> _Placed:
    placed = _Placed({}, {}, {}, {}, {}, {})
    for record in sorted(records.values(), key=lambda record: record.id):
        if record.kind == "vessel" and record.fields["room_id"] is not None:
            placed.vessels.setdefault(record.fields["room_id"], []).append(record)
        elif record.kind == "detector":
            placed.detectors.setdefault(record.fields["room_id"], []).append(record)
        elif record.kind == "ventilation-unit":
            for served in record.fields["serves"]:
                placed.units.setdefault(served["room_id"], []).append(record)
        elif record.kind == "control":
            for room_id in rooms_reached(record, records):
                placed.controls.setdefault(room_id, []).append(record)
        elif record.kind == "supply-line":
            for room_id in sorted(rooms_reached(record, records)):
                placed.lines.setdefault(room_id, []).append(record)
        elif record.kind == "opening":
            for room_id in sorted(rooms_reached(record, records)):
                placed.openings.setdefault(room_id, []).append(record)
    return placed


def _room_values(records: Mapping[str, Record], placed: _Placed, room: Record) -> RoomValues:
    site = records[room.site_id or ""]
    fields, zone = room.fields, site.fields["time_zone"]
    basis = basis_values(records, records[site.fields["basis_id"]])
    people = fields["people"] or {}
    purge_fluid = records.get(fields["purge_fluid_id"] or "")
    count_every = timedelta(days=basis.values["count_every_days"])
    return RoomValues(
        record=reference(room),
        site=reference(site),
        basis=basis,
        name=fields["name"] or fields["tag"],
        kind=fields["kind"],
        state=fields["state"],
        gross_volume=fields["volume_m3"],
        elevation=site.fields["elevation_m"],
        station_pressure=_scaled(site.fields["station_pressure_kpa_abs"], KILOPASCAL),
        floor_area=fields["floor_area_m2"],
        height=fields["height_m"],
        occupied_fraction=fields["occupied_fraction"],
        temperature=_kelvin(fields["temperature_c"]),
        below_ground=fields["below_ground"],
        purge_flow=_scaled(fields["purge_flow_m3_h"], 1.0 / HOUR),
        purge_fluid=None if purge_fluid is None else fluid_values(purge_fluid),
        attended=people.get("attended"),
        most_people=people.get("most"),
        unaccompanied=fields["unaccompanied"],
        way_out=fields["egress_m"],
        vessels=tuple(
            _vessel_values(vessel, records[vessel.fields["fluid_id"]], count_every, zone)
            for vessel in placed.vessels.get(room.id, ())
        ),
        units=tuple(_unit_values(unit, room.id, zone) for unit in placed.units.get(room.id, ())),
        detectors=tuple(
            _detector_values(detector, zone) for detector in placed.detectors.get(room.id, ())
        ),
        controls=tuple(
            _control_values(control, zone) for control in placed.controls.get(room.id, ())
        ),
        lines=tuple(
            _line_values(records, line, count_every, zone) for line in placed.lines.get(room.id, ())
        ),
        openings=tuple(
            _opening_values(opening, room.id) for opening in placed.openings.get(room.id, ())
        ),
        pit=_pit_values(fields["pit"]),
    )


def reference(record: Record) -> Reference:
    """Name a record in its revision, as evidence."""
    return Reference(record.kind, record.id, record.fields["tag"], record.revision)


def basis_values(records: Mapping[str, Record], basis: Record) -> BasisValues:
    """Give every value of a basis, its own before those of the one it was copied from."""
    origin = records.get(basis.fields["derived_from_id"] or "")
    values, sources = basis.fields["values"] or {}, basis.fields["sources"] or {}
    if origin is not None:
        values = effective(origin.fields["values"], values)
        sources = {**origin.fields["sources"], **sources}
    copied = () if origin is None else (reference(origin),)
    return BasisValues(reference(basis), values, sources, copied)


def fluid_values(fluid: Record) -> FluidValues:
    """Give a fluid as the assessment needs it."""
    fields = fluid.fields
    return FluidValues(
        record=reference(fluid),
        name=fields["name"] or fields["tag"],
        molar_mass=fields["molar_mass_g_mol"] / 1e3,
        boiling_point=fields["boiling_k"],
        condensed_density=fields["condensed_density_kg_m3"],
        oxygen_fraction=fields["oxygen_fraction"],
        solid=fields["solid"],
        hazards=frozenset(fields["hazards"]),
        settles=fields["settles"],
        flammable_limit=_scaled(fields["lfl_pct"], PERCENT),
        pressure_liquid_density=pressure_liquid_density(fluid),
    )


def pressure_liquid_density(fluid: Record) -> float | None:
    """Density of a shipped fluid that is kept as ice and, under pressure, as a liquid too."""
    known = FLUIDS.get(fluid.fields["tag"]) if fluid.site_id is None else None
    return None if known is None else known.pressure_liquid_density_kg_m3


def _pit_values(pit: Mapping[str, Any] | None) -> PitValues | None:
    return None if pit is None else PitValues(pit["area_m2"], pit["depth_m"], pit.get("entered"))


def _vessel_values(
    vessel: Record, fluid: Record, count_every: timedelta, zone: str
) -> VesselValues:
    fields = vessel.fields
    counted_at = fields["counted_at"]
    filling, relief = fields["filling"] or {}, fields["relief"] or {}
    return VesselValues(
        record=reference(vessel),
        fluid=fluid_values(fluid),
        kind=fields["kind"],
        state=fields["state"],
        capacity_volume=_scaled(fields["capacity_l"], LITRE),
        capacity_mass=fields["capacity_kg"],
        contents_volume=_scaled(fields["contents_l"], LITRE),
        contents_mass=fields["contents_kg"],
        count_due=None if counted_at is None else moment_of(counted_at) + count_every,
        rated_evaporation=_scaled(fields["rated_evaporation_l_day"], LITRE / DAY),
        measured_evaporation=_scaled(fields["measured_evaporation_l_day"], LITRE / DAY),
        measured_loss=_scaled(fields["measured_loss_kg_day"], 1.0 / DAY),
        use=_scaled(fields["use_l_day"], LITRE / DAY),
        insulation=fields["insulation"],
        vent_to=fields["vent_to"],
        filled_by=filling.get("by"),
        fill_flow=_scaled(filling.get("flow_l_min"), LITRE / MINUTE),
        independent_high_level=filling.get("independent_high_level"),
        closes_in=filling.get("closes_in_s"),
        shut_off_test_due=_due(filling.get("tested_on"), filling.get("test_every_days"), zone),
        gross_volume=_scaled(fields["gross_l"], LITRE),
        charge_pressure=_charge_pressure(fields),
        neck_plug=fields["neck_plug"],
        relief_fitted=relief.get("fitted"),
        relief_inspection_due=_due(
            relief.get("inspected_on"), relief.get("inspect_every_days"), zone
        ),
        relief_inspected=relief.get("inspected_on") is not None,
        relief_to=relief.get("discharge_to"),
        manifold=fields["manifold"],
        mobile=fields["mobile"],
        supply_line_id=filling.get("supply_line_id"),
        cold_area=fields["cold_area_m2"],
        working_pressure=_absolute(fields["working_pressure_kpa"]),
        withdrawal_bore=_scaled(fields["withdrawal_bore_mm"], MILLIMETRE),
        quench=_quench_values(fields["quench"], zone),
    )


def _charge_pressure(vessel: Mapping[str, Any]) -> float | None:
    """Give the absolute pressure of a cylinder that is kept by its water volume."""
    if vessel["kind"] != "cylinder" or vessel["capacity_l"] is None:
        return None
    return float(vessel["working_pressure_kpa"]) * KILOPASCAL + ATMOSPHERE


def _unit_values(unit: Record, room_id: str, zone: str) -> UnitValues:
    fields = unit.fields
    share = next(s["share"] for s in fields["serves"] if s["room_id"] == room_id)
    return UnitValues(
        record=reference(unit),
        arrangement=fields["arrangement"],
        share=share,
        design_flow=_scaled(fields["design_flow_m3_h"], 1.0 / HOUR),
        measured_flow=_scaled(fields["measured_flow_m3_h"], 1.0 / HOUR),
        measurement_due=_due(fields["measured_on"], fields["measure_every_days"], zone),
        outdoor_air_fraction=fields["outdoor_air_fraction"],
        # A mixing factor counts only where somebody has tested it.
        mixing_factor=None if fields["mixing_tested_on"] is None else fields["mixing_factor"],
        state=fields["state"],
        standby_power=fields["standby_power"],
        flow_proved=fields["flow_proved"],
        fail_alarm=fields["fail_alarm"],
        boost_flow=_scaled(fields["boost_flow_m3_h"], 1.0 / HOUR),
        boost_trigger=fields["boost_trigger"],
        terminal_height=fields["terminal_height"],
        serves=tuple(sorted(served["room_id"] for served in fields["serves"])),
        outages=_outages(fields["outages"]),
    )


def _detector_values(detector: Record, zone: str) -> DetectorValues:
    fields = detector.fields
    silenced = fields["silenced_since"]
    return DetectorValues(
        record=reference(detector),
        gas=fields["gas"],
        height=fields["height_m"],
        placed=fields["placed"],
        t90=fields["t90_s"],
        delay=fields["delay_s"],
        alarms=tuple(fields["alarms_pct"] or ()),
        calibration_due=_due(fields["calibrated_on"], fields["calibrate_every_days"], zone),
        state=fields["state"],
        silenced_since=None if silenced is None else moment_of(silenced),
        heard_outside=fields["heard_outside"],
        display_outside=fields["display_outside"],
        power_backed=fields["power_backed"],
        monitored=fields["monitored"],
        zeroed_at=_scaled(fields["zeroed_at_kpa_abs"], KILOPASCAL),
        outages=_outages(fields["outages"]),
    )


def _control_values(control: Record, zone: str) -> ControlValues:
    fields = control.fields
    return ControlValues(
        record=reference(control),
        kind=fields["kind"],
        vessel_id=fields["vessel_id"],
        reference=fields["reference"],
        area=fields["area_m2"],
        check_due=_due(fields["checked_on"], fields["check_every_days"], zone),
        checked=fields["checked_on"] is not None,
    )


def _line_values(
    records: Mapping[str, Record], line: Record, count_every: timedelta, zone: str
) -> LineValues:
    fields, shutoff = line.fields, line.fields["shutoff"] or {}
    source = records.get(fields["source_vessel_id"] or "")
    return LineValues(
        record=reference(line),
        fluid=fluid_values(records[fields["fluid_id"]]),
        phase=fields["phase"],
        bore=_scaled(fields["bore_mm"], MILLIMETRE),
        length=fields["length_m"],
        source_pressure=_absolute(fields["source_pressure_kpa"]),
        restrictor=_scaled(fields["restrictor_kg_h"], 1.0 / HOUR),
        source=None
        if source is None
        else _vessel_values(source, records[source.fields["fluid_id"]], count_every, zone),
        has_shut_off=fields["shutoff"] is not None,
        trigger=shutoff.get("trigger"),
        closes_in=shutoff.get("closes_in_s"),
        fails_closed=shutoff.get("fails_closed"),
        shut_off_tested=shutoff.get("tested_on") is not None,
        shut_off_test_due=_due(shutoff.get("tested_on"), shutoff.get("test_every_days"), zone),
        insulation=fields["insulation"],
    )


def _quench_values(quench: Mapping[str, Any] | None, zone: str) -> QuenchValues | None:
    if quench is None:
        return None
    pipe = quench.get("pipe") or {}
    return QuenchValues(
        duration=quench.get("duration_s"),
        share_to_room=quench.get("share_to_room"),
        has_pipe=quench.get("pipe") is not None,
        pipe_inspected=pipe.get("inspected_on") is not None,
        pipe_inspection_due=_due(pipe.get("inspected_on"), pipe.get("inspect_every_days"), zone),
        outlet_clear=pipe.get("outlet_clear"),
    )


def _absolute(gauge: float | None) -> float | None:
    return None if gauge is None else gauge * KILOPASCAL + ATMOSPHERE


def _opening_values(opening: Record, room_id: str) -> OpeningValues:
    """Give an opening as the room sees it that stands on one of its sides."""
    fields = opening.fields
    is_here = fields["room_id"] == room_id
    inflow = _scaled(fields["net_flow_m3_h"], 1.0 / HOUR)
    return OpeningValues(
        record=reference(opening),
        kind=fields["kind"],
        other_room_id=fields["other_room_id"] if is_here else fields["room_id"],
        width=fields["width_m"],
        height=fields["height_m"],
        area=fields["area_m2"],
        exchange_flow=_scaled(fields["exchange_flow_m3_h"], 1.0 / HOUR),
        inflow=inflow if is_here or inflow is None else -inflow,
        normally_open=fields["normally_open"],
    )


def _outages(outages: Iterable[Mapping[str, Any]] | None) -> tuple[Outage, ...]:
    """Give planned outages in the order of time."""
    return tuple(
        sorted(
            (Outage(moment_of(each["from"]), moment_of(each["to"])) for each in outages or ()),
            key=lambda outage: outage.begins,
        )
    )


def _due(done_on: str | None, every_days: float | None, zone: str) -> datetime | None:
    """Give the moment from which something is overdue: the end of its last good day."""
    if done_on is None or every_days is None:
        return None
    return end_of_day(date.fromisoformat(done_on) + timedelta(days=int(every_days)), zone)


def _scaled(value: float | None, factor: float) -> float | None:
    return None if value is None else value * factor


def _kelvin(celsius: float | None) -> float | None:
    return None if celsius is None else celsius + ZERO_CELSIUS


def plain(value: Reference) -> dict[str, Any]:
    """Write a reference as an answer shows it."""
    return {"kind": value.kind, "id": value.id, "tag": value.tag, "revision": value.revision}
