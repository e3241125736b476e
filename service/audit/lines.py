"""What flows through the supply lines of many rooms, whole and broken (judging 1, methods G6)."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from service.audit.columns import PHASES, TRIGGERS, UNKNOWN, VESSEL_STATES, Columns
from service.audit.conditions import Conditions, known
from service.physics.arrays import Floats, Mask
from service.physics.constants import STANDARD_PRESSURE
from service.physics.outflow import SHORT_PIPE, bore_area, gas_outflow, liquid_outflow

# Where nobody recorded them. Common practice, no source.
BORE: Final = 0.025  # [m]
LIQUID_PRESSURE: Final = STANDARD_PRESSURE + 400e3  # [Pa] absolute
GAS_PRESSURE: Final = STANDARD_PRESSURE + 1000e3  # [Pa] absolute
CLOSES_IN: Final = 60.0  # [s]

_GAS: Final = PHASES.index("gas")
_EXCESS_FLOW: Final = TRIGGERS.index("excess-flow")
_EMPTY: Final = VESSEL_STATES.index("empty")
_WITHDRAWN: Final = VESSEL_STATES.index("withdrawn")


@dataclass(frozen=True, slots=True)
class Flows:
    """One row a line and room."""

    pressure: Floats  # at the source, absolute [Pa]
    bore: Floats  # [m]
    rupture: Floats  # out of a full break [kg/s]
    broken: Floats  # the same, restricted [kg/s]
    held: Floats  # by the vessel that feeds it [kg]; infinite where that is no record
    shut_off_holds: Mask  # automatic, fails closed and tested in date; its detector apart
    closes_in: Floats  # [s] from the trigger
    filling: Floats  # most that it fills with [kg/s]; not-a-number where nobody can say


def line_flows(given: Columns, room: Conditions, at: np.datetime64) -> Flows:
    """Work out what each line lets through."""
    lines, fluids = given.lines, given.fluids
    is_gas = lines.phase == _GAS
    assumed = np.where(is_gas, GAS_PRESSURE, LIQUID_PRESSURE)
    pressure = known(known(lines.source_pressure, lines.source_pressure_there), assumed)
    bore = known(lines.bore, BORE)
    area, outside = bore_area(bore), room.pressure[lines.room]
    as_liquid = liquid_outflow(
        area,
        fluids.liquid_density[lines.fluid],
        pressure,
        outside,
        discharge_coefficient=SHORT_PIPE,
    )
    as_gas = gas_outflow(
        area,
        pressure,
        outside,
        molar_mass=fluids.molar_mass[lines.fluid],
        temperature=room.temperature[lines.room],
        gamma=fluids.gamma[lines.fluid],
        discharge_coefficient=SHORT_PIPE,
    )
    rupture = np.where(is_gas, as_gas, as_liquid)
    rupture = np.where(lines.source_state == _WITHDRAWN, 0.0, rupture)
    broken = np.fmin(rupture, lines.restrictor)
    said = ~np.isnan(lines.restrictor) | ~np.isnan(lines.bore)
    return Flows(
        pressure=pressure,
        bore=bore,
        rupture=rupture,
        broken=broken,
        held=_held(given, at),
        shut_off_holds=_shut_off_holds(given, at),
        closes_in=known(lines.closes_in, CLOSES_IN),
        filling=np.where(said & (broken > 0.0), broken, np.nan),
    )


def _held(given: Columns, at: np.datetime64) -> Floats:
    """What the vessel that feeds a line holds: full, unless a count in date may be relied on."""
    lines = given.lines
    full = np.fmax(lines.source_capacity, lines.source_contents)
    counted = lines.source_count_due > at
    recorded = np.where(lines.source_state == _EMPTY, 0.0, known(lines.source_contents, full))
    relied_on = counted & (given.bases.as_recorded[lines.room] | (lines.source_state == _EMPTY))
    held = np.where(relied_on, recorded, full)
    return np.where(lines.has_source, known(held, np.inf), np.inf)


def _shut_off_holds(given: Columns, at: np.datetime64) -> Mask:
    lines = given.lines
    acts = (lines.trigger == _EXCESS_FLOW) | (lines.detector != UNKNOWN)
    holds: Mask = acts & (lines.fails_closed == 1) & (lines.test_due > at)
    return holds


def shut_by_excess_flow(given: Columns, flows: Flows) -> Mask:
    """Tell which lines an excess flow shuts, whatever the air of the room."""
    shut: Mask = flows.shut_off_holds & (given.lines.trigger == _EXCESS_FLOW)
    return shut
