"""Records as the audit reads them: SI units, absolute pressures, moments at which things fall due.

Expected numbers follow from the definitions of the units: a litre is 1e-3 m3, an hour 3600 s, a
standard atmosphere 101 325 Pa.
"""

from datetime import UTC, datetime

import pytest

from service.audit.inputs import Outage, PitValues
from service.changes.neighbourhood import rooms_alone
from service.changes.room_values import values_of_rooms


@pytest.fixture
def values(sqlite_line):
    """Give the values of the only room, of which this and that is recorded."""
    line = sqlite_line
    line.a_site(time_zone="Europe/Madrid")
    room = line.a_room(floor_area_m2=30.0)

    def of_room():
        def job(session):
            around = rooms_alone(session, [room.id])
            return values_of_rooms(around.records, [room.id])[0]

        return line.run(job)

    of_room.line, of_room.room = line, room
    return of_room


def utc(*parts):
    return datetime(*parts, tzinfo=UTC)


def test_what_nobody_recorded_stays_unknown(values):
    values.line.a_vessel(values.room)
    values.line.create(
        "ventilation-unit", tag="U", serves=[{"room_id": values.room.id, "share": 1}]
    )
    values.line.create("detector", tag="D", room_id=values.room.id, gas="oxygen")
    values.line.create("control", tag="C", room_id=values.room.id, kind="rescue")
    room = values()
    assert room.pit is None
    (vessel,), (unit,), (detector,), (control,) = (
        room.vessels, room.units, room.detectors, room.controls,
    )  # fmt: skip
    unknown = (
        vessel.fill_flow, vessel.independent_high_level, vessel.closes_in,
        vessel.shut_off_test_due, vessel.gross_volume, vessel.charge_pressure, vessel.neck_plug,
        vessel.relief_fitted, vessel.relief_inspection_due, vessel.fluid.flammable_limit,
        unit.boost_flow, unit.boost_trigger, unit.terminal_height, detector.zeroed_at,
        control.reference, control.area, control.check_due, control.vessel_id,
    )  # fmt: skip
    assert set(unknown) == {None}
    assert (unit.outages, detector.outages) == ((), ())
    assert (vessel.relief_inspected, control.checked) == (False, False)


def test_a_vessel_is_read_with_its_filling_its_neck_and_its_relief(values):
    values.line.a_vessel(
        values.room,
        gross_l=33.0,
        neck_plug="vented",
        filling={
            "by": "automatic",
            "flow_l_min": 6.0,
            "independent_high_level": True,
            "closes_in_s": 45.0,
            "tested_on": "2027-01-10",
            "test_every_days": 30,
        },
        relief={"fitted": True, "inspected_on": "2027-01-01", "inspect_every_days": 100},
    )
    (vessel,) = values().vessels
    assert vessel.filled_by == "automatic"
    assert vessel.fill_flow == pytest.approx(1e-4)  # 6 L in 60 s.
    assert (vessel.independent_high_level, vessel.closes_in) == (True, 45.0)
    # The last good day ends at midnight in Madrid, which is an hour before that of UTC in winter.
    assert vessel.shut_off_test_due == utc(2027, 2, 9, 23)
    assert vessel.gross_volume == pytest.approx(0.033)
    assert vessel.neck_plug == "vented"
    assert (vessel.relief_fitted, vessel.relief_inspected) == (True, True)
    # The hundredth day after New Year is 11 April, in summer time.
    assert vessel.relief_inspection_due == utc(2027, 4, 11, 22)


def test_a_cylinder_by_volume_is_read_with_its_absolute_pressure(values):
    sort = {"kind": "cylinder", "fluid": "argon", "working_pressure_kpa": 20_000.0}
    by_volume = values.line.a_vessel(values.room, tag="A", capacity_l=50.0, **sort)
    values.line.change(by_volume, notes="behind the door")
    values.line.a_vessel(values.room, tag="B", capacity_l=None, capacity_kg=13.0, **sort)
    dewar = {"kind": "pressurised-dewar", "working_pressure_kpa": 200.0}
    values.line.a_vessel(values.room, tag="C", **dewar)
    read = {vessel.record.tag: vessel for vessel in values().vessels}
    assert read["A"].charge_pressure == pytest.approx(20_101_325.0)
    assert read["A"].capacity_volume == pytest.approx(0.05)
    assert read["A"].capacity_mass is None
    assert (read["B"].charge_pressure, read["C"].charge_pressure) == (None, None)


def test_a_unit_is_read_with_its_boost_and_its_outages_in_the_order_of_time(values):
    detector = values.line.create(
        "detector",
        tag="D",
        room_id=values.room.id,
        gas="oxygen",
        zeroed_at_kpa_abs=84.5,
        outages=[{"from": "2027-05-01T10:00:00+02:00", "to": "2027-05-01T11:00:00+02:00"}],
    ).record
    values.line.create(
        "ventilation-unit",
        tag="U",
        serves=[{"room_id": values.room.id, "share": 0.5}],
        boost_flow_m3_h=1800.0,
        boost_trigger="D",
        terminal_height="low",
        outages=[
            {"from": "2027-06-01T00:00:00Z", "to": "2027-06-02T00:00:00Z", "reason": "filters"},
            {"from": "2027-03-05T06:00:00Z", "to": "2027-03-05T09:00:00Z"},
        ],
    )
    room = values()
    (unit,), (read,) = room.units, room.detectors
    assert unit.boost_flow == pytest.approx(0.5)  # Of the whole unit: 1800 m3 in 3600 s.
    assert (unit.boost_trigger, unit.terminal_height) == (detector.id, "low")
    assert unit.outages == (
        Outage(utc(2027, 3, 5, 6), utc(2027, 3, 5, 9)),
        Outage(utc(2027, 6, 1), utc(2027, 6, 2)),
    )
    assert read.zeroed_at == pytest.approx(84_500.0)
    assert read.outages == (Outage(utc(2027, 5, 1, 8), utc(2027, 5, 1, 9)),)


def test_pit_controls_and_flammable_limit_are_read(values):
    values.line.change(values.room, pit={"area_m2": 2.0, "depth_m": 1.5, "entered": True})
    values.line.create(
        "fluid", site="S", tag="mix", molar_mass_g_mol=20.0, boiling_k=100.0,
        condensed_density_kg_m3=500.0, oxygen_fraction=0.0, solid=False, settles="high",
        hazards=["asphyxiant", "flammable"], lfl_pct=4.4,
    )  # fmt: skip
    vessel = values.line.a_vessel(values.room, fluid="mix")
    values.line.create("control", tag="A", vessel_id=vessel.id, kind="bund", area_m2=2.5)
    values.line.create(
        "control", tag="B", room_id=values.room.id, kind="training", reference="course 12",
        checked_on="2027-02-01", check_every_days=365,
    )  # fmt: skip
    room = values()
    assert room.pit == PitValues(area=2.0, depth=1.5, entered=True)
    assert room.vessels[0].fluid.flammable_limit == pytest.approx(0.044)
    bund, training = room.controls
    assert (bund.kind, bund.area, bund.vessel_id) == ("bund", 2.5, vessel.id)
    assert (training.kind, training.reference, training.vessel_id) == (
        "training",
        "course 12",
        None,
    )
    assert (training.checked, training.check_due) == (True, utc(2028, 2, 1, 23))
    assert training.record.kind == "control"
