"""What a room is like before anything is let go: pressure, net volume, marks, the way out."""

from dataclasses import dataclass
from typing import Final

import numpy as np

from service.audit.columns import ROOM_KINDS, Columns, is_one_of
from service.physics.ambient import oxygen_critical_mark, oxygen_danger_mark, station_pressure
from service.physics.arrays import Floats, Mask
from service.physics.constants import OXYGEN_IN_AIR, ROOM_TEMPERATURE
from service.physics.egress import time_to_leave
from service.physics.layering import breathing_zone_volume, ceiling_zone_volume

# Height taken to turn a volume into a floor where neither floor nor height is known: a low
# ceiling makes a large floor, and so a long way out. [m]  Common practice, no source.
LOW_CEILING: Final = 2.4

SEA_LEVEL: Final = 0.0

ENCLOSED_KINDS: Final = tuple(
    ROOM_KINDS.index(kind) for kind in ("walk-in", "pit", "lift", "vehicle")
)


@dataclass(frozen=True, slots=True)
class Conditions:
    """One row a room."""

    pressure: Floats  # [Pa]
    temperature: Floats  # [K]
    volume: Floats  # net [m3]
    height: Floats  # [m]; not-a-number where it does not follow from the records
    floor_zone: Floats  # net volume that people breathe in [m3], at most the room
    ceiling_zone: Floats  # net volume above it [m3], at most the room
    low_marks: Floats  # (rooms, 3) oxygen fractions: deficient, danger, critical
    high_marks: Floats  # (rooms, 3) oxygen fractions: enriched and the two marks beyond
    natural_flow: Floats  # [m3/s]
    way_out: Floats  # [m]
    out_after_alarm: Floats  # [s] to react and to walk out


def conditions(given: Columns) -> Conditions:
    """Work out what each room is like."""
    rooms, bases = given.rooms, given.bases
    pressure = np.where(
        np.isnan(rooms.station_pressure),
        station_pressure(known(rooms.elevation, SEA_LEVEL)),
        rooms.station_pressure,
    )
    free_share = np.where(
        np.isnan(rooms.occupied_fraction), bases.net_volume_share, 1.0 - rooms.occupied_fraction
    )
    volume = rooms.gross_volume * free_share
    height = known(rooms.height, rooms.gross_volume / rooms.floor_area)
    way_out = known(rooms.way_out, way_out_of_floor(given))
    floor, ceiling = _zones(given, height, free_share)
    return Conditions(
        pressure=pressure,
        temperature=known(rooms.temperature, ROOM_TEMPERATURE),
        volume=volume,
        height=height,
        floor_zone=np.minimum(floor, volume),
        ceiling_zone=np.minimum(ceiling, volume),
        low_marks=_low_marks(given, pressure),
        high_marks=np.stack([bases.enriched, bases.rich_second, bases.rich_third], axis=1),
        natural_flow=_air_changes(given) * volume,
        way_out=way_out,
        out_after_alarm=time_to_leave(bases.react, way_out, bases.walk),
    )


def _zones(given: Columns, height: Floats, free_share: Floats) -> tuple[Floats, Floats]:
    """Net volume below and above the height that people breathe at, by the two-zone bound."""
    rooms = given.rooms
    # A high room has a small floor, which is the cautious side here.
    tall = known(height, np.cbrt(rooms.gross_volume))
    floor = known(rooms.floor_area, rooms.gross_volume / tall)
    return (
        breathing_zone_volume(floor, tall, net_share=free_share),
        ceiling_zone_volume(floor, tall, net_share=free_share),
    )


def way_out_of_floor(given: Columns) -> Floats:
    """Way out of a room of unknown way: the diagonal of a square floor, and a metre (judging 4)."""
    rooms = given.rooms
    floor = known(rooms.floor_area, rooms.gross_volume / known(rooms.height, LOW_CEILING))
    return np.sqrt(2.0 * floor) + 1.0


def is_enclosed(given: Columns) -> Mask:
    """Tell which rooms have no natural air at all."""
    return is_one_of(given.rooms.kind, ENCLOSED_KINDS)


def known(values: Floats, otherwise: Floats | float) -> Floats:
    """Values where they are known, and something else where they are not."""
    return np.where(np.isnan(values), otherwise, values)


def _low_marks(given: Columns, pressure: Floats) -> Floats:
    bases = given.bases
    danger = oxygen_danger_mark(
        pressure,
        deficient=bases.deficient,
        danger=bases.danger,
        danger_pressure=bases.danger_pressure,
    )
    critical = oxygen_critical_mark(
        pressure,
        danger_mark=danger,
        critical=bases.critical,
        critical_pressure=bases.critical_pressure,
    )
    return np.stack([bases.deficient, danger, critical], axis=1)


def _air_changes(given: Columns) -> Floats:
    """Natural air changes; a room that nobody says is above the ground counts as below."""
    bases = given.bases
    open_air = np.where(
        given.rooms.below_ground == 0,
        bases.air_changes_above_ground,
        bases.air_changes_below_ground,
    )
    return np.where(is_enclosed(given), bases.air_changes_enclosed, open_air)


def fraction_of_low_mark(oxygen: Floats) -> Floats:
    """Released-gas fraction at which the oxygen has fallen to a mark."""
    return (OXYGEN_IN_AIR - oxygen) / OXYGEN_IN_AIR


def fraction_of_high_mark(oxygen: Floats) -> Floats:
    """Fraction by which the oxygen has risen at a mark, of what air has."""
    return (oxygen - OXYGEN_IN_AIR) / OXYGEN_IN_AIR
