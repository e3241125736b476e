"""What is taken of lines, hoses, insulation, quench pipes and pits where nothing is recorded."""

from __future__ import annotations

from typing import Final

import numpy as np

from service.audit.assumption import Assumption
from service.audit.bases import COMMON_PRACTICE
from service.audit.cases import CaseTable
from service.audit.columns import UNKNOWN, all_of
from service.audit.inventory import HOSE_BORE, HOSE_PRESSURE, QUENCH_DURATION
from service.audit.lines import CLOSES_IN
from service.physics.arrays import Floats, Mask
from service.physics.constants import STANDARD_PRESSURE

_MILLIMETRES: Final = 1000.0  # in a metre
_KILOPASCAL: Final = 1000.0  # [Pa]


def _no_insulation(table: CaseTable) -> Mask:
    return all_of(table.given.vessels.insulation == UNKNOWN, table.stock.leak > 0.0)


def _vacuum(_table: CaseTable) -> str:
    return "vacuum-powder"


def _no_cold_area(table: CaseTable) -> Mask:
    return all_of(np.isnan(table.given.vessels.cold_area), table.stock.leak > 0.0)


def _like_a_sphere(table: CaseTable) -> Floats:
    return table.stock.cold_area


def _no_bore_of_hose(table: CaseTable) -> Mask:
    return all_of(np.isnan(table.given.vessels.withdrawal_bore), table.stock.hose > 0.0)


def _usual_hose(table: CaseTable) -> Floats:
    return np.full(table.given.vessels.room.size, HOSE_BORE * _MILLIMETRES)


def _no_pressure(table: CaseTable) -> Mask:
    return all_of(np.isnan(table.given.vessels.working_pressure), table.stock.hose > 0.0)


def _usual_pressure(table: CaseTable) -> Floats:
    gauge = (HOSE_PRESSURE - STANDARD_PRESSURE) / _KILOPASCAL
    return np.full(table.given.vessels.room.size, gauge)


def _no_quench_duration(table: CaseTable) -> Mask:
    return all_of(np.isnan(table.given.vessels.quench_duration), table.stock.quench > 0.0)


def _quick(table: CaseTable) -> Floats:
    return np.full(table.given.vessels.room.size, QUENCH_DURATION)


def _no_share(table: CaseTable) -> Mask:
    return all_of(np.isnan(table.given.vessels.quench_share), table.stock.quench > 0.0)


def _by_its_pipe(table: CaseTable) -> Floats:
    return table.stock.quench_share


def _filled_by_line(table: CaseTable) -> Mask:
    vessels = table.given.vessels
    return all_of(vessels.line != UNKNOWN, ~vessels.filled_as_said, table.stock.present)


def _automatic(_table: CaseTable) -> str:
    return "automatic"


def _no_bore(table: CaseTable) -> Mask:
    return all_of(np.isnan(table.given.lines.bore), table.lines.rupture > 0.0)


def _usual_bore(table: CaseTable) -> Floats:
    return table.lines.bore * _MILLIMETRES


def _no_source_pressure(table: CaseTable) -> Mask:
    lines = table.given.lines
    unknown = np.isnan(lines.source_pressure) & np.isnan(lines.source_pressure_there)
    return all_of(unknown, table.lines.rupture > 0.0)


def _usual_source_pressure(table: CaseTable) -> Floats:
    return (table.lines.pressure - STANDARD_PRESSURE) / _KILOPASCAL


def _no_closing_time(table: CaseTable) -> Mask:
    return all_of(np.isnan(table.given.lines.closes_in), table.lines.shut_off_holds)


def _a_minute(table: CaseTable) -> Floats:
    return np.full(table.given.lines.room.size, CLOSES_IN)


def _no_entry(table: CaseTable) -> Mask:
    rooms = table.given.rooms
    return all_of(~np.isnan(rooms.pit_area), rooms.pit_entered == UNKNOWN)


def _is_entered(_table: CaseTable) -> bool:
    return True


EQUIPMENT: Final = (
    Assumption(
        "vessel",
        "insulation",
        _no_insulation,
        _vacuum,
        "Its insulation is not recorded: a vacuum, which can be lost.",
        COMMON_PRACTICE,
        False,
        None,
    ),
    Assumption(
        "vessel",
        "cold_area_m2",
        _no_cold_area,
        _like_a_sphere,
        "The surface of its inner vessel is not recorded: estimated from its volume.",
        COMMON_PRACTICE,
        False,
        None,
    ),
    Assumption(
        "vessel",
        "withdrawal_bore_mm",
        _no_bore_of_hose,
        _usual_hose,
        "The bore of its withdrawal hose is not recorded.",
        COMMON_PRACTICE,
        False,
        None,
    ),
    Assumption(
        "vessel",
        "working_pressure_kpa",
        _no_pressure,
        _usual_pressure,
        "The pressure that its liquid is drawn by is not recorded.",
        COMMON_PRACTICE,
        False,
        None,
    ),
    Assumption(
        "vessel",
        "quench.duration_s",
        _no_quench_duration,
        _quick,
        "How long a quench lasts is not recorded: a quick one.",
        COMMON_PRACTICE,
        False,  # a finding of its own
        None,
    ),
    Assumption(
        "vessel",
        "quench.share_to_room",
        _no_share,
        _by_its_pipe,
        "The share of a quench that comes into the room is not recorded: by the pipe's inspection.",
        "inspected_pipe_share",
        False,
        None,
    ),
    Assumption(
        "vessel",
        "filling.by",
        _filled_by_line,
        _automatic,
        "How it is filled is not recorded, but a line fills it: by itself.",
        COMMON_PRACTICE,
        True,
        None,
    ),
    Assumption(
        "supply-line",
        "bore_mm",
        _no_bore,
        _usual_bore,
        "The bore of the line is not recorded.",
        COMMON_PRACTICE,
        True,
        None,
    ),
    Assumption(
        "supply-line",
        "source_pressure_kpa",
        _no_source_pressure,
        _usual_source_pressure,
        "The pressure of its source is not recorded, nor that of the vessel that feeds it.",
        COMMON_PRACTICE,
        True,
        None,
    ),
    Assumption(
        "supply-line",
        "shutoff.closes_in_s",
        _no_closing_time,
        _a_minute,
        "How long its shut-off takes is not recorded.",
        COMMON_PRACTICE,
        True,
        None,
    ),
    Assumption(
        "room",
        "pit.entered",
        _no_entry,
        _is_entered,
        "Whether people enter the pit is not recorded: they do.",
        COMMON_PRACTICE,
        True,
        None,
    ),
)
