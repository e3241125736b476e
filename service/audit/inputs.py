"""What an audit reads: frozen values in SI units, free of rows, sessions and clocks."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime
from typing import Any


@dataclass(frozen=True, slots=True, order=True)
class Reference:
    """Which record, in which revision, a number came from."""

    kind: str
    id: str
    tag: str
    revision: int


@dataclass(frozen=True, slots=True)
class BasisValues:
    """The values a room is judged by, each with where it comes from (judging.md 7)."""

    record: Reference
    values: Mapping[str, Any]
    sources: Mapping[str, str]
    derived_from: tuple[Reference, ...] = ()  # the basis it was copied from, if any


@dataclass(frozen=True, slots=True)
class FluidValues:
    """A fluid as the assessment needs it."""

    record: Reference
    name: str
    molar_mass: float  # [kg/mol]
    boiling_point: float  # [K]; sublimation for a solid
    condensed_density: float  # [kg/m3]; liquid at its boiling point, or the solid
    oxygen_fraction: float  # [1]
    solid: bool
    hazards: frozenset[str]  # of asphyxiant, oxidiser, toxic, flammable
    settles: str  # low, high or methane (judging.md 6)
    flammable_limit: float | None = None  # [1] lower limit of a site's own fluid, by volume
    pressure_liquid_density: float | None = None  # [kg/m3] of a solid that is also kept as liquid


@dataclass(frozen=True, slots=True)
class VesselValues:
    """A vessel in a room; amounts are liquid volume, or mass for ice and cylinders."""

    record: Reference
    fluid: FluidValues
    kind: str
    state: str  # in-service, empty, withdrawn
    capacity_volume: float | None = None  # [m3] net liquid
    capacity_mass: float | None = None  # [kg]
    contents_volume: float | None = None  # [m3]
    contents_mass: float | None = None  # [kg]
    count_due: datetime | None = (
        None  # when the count of the contents is overdue; None: never counted
    )
    rated_evaporation: float | None = None  # [m3/s] of liquid
    measured_evaporation: float | None = None  # [m3/s] of liquid
    measured_loss: float | None = None  # [kg/s] for ice
    use: float | None = None  # [m3/s] of liquid used in the room
    insulation: str | None = None
    vent_to: str | None = None  # room, outdoors; None: unknown
    filled_by: str | None = None  # automatic, attended, exchanged; None: unknown
    fill_flow: float | None = None  # [m3/s] of liquid
    independent_high_level: bool | None = None
    closes_in: float | None = None  # [s] from the independent high level to the shut valve
    shut_off_test_due: datetime | None = None  # None: never tested
    gross_volume: float | None = None  # [m3]
    charge_pressure: float | None = None  # [Pa] absolute; of a cylinder kept by volume
    neck_plug: str | None = None  # vented, sealed
    relief_fitted: bool | None = None
    relief_inspection_due: datetime | None = None  # None: never inspected or no interval
    relief_inspected: bool = False
    relief_to: str | None = None  # room, outdoors
    manifold: str | None = None
    mobile: bool | None = None
    supply_line_id: str | None = None  # the line that fills it
    cold_area: float | None = None  # [m2] of the inner vessel
    working_pressure: float | None = None  # [Pa] absolute
    withdrawal_bore: float | None = None  # [m] of the hose that liquid is drawn through
    quench: QuenchValues | None = None


@dataclass(frozen=True, slots=True)
class QuenchValues:
    """What is recorded of a magnet's quench and of the pipe that is to take it outdoors."""

    duration: float | None = None  # [s]
    share_to_room: float | None = None  # [1] as expected, with the pipe sound
    has_pipe: bool = False
    pipe_inspected: bool = False
    pipe_inspection_due: datetime | None = None  # None: never inspected or no interval
    outlet_clear: bool | None = None


@dataclass(frozen=True, slots=True)
class LineValues:
    """A supply line that runs through a room, or fills a vessel in it."""

    record: Reference
    fluid: FluidValues
    phase: str  # liquid, gas
    bore: float | None = None  # [m]
    length: float | None = None  # [m]
    source_pressure: float | None = None  # [Pa] absolute
    restrictor: float | None = None  # [kg/s] that can pass it at most
    source: VesselValues | None = None  # wherever it stands; None: not one of the records
    has_shut_off: bool = False
    trigger: str | None = None  # id of a detector, high-level, excess-flow or manual
    closes_in: float | None = None  # [s]
    fails_closed: bool | None = None
    shut_off_tested: bool = False
    shut_off_test_due: datetime | None = None  # None: never tested or no interval
    insulation: str | None = None


@dataclass(frozen=True, slots=True)
class OpeningValues:
    """An opening of a room, as seen from it."""

    record: Reference
    kind: str  # door, hatch, window, grille, curtain, gap
    other_room_id: str | None  # None: outdoors
    width: float | None = None  # [m]
    height: float | None = None  # [m]
    area: float | None = None  # [m2]
    exchange_flow: float | None = None  # [m3/s] each way
    inflow: float | None = None  # [m3/s] net into this room; negative: out of it
    normally_open: bool | None = None


@dataclass(frozen=True, slots=True)
class Outage:
    """A planned time in which a unit stands still or a detector sees nothing."""

    begins: datetime
    ends: datetime


@dataclass(frozen=True, slots=True)
class UnitValues:
    """A ventilation unit as far as it serves one room."""

    record: Reference
    arrangement: str | None  # supply, exhaust, balanced; None: unknown
    share: float  # [1] of its flow that serves this room
    design_flow: float | None = None  # [m3/s]
    measured_flow: float | None = None  # [m3/s]
    measurement_due: datetime | None = None  # None: never measured or no date
    outdoor_air_fraction: float | None = None  # [1]
    mixing_factor: float | None = None  # [1], only where a tracer test is recorded
    state: str = "running"  # running, stopped, failed
    standby_power: bool | None = None
    flow_proved: bool | None = None
    fail_alarm: bool | None = None
    boost_flow: float | None = None  # [m3/s] of the whole unit once boosted
    boost_trigger: str | None = None  # id of a detector, or manual
    terminal_height: str | None = None  # low, high
    serves: tuple[str, ...] = ()  # ids of all its rooms
    outages: tuple[Outage, ...] = ()


@dataclass(frozen=True, slots=True)
class DetectorValues:
    """A gas detector in a room."""

    record: Reference
    gas: str  # oxygen, or the tag of a fluid
    height: float | None = None  # [m] above the floor
    placed: str | None = None  # inside, entrance
    t90: float | None = None  # [s]
    delay: float | None = None  # [s]
    alarms: tuple[float, ...] = ()  # [%]
    calibration_due: datetime | None = None  # None: never calibrated
    state: str = "in-service"  # in-service, fault, off
    silenced_since: datetime | None = None
    heard_outside: bool | None = None
    display_outside: bool | None = None
    power_backed: bool | None = None
    monitored: bool | None = None
    zeroed_at: float | None = None  # [Pa] absolute
    outages: tuple[Outage, ...] = ()


@dataclass(frozen=True, slots=True)
class ControlValues:
    """An administrative measure of a room, or of a vessel in it."""

    record: Reference
    kind: str  # signage, procedure, training, …
    vessel_id: str | None = None  # None: of the room
    reference: str | None = None
    area: float | None = None  # [m2] of a bund
    check_due: datetime | None = None  # None: never checked or no interval
    checked: bool = False


@dataclass(frozen=True, slots=True)
class PitValues:
    """A pit, trench or shaft in the floor of a room."""

    area: float  # [m2]
    depth: float  # [m]
    entered: bool | None = None


@dataclass(frozen=True, slots=True)
class RoomValues:
    """A room with everything that stands in it, and what it is judged by."""

    record: Reference
    site: Reference
    basis: BasisValues
    name: str
    kind: str  # room, corridor, walk-in, pit, lift, vehicle
    state: str  # planned, in-service, out-of-service
    gross_volume: float  # [m3]
    elevation: float | None = None  # [m]
    station_pressure: float | None = None  # [Pa] absolute; wins over the elevation
    floor_area: float | None = None  # [m2]
    height: float | None = None  # [m]
    occupied_fraction: float | None = None  # [1] of the gross volume
    temperature: float | None = None  # [K]
    below_ground: bool | None = None
    purge_flow: float | None = None  # [m3/s]
    purge_fluid: FluidValues | None = None
    attended: bool | None = None
    most_people: int | None = None
    unaccompanied: bool | None = None
    way_out: float | None = None  # [m]
    vessels: tuple[VesselValues, ...] = ()
    units: tuple[UnitValues, ...] = ()
    detectors: tuple[DetectorValues, ...] = ()
    controls: tuple[ControlValues, ...] = ()
    lines: tuple[LineValues, ...] = ()
    openings: tuple[OpeningValues, ...] = ()
    pit: PitValues | None = None
