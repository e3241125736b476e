"""Two rooms for every rule: one just inside what it asks for, and one just outside."""

from __future__ import annotations

from dataclasses import replace
from datetime import timedelta
from typing import Any

from service.audit.inputs import FluidValues, Outage, RoomValues, VesselValues
from tests.audit.accident_rooms import ACCIDENTS, LAYERS, LINES, MAGNETS
from tests.audit.builders import (
    CARBON_DIOXIDE,
    HYDROGEN,
    LITRE,
    METHANE,
    NITROGEN,
    NITROUS_OXIDE,
    NOW,
    OXYGEN,
    PER_DAY,
    PER_HOUR,
    a_basis,
    a_control,
    a_detector,
    a_fluid,
    a_room,
    a_unit,
    a_vessel,
    some_ice,
    the_controls,
)
from tests.audit.pairs import Pair

HOUR = timedelta(hours=1)
SECOND = timedelta(seconds=1)
US = a_basis("us")


def still(litres: float, **fields: Any) -> VesselValues:
    """A vessel of which nothing evaporates."""
    return a_vessel(litres, **{"measured_evaporation": 0.0, "mobile": False, **fields})


def evaporating(litres_a_day: float, fluid: FluidValues = NITROGEN, **fields: Any) -> RoomValues:
    """A room where 20 m3/h of exhaust count."""
    evaporation = litres_a_day * PER_DAY
    vessel = still(1, fluid=fluid, measured_evaporation=evaporation, filled_by="attended", tag="V")
    units = (a_unit(60, standby_power=True),)
    return a_room(50, vessels=(vessel,), units=units, **{"basis": US, **fields})


def filled(litres: float, fluid: FluidValues = NITROGEN, **fields: Any) -> RoomValues:
    """A room without any air where a vessel is filled by hand."""
    vessel = still(litres, fluid=fluid, filled_by="attended")
    return a_room(50, kind="walk-in", vessels=(vessel,), **{"basis": US, **fields})


def running_over(seconds: float, fluid: FluidValues = NITROGEN, **fields: Any) -> RoomValues:
    """A room without any air where a vessel runs over by 10 L/min until its shut-off closes."""
    vessel = still(
        0.01,
        fluid=fluid,
        filled_by="automatic",
        fill_flow=10 * LITRE / 60,
        independent_high_level=True,
        shut_off_test_due=NOW + HOUR,
        closes_in=seconds,
    )
    return a_room(50, kind="walk-in", vessels=(vessel,), **{"basis": US, **fields})


def two(litres: float, fluid: FluidValues = NITROGEN, **fields: Any) -> RoomValues:
    """Two vessels alike."""
    vessels = tuple(still(litres, fluid=fluid, tag=tag) for tag in ("V-1", "V-2"))
    return a_room(50, vessels=vessels, **{"basis": US, **fields})


def charged(kilograms: float, fluid: FluidValues, how_many: int = 1) -> RoomValues:
    """Cylinders alike in a room without any air."""
    cylinders = tuple(
        still(
            1,
            fluid=fluid,
            kind="cylinder",
            capacity_volume=None,
            capacity_mass=kilograms,
            measured_evaporation=None,
            tag=f"C-{place}",
        )
        for place in range(how_many)
    )
    return a_room(50, kind="walk-in", vessels=cylinders)


def spilt(kilograms: float) -> RoomValues:
    """A room without any air where a box of dry ice can tip."""
    ice = some_ice(kilograms, measured_loss=0.0, mobile=True)
    return a_room(50, kind="walk-in", vessels=(ice,))


def subliming(kilograms_a_day: float) -> RoomValues:
    """A room where 40/3 m3/h of exhaust count, and dry ice."""
    ice = some_ice(50, measured_loss=kilograms_a_day / 86_400, mobile=False)
    return a_room(40, vessels=(ice,), units=(a_unit(40, standby_power=True),))


def an_outage(until: timedelta) -> Outage:
    return Outage(NOW - HOUR, NOW + until)


def with_unit(vessel: VesselValues | None = None, **fields: Any) -> RoomValues:
    return a_room(vessels=(vessel or still(1),), units=(a_unit(600, **fields),))


def with_vessel(litres: float = 50, **fields: Any) -> RoomValues:
    return a_room(500, vessels=(still(litres, **fields),))


def with_detector(**fields: Any) -> RoomValues:
    return a_room(vessels=(still(1),), detectors=(a_detector(**fields),))


# Of saturated liquid at 101.325 kPa and an ideal gas of 293.15 K a litre of nitrogen makes 0.69218
# m3, of oxygen 0.85788 m3, of methane 0.63329 m3; a kilogram of carbon dioxide 0.54658 m3 and of
# nitrous oxide 0.54655 m3 (densities: CoolProp 8).
#
# At once in 50 m3 (methods C1): 5.00 L of nitrogen bring 19.5 %, 1.88 L of oxygen 23.5 % (C-5, E4),
# 0.4119 kg of carbon dioxide 0.5 % from 0.05 %, 4.574 kg of nitrous oxide 5 %. Over time without
# air (C2): 5.181 L of nitrogen, 1.911 L of oxygen; 0.41279 kg of carbon dioxide and 6.562 kg for
# 19.5 %; 4.693 kg of nitrous oxide. Methane gathers in 20 m3 above 1.5 m: a quarter of 5 % there is
# 0.3948 L at once, 0.3973 L over time.
#
# Exhaust of Q holds Q x at a fraction x (methods D2): 20 m3/h hold 48.0 L/d of nitrogen, 18.05 L/d
# of oxygen, 9.474 L/d of methane; 40/3 m3/h hold 2.927 kg/d of carbon dioxide at 0.5 %; 20 m3/h
# hold 25 ppm of nitrous oxide, 17.85 g/d. A tenth is lost in filling.
#
# Limits of other rules: common practice, no source.
_CASES = (
    Pair(
        "oxygen/largest-vessel",
        a_room(50, vessels=(still(4.98),)),
        a_room(50, vessels=(still(5.02),)),
        "minor",
    ),
    Pair("oxygen/boil-off", evaporating(47.8), evaporating(48.2), "major"),
    Pair("oxygen/filling", filled(51.6), filled(52.0), "major"),
    Pair("oxygen/overfill", running_over(31.0), running_over(31.2), "observation"),
    Pair("oxygen/all-vessels", two(2.49), two(2.51), "observation"),
    Pair("oxygen/spill", spilt(6.54), spilt(6.59), "minor"),
    Pair(
        "enrichment/largest-vessel",
        a_room(50, vessels=(still(1.87, fluid=OXYGEN),), basis=US),
        a_room(50, vessels=(still(1.89, fluid=OXYGEN),), basis=US),
        "minor",
    ),
    Pair("enrichment/boil-off", evaporating(17.95, OXYGEN), evaporating(18.15, OXYGEN), "major"),
    Pair("enrichment/filling", filled(19.06, OXYGEN), filled(19.16, OXYGEN), "major"),
    Pair(
        "enrichment/overfill",
        running_over(11.42, OXYGEN),
        running_over(11.51, OXYGEN),
        "observation",
    ),
    Pair("enrichment/all-vessels", two(0.935, OXYGEN), two(0.945, OXYGEN), "observation"),
    Pair(
        "toxic/largest-vessel",
        charged(0.411, CARBON_DIOXIDE),
        charged(0.413, CARBON_DIOXIDE),
        "minor",
        CARBON_DIOXIDE.record.tag,
    ),
    Pair("toxic/boil-off", subliming(2.915), subliming(2.94), "major", CARBON_DIOXIDE.record.tag),
    # A litre of its liquid weighs 1.562 kg here.
    Pair(
        "toxic/filling",
        filled(4.1279 / 1.562 * 0.99, CARBON_DIOXIDE),
        filled(4.1279 / 1.562 * 1.01, CARBON_DIOXIDE),
        "major",
        CARBON_DIOXIDE.record.tag,
    ),
    Pair(
        "toxic/overfill",
        running_over(6 * 0.41279 / 1.562 * 0.99, CARBON_DIOXIDE),
        running_over(6 * 0.41279 / 1.562 * 1.01, CARBON_DIOXIDE),
        "observation",
        CARBON_DIOXIDE.record.tag,
    ),
    Pair(
        "toxic/all-vessels",
        charged(0.2055, CARBON_DIOXIDE, 2),
        charged(0.2065, CARBON_DIOXIDE, 2),
        "observation",
        CARBON_DIOXIDE.record.tag,
    ),
    Pair("toxic/spill", spilt(0.411), spilt(0.415), "minor", CARBON_DIOXIDE.record.tag),
    Pair(
        "toxic/largest-vessel",
        charged(4.56, NITROUS_OXIDE),
        charged(4.59, NITROUS_OXIDE),
        "major",
        NITROUS_OXIDE.record.tag,
    ),
    Pair(
        "toxic/boil-off",
        evaporating(0.021957 / 1.23045 * 0.99, NITROUS_OXIDE),
        evaporating(0.021957 / 1.23045 * 1.01, NITROUS_OXIDE),
        "major",
        NITROUS_OXIDE.record.tag,
    ),
    Pair(
        "toxic/filling",
        filled(10 * 0.0022871 / 1.23045 * 0.99, NITROUS_OXIDE),
        filled(10 * 0.0022871 / 1.23045 * 1.01, NITROUS_OXIDE),
        "major",
        NITROUS_OXIDE.record.tag,
    ),
    Pair(
        "toxic/overfill",
        running_over(6 * 4.6925 / 1.23045 * 0.99, NITROUS_OXIDE),
        running_over(6 * 4.6925 / 1.23045 * 1.01, NITROUS_OXIDE),
        "critical",
        NITROUS_OXIDE.record.tag,
    ),
    Pair(
        "toxic/all-vessels",
        charged(2.28, NITROUS_OXIDE, 2),
        charged(2.295, NITROUS_OXIDE, 2),
        "observation",
        NITROUS_OXIDE.record.tag,
    ),
    Pair(
        "flammable/largest-vessel",
        a_room(50, vessels=(still(0.393, fluid=METHANE),), basis=US),
        a_room(50, vessels=(still(0.396, fluid=METHANE),), basis=US),
        "minor",
    ),
    Pair("flammable/boil-off", evaporating(9.42, METHANE), evaporating(9.52, METHANE), "major"),
    Pair("flammable/filling", filled(3.95, METHANE), filled(3.99, METHANE), "major"),
    Pair(
        "flammable/overfill",
        running_over(2.37, METHANE),
        running_over(2.40, METHANE),
        "observation",
    ),
    Pair("flammable/all-vessels", two(0.1965, METHANE), two(0.198, METHANE), "observation"),
)
_VENTILATION = (
    Pair(
        "ventilation/flow-overdue",
        with_unit(measurement_due=NOW + SECOND),
        with_unit(measurement_due=NOW),
        "minor",
    ),
    Pair(
        "ventilation/flow-not-proved",
        a_room(50, vessels=(still(4.98),), units=(a_unit(600, flow_proved=None),)),
        a_room(50, vessels=(still(5.02),), units=(a_unit(600, flow_proved=None),)),
        "minor",
    ),
    Pair(
        "ventilation/stopped",
        with_unit(outages=(an_outage(timedelta(0)),)),
        with_unit(outages=(an_outage(SECOND),)),
        "observation",
    ),
    Pair(
        "ventilation/below-design",
        with_unit(measured_flow=480 * PER_HOUR),
        with_unit(measured_flow=479 * PER_HOUR),
        "observation",
    ),
    Pair(
        "ventilation/no-outdoor-air",
        with_unit(outdoor_air_fraction=0.01),
        with_unit(outdoor_air_fraction=0.0),
        "observation",
    ),
    Pair(
        "ventilation/none",
        a_room(50, vessels=(still(4.98),)),
        a_room(50, vessels=(still(5.02),)),
        "observation",
    ),
    # Ten litres of nitrogen take 13.844 % of 50 m3, twice what 19.5 % leaves: back in an hour by 3
    # x 50 m3/h x ln(13.844/6.921) = 104.0 m3/h (methods D4).
    Pair(
        "ventilation/cannot-restore",
        a_room(50, vessels=(still(10),), units=(a_unit(104.2),)),
        a_room(50, vessels=(still(10),), units=(a_unit(103.8),)),
        "observation",
    ),
)
_DETECTORS = (
    Pair(
        "detectors/calibration-overdue",
        a_room(detectors=(a_detector(calibration_due=NOW + SECOND),)),
        a_room(detectors=(a_detector(calibration_due=NOW),)),
        "minor",
    ),
    Pair(
        "detectors/silenced",
        a_room(detectors=(a_detector(silenced_since=NOW - HOUR + SECOND),)),
        a_room(detectors=(a_detector(silenced_since=NOW - HOUR),)),
        "major",
    ),
    Pair(
        "detectors/fault", with_detector(state="in-service"), with_detector(state="fault"), "minor"
    ),
    Pair("detectors/misplaced", with_detector(height=0.2), with_detector(height=0.19), "minor"),
    Pair(
        "detectors/alarm-set-late",
        with_detector(alarms=(18.0, 23.5)),
        with_detector(alarms=(17.9, 23.5)),
        "observation",
    ),
    # 101.325 kPa over the pressure of zeroing is 0.98 at 103.39 kPa.
    Pair(
        "detectors/zeroed-elsewhere",
        with_detector(zeroed_at=103_380.0),
        with_detector(zeroed_at=103_400.0),
        "observation",
    ),
    Pair(
        "detectors/not-warning-outside",
        with_detector(heard_outside=None, display_outside=True),
        with_detector(heard_outside=None, display_outside=False),
        "observation",
    ),
    Pair(
        "detectors/not-monitored",
        replace(with_detector(monitored=True), attended=False),
        replace(with_detector(monitored=False), attended=False),
        "observation",
    ),
    Pair(
        "detectors/missing",
        a_room(50, vessels=(still(4.98),)),
        a_room(50, vessels=(still(5.02),)),
        "minor",
        "oxygen",
    ),
    Pair(
        "detectors/carbon-dioxide-missing",
        charged(0.411, CARBON_DIOXIDE),
        charged(0.413, CARBON_DIOXIDE),
        "minor",
        CARBON_DIOXIDE.record.tag,
    ),
    Pair(
        "detectors/nitrous-oxide-missing",
        charged(4.56, NITROUS_OXIDE),
        charged(4.59, NITROUS_OXIDE),
        "minor",
        NITROUS_OXIDE.record.tag,
    ),
    Pair(
        "detectors/flammable-missing",
        a_room(50, vessels=(still(0.393, fluid=METHANE),), basis=US),
        a_room(50, vessels=(still(0.396, fluid=METHANE),), basis=US),
        "minor",
        "flammable-gas",
    ),
    Pair(
        "detectors/hydrogen-missing",
        a_room(
            vessels=(still(1, fluid=HYDROGEN),),
            detectors=(a_detector(gas="hydrogen", outages=(an_outage(timedelta(0)),)),),
        ),
        a_room(
            vessels=(still(1, fluid=HYDROGEN),),
            detectors=(a_detector(gas="hydrogen", outages=(an_outage(SECOND),)),),
        ),
        "major",
        "hydrogen",
    ),
)
_VESSELS = (
    Pair(
        "vessels/neck-sealed",
        with_vessel(kind="open-dewar", neck_plug="vented", relief_fitted=None),
        with_vessel(kind="open-dewar", neck_plug="sealed", relief_fitted=None),
        "critical",
    ),
    Pair(
        "vessels/relief-missing",
        with_vessel(relief_fitted=True),
        with_vessel(relief_fitted=False),
        "critical",
    ),
    Pair(
        "vessels/relief-inspection-overdue",
        with_vessel(relief_inspected=True, relief_inspection_due=NOW + SECOND),
        with_vessel(relief_inspected=True, relief_inspection_due=NOW),
        "observation",
    ),
    Pair(
        "vessels/overfilled",
        with_vessel(contents_volume=50 * LITRE),
        with_vessel(contents_volume=50.1 * LITRE),
        "major",
    ),
    Pair(
        "vessels/ullage",
        with_vessel(95, gross_volume=100 * LITRE),
        with_vessel(95.1, gross_volume=100 * LITRE),
        "observation",
    ),
    Pair(
        "vessels/evaporation-above-rated",
        with_vessel(rated_evaporation=PER_DAY, measured_evaporation=1.25 * PER_DAY),
        with_vessel(rated_evaporation=PER_DAY, measured_evaporation=1.26 * PER_DAY),
        "observation",
    ),
    Pair(
        "vessels/fill-without-high-level",
        with_vessel(filled_by="automatic", independent_high_level=True),
        with_vessel(filled_by="automatic", independent_high_level=None),
        "major",
    ),
    Pair(
        "vessels/shut-off-untested",
        with_vessel(
            filled_by="automatic", independent_high_level=True, shut_off_test_due=NOW + SECOND
        ),
        with_vessel(filled_by="automatic", independent_high_level=True, shut_off_test_due=NOW),
        "minor",
    ),
)
# 10.17 L of nitrogen bring 50 m3 to 18 % (methods C1).
_CONTROLS = (
    Pair(
        "controls/missing",
        a_room(50, vessels=(still(10.15),)),
        a_room(50, vessels=(still(10.19),)),
        "minor",
    ),
    Pair(
        "controls/overdue",
        a_room(controls=(a_control(check_due=NOW + SECOND),)),
        a_room(controls=(a_control(check_due=NOW),)),
        "observation",
    ),
)
_POISON = a_fluid(
    "arsine", molar_mass=0.0779, condensed_density=1600.0, hazards=frozenset({"toxic"})
)
_RECORDS = (
    Pair("records/cannot-compute", a_room(1e-3), a_room(0.0), "major"),
    Pair(
        "records/count-stale",
        a_room(vessels=(still(1, contents_volume=0.5 * LITRE, count_due=NOW + SECOND),)),
        a_room(vessels=(still(1, contents_volume=0.5 * LITRE, count_due=NOW),)),
        "observation",
    ),
    Pair(
        "records/hazard-not-computed",
        a_room(vessels=(still(1, fluid=replace(_POISON, hazards=frozenset({"asphyxiant"}))),)),
        a_room(vessels=(still(1, fluid=_POISON),)),
        "major",
    ),
    Pair(
        "records/assumed",
        a_room(vessels=(still(1, filled_by="attended"),)),
        a_room(vessels=(still(1, filled_by=None),)),
        "observation",
    ),
    # Four litres fill a fifth less than five: with four fifths of 50 m3 they just reach 19.5 %.
    Pair(
        "records/assumed-deciding",
        a_room(50, vessels=(still(3.98),), occupied_fraction=None),
        a_room(50, vessels=(still(4.02),), occupied_fraction=None),
        "minor",
    ),
    Pair(
        "records/room-implausible",
        a_room(72, floor_area=24.0, height=2.5),
        a_room(72.1, floor_area=24.0, height=2.5),
        "observation",
    ),
    Pair(
        "records/vessel-implausible",
        with_vessel(50, measured_evaporation=10 * PER_DAY),
        with_vessel(50, measured_evaporation=10.1 * PER_DAY),
        "observation",
    ),
    Pair(
        "records/unit-implausible",
        with_unit(measured_flow=900 * PER_HOUR),
        with_unit(measured_flow=901 * PER_HOUR),
        "observation",
    ),
)

PAIRS = (
    *_CASES,
    *_VENTILATION,
    *_DETECTORS,
    *_VESSELS,
    *_CONTROLS,
    *_RECORDS,
    *ACCIDENTS,
    *LAYERS,
    *LINES,
    *MAGNETS,
)


def a_room_with_nothing_to_say(**fields: Any) -> RoomValues:
    """A room in order, with one of everything, every control and nothing left open."""
    whole: dict[str, Any] = {
        "vessels": (still(1),),
        "units": (a_unit(600),),
        "detectors": (a_detector(),),
        "controls": the_controls(),
    }
    return a_room(100, **{**whole, **fields})
