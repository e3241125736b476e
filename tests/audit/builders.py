"""Rooms with sound defaults: every record measured, counted and in date."""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, datetime, timedelta
from itertools import count
from typing import Any

from service.audit.assessment import Assessment, Case, Judgement
from service.audit.bases import SHIPPED_SOURCES, SHIPPED_VALUES
from service.audit.columns import CONTROL_KINDS
from service.audit.findings import Finding, reconcile, standing
from service.audit.inputs import (
    BasisValues,
    ControlValues,
    DetectorValues,
    FluidValues,
    LineValues,
    OpeningValues,
    QuenchValues,
    Reference,
    RoomValues,
    UnitValues,
    VesselValues,
)
from service.audit.judge import assess_rooms

NOW = datetime(2027, 3, 1, 8, tzinfo=UTC)
LATER = NOW + timedelta(days=100)
EARLIER = NOW - timedelta(days=10)
LITRE = 0.001  # [m3]
PER_DAY = LITRE / 86_400.0  # [m3/s] of a litre a day
PER_HOUR = 1.0 / 3600.0  # [m3/s] of a cubic metre an hour


def a_reference(kind: str, tag: str, revision: int = 1) -> Reference:
    return Reference(kind, f"{kind}-{tag}", tag, revision)


def a_basis(tag: str = "baseline", **own: Any) -> BasisValues:
    values = {**SHIPPED_VALUES[tag], **own}
    return BasisValues(a_reference("basis", tag), values, SHIPPED_SOURCES[tag])


BASELINE = a_basis()


def a_fluid(tag: str, **fields: Any) -> FluidValues:
    defaults: dict[str, Any] = {
        "name": tag.capitalize(),
        "boiling_point": 77.355,
        "oxygen_fraction": 0.0,
        "solid": False,
        "hazards": frozenset({"asphyxiant"}),
        "settles": "low",
    }
    return FluidValues(record=a_reference("fluid", tag), **{**defaults, **fields})


# Molar masses and densities of saturated liquid at 101.325 kPa: CoolProp 8.
NITROGEN = a_fluid("nitrogen", molar_mass=0.0280135, condensed_density=806.08)
HELIUM = a_fluid(
    "helium", molar_mass=0.0040026, condensed_density=124.67, boiling_point=4.224, settles="high"
)
ARGON = a_fluid("argon", molar_mass=0.039948, condensed_density=1395.40)
OXYGEN = a_fluid(
    "oxygen",
    molar_mass=0.0319988,
    condensed_density=1141.17,
    oxygen_fraction=1.0,
    hazards=frozenset({"oxidiser"}),
)
CARBON_DIOXIDE = a_fluid(
    "carbon-dioxide",
    molar_mass=0.0440098,
    condensed_density=1562.0,
    solid=True,
    hazards=frozenset({"asphyxiant", "toxic"}),
)
METHANE = a_fluid(
    "methane",
    molar_mass=0.0160428,
    condensed_density=422.36,
    hazards=frozenset({"asphyxiant", "flammable"}),
    settles="methane",
)
NITROUS_OXIDE = a_fluid(
    "nitrous-oxide",
    molar_mass=0.0440128,
    condensed_density=1230.45,
    boiling_point=184.684,
    hazards=frozenset({"asphyxiant", "oxidiser", "toxic"}),
)
HYDROGEN = a_fluid(
    "hydrogen",
    molar_mass=0.0020159,
    condensed_density=70.85,
    boiling_point=20.369,
    hazards=frozenset({"asphyxiant", "flammable"}),
    settles="high",
)


def a_vessel(litres: float = 50.0, fluid: FluidValues = NITROGEN, **fields: Any) -> VesselValues:
    defaults: dict[str, Any] = {
        "kind": "pressurised-dewar",
        "state": "in-service",
        "capacity_volume": litres * LITRE,
        "measured_evaporation": 0.01 * litres * PER_DAY,
        "vent_to": "room",
        "filled_by": "exchanged",
        "relief_fitted": True,
        # No vacuum to lose, no hose that lets anything out, and it stands fast: what a test is
        # about it says itself.
        "insulation": "foam",
        "working_pressure": 50_000.0,
        "withdrawal_bore": 0.010,
        "mobile": False,
        "cold_area": 1.0,
    }
    tag = fields.pop("tag", f"V-{litres:g}-{fluid.record.tag}")
    return VesselValues(record=a_reference("vessel", tag), fluid=fluid, **{**defaults, **fields})


def some_ice(kilograms: float = 10.0, **fields: Any) -> VesselValues:
    vessel = a_vessel(fluid=CARBON_DIOXIDE, kind="dry-ice-box", tag=f"ICE-{kilograms:g}")
    return replace(
        vessel,
        **{
            "capacity_volume": None,
            "capacity_mass": kilograms,
            "measured_evaporation": None,
            "mobile": None,
            **fields,
        },
    )


def a_magnet(litres: float = 100.0, fluid: FluidValues = HELIUM, **quench: Any) -> VesselValues:
    """A magnet in a room, with what is recorded of its quench."""
    recorded = {"duration": 30.0, "has_pipe": False, **quench}
    return a_vessel(
        litres,
        fluid,
        kind="magnet",
        tag=f"M-{litres:g}",
        measured_evaporation=0.0,
        quench=QuenchValues(**recorded),
    )


def a_line(**fields: Any) -> LineValues:
    """A line of liquid nitrogen of 10 mm from 4 bar absolute, shut by nothing."""
    defaults: dict[str, Any] = {
        "fluid": NITROGEN,
        "phase": "liquid",
        "bore": 0.010,
        "length": 10.0,
        "source_pressure": 4e5,
    }
    tag = fields.pop("tag", "L-1")
    return LineValues(record=a_reference("supply-line", tag), **{**defaults, **fields})


def a_shut_line(**fields: Any) -> LineValues:
    """The same, shut within a second of an excess flow, as tested, and restricted."""
    shut: dict[str, Any] = {
        "has_shut_off": True,
        "trigger": "excess-flow",
        "closes_in": 1.0,
        "fails_closed": True,
        "shut_off_tested": True,
        "shut_off_test_due": LATER,
        "restrictor": 0.01,
    }
    return a_line(**{**shut, **fields})


def a_door(other: RoomValues | str | None, tag: str = "O-1", **fields: Any) -> OpeningValues:
    """A door that stands open, to another room or outdoors."""
    defaults: dict[str, Any] = {
        "kind": "door",
        "width": 0.9,
        "height": 2.1,
        "normally_open": True,
    }
    there = other.record.id if isinstance(other, RoomValues) else other
    return OpeningValues(
        record=a_reference("opening", tag), other_room_id=there, **{**defaults, **fields}
    )


def a_unit(m3_per_hour: float = 600.0, **fields: Any) -> UnitValues:
    defaults: dict[str, Any] = {
        "arrangement": "exhaust",
        "share": 1.0,
        "design_flow": m3_per_hour * PER_HOUR,
        "measured_flow": m3_per_hour * PER_HOUR,
        "measurement_due": LATER,
        "outdoor_air_fraction": 1.0,
        "flow_proved": True,
    }
    tag = fields.pop("tag", f"F-{m3_per_hour:g}")
    return UnitValues(record=a_reference("ventilation-unit", tag), **{**defaults, **fields})


def a_detector(**fields: Any) -> DetectorValues:
    defaults: dict[str, Any] = {
        "gas": "oxygen",
        "height": 0.5,
        "placed": "inside",
        "t90": 30.0,
        "delay": 0.0,
        "alarms": (19.5, 18.0, 23.5),
        "calibration_due": LATER,
        "heard_outside": True,
        "power_backed": True,
    }
    tag = fields.pop("tag", "D-1")
    return DetectorValues(record=a_reference("detector", tag), **{**defaults, **fields})


def the_controls(*but: str) -> tuple[ControlValues, ...]:
    """Every control that a room can be asked for, each checked and in date."""
    return tuple(a_control(kind) for kind in CONTROL_KINDS if kind not in but)


def a_control(kind: str = "signage", **fields: Any) -> ControlValues:
    """A control of a room, checked and in date; of a vessel by ``vessel_id``."""
    defaults: dict[str, Any] = {
        "reference": "drawing A-14",
        "area": 2.0 if kind == "bund" else None,
        "check_due": LATER,
        "checked": True,
    }
    tag = fields.pop("tag", f"C-{kind}")
    return ControlValues(record=a_reference("control", tag), kind=kind, **{**defaults, **fields})


def a_room(volume_m3: float = 70.0, **fields: Any) -> RoomValues:
    """A room at sea level of which nothing is unknown, and nothing is occupied."""
    defaults: dict[str, Any] = {
        "name": "Store",
        "kind": "room",
        "state": "in-service",
        "elevation": 0.0,
        "floor_area": volume_m3 / 2.5,
        "height": 2.5,
        "occupied_fraction": 0.0,
        "temperature": 293.15,
        "below_ground": False,
        "way_out": 5.0,
        "basis": BASELINE,
    }
    tag = fields.pop("tag", "B-104")
    return RoomValues(
        record=a_reference("room", tag),
        site=a_reference("site", "north"),
        gross_volume=volume_m3,
        **{**defaults, **fields},
    )


def assessed(*rooms: RoomValues, at: datetime = NOW) -> tuple[Assessment, ...]:
    return assess_rooms(rooms, at=at)


def judged(
    room: RoomValues, rule: str, *, at: datetime = NOW, gas: str | None = None
) -> Judgement | None:
    """The judgement of a rule on a room by itself, or None where it is not broken."""
    found = [
        each
        for each in assessed(room, at=at)[0].judgements
        if each.rule == rule and gas in (None, each.gas)
    ]
    return found[0] if found else None


def severity(room: RoomValues, rule: str) -> str | None:
    found = judged(room, rule)
    return None if found is None else found.severity


def case_of(
    room: RoomValues,
    release: str = "largest-vessel",
    airflow: str = "as-measured",
    hazard: str = "oxygen-low",
) -> Case:
    found = [
        case
        for case in assessed(room)[0].cases
        if (case.release, case.airflow, case.hazard) == (release, airflow, hazard)
    ]
    assert len(found) == 1, f"{len(found)} cases"
    return found[0]


def findings_of(room: RoomValues, *, at: datetime = NOW) -> tuple[Finding, ...]:
    """What a room nobody has looked at before is found to have."""
    ids = (f"finding-{number}" for number in count(1))
    return reconcile(
        (),
        assessed(room, at=at)[0].judgements,
        room=room,
        at=at,
        position=1,
        reopen_days=30,
        new_id=lambda: next(ids),
    )


def standing_of(room: RoomValues) -> str:
    return standing(findings_of(room), assessed(room)[0].failed is not None)
