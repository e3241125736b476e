"""The air that may be counted in many rooms (judging 2)."""

from dataclasses import dataclass
from typing import Final

import numpy as np

from service.audit.columns import ARRANGEMENTS, UNIT_STATES, UNKNOWN, Columns, is_one_of
from service.audit.conditions import Conditions, known
from service.audit.outages import out_now
from service.physics.arrays import Floats, Integers, Mask, quotient, sum_by_group

AS_MEASURED: Final = "as-measured"
DESIGN: Final = "design"
LOST: Final = "lost"
# As measured, until a detector or a person starts the boost of a unit.
BOOSTED: Final = "boosted"
# Only what was measured and is not overdue: what the safeguard "ventilation" may rest on. No
# case of an answer; natural air has no part in it.
PROVEN: Final = "proven"

AIRFLOWS: Final = (AS_MEASURED, DESIGN, LOST, BOOSTED, PROVEN)

_SUPPLY, _EXHAUST, _BALANCED = range(len(ARRANGEMENTS))
_RUNNING = UNIT_STATES.index("running")

# Outdoor share of the air of a unit whose share nobody recorded. What an exhaust draws out is
# gone, but what is blown in may be the room's own air. Common practice, no source.
UNKNOWN_OUTDOOR_SHARE: Final = {"exhaust": 1.0, "supply": 0.0, "balanced": 0.0, None: 0.0}


@dataclass(frozen=True, slots=True)
class UnitAir:
    """One row a unit and room."""

    never_measured: Mask
    measurement_holds: Mask
    whole_flow: Floats  # of the unit by its records [m3/s]
    flow: Floats  # the room's share of it, outdoor air only [m3/s]
    design_flow: Floats  # the same, as designed [m3/s]
    boosted_flow: Floats  # the same, once boosted [m3/s]
    boosts: Mask  # runs, and is moved to more by its trigger
    mixing_factor: Floats
    runs: Mask


@dataclass(frozen=True, slots=True)
class Air:
    """Air of each room in each airflow, (airflows, rooms)."""

    units: UnitAir
    supply: Floats  # as counted [m3/s]
    exhaust: Floats
    moved: Floats  # outdoor air as fans or nature move it [m3/s]
    by_fans: Floats  # outdoor air as fans move it, counted or not [m3/s]
    natural: Mask  # natural air is the larger, and counts
    mixing_factor: Floats  # what a fan must move for each m3 that counts


def air(given: Columns, room: Conditions, at: np.datetime64) -> Air:
    """Work out the air that counts."""
    units = _unit_air(given, at)
    counted = {
        AS_MEASURED: np.where(units.runs, units.flow, 0.0),
        DESIGN: units.design_flow,
        LOST: np.where(units.runs & (given.units.standby_power == 1), units.flow, 0.0),
        BOOSTED: np.where(units.runs, units.boosted_flow, 0.0),
        PROVEN: np.where(units.runs & units.measurement_holds, units.flow, 0.0),
    }
    flows = [_combined(given, room, units, counted[name], name != PROVEN) for name in AIRFLOWS]
    return Air(units, *(np.stack(parts) for parts in zip(*flows, strict=True)))


def _unit_air(given: Columns, at: np.datetime64) -> UnitAir:
    units = given.units
    never = np.isnan(units.measured_flow)
    holds = ~never & (units.measurement_due > at)
    designed = known(units.design_flow, 0.0) * given.bases.never_measured_share[units.room]
    flow = np.where(
        never,
        designed,
        np.where(holds, units.measured_flow, np.fmin(units.design_flow, units.measured_flow)),
    )
    outdoor = known(units.outdoor_air_fraction, unknown_outdoor_share(units.arrangement))
    reaches = outdoor * units.share
    runs = (units.state == _RUNNING) & ~out_now(units.outage_begins, units.outage_ends, at)
    boosted = np.maximum(flow, known(units.boost_flow, 0.0))
    return UnitAir(
        never_measured=never,
        measurement_holds=holds,
        whole_flow=flow,
        flow=flow * reaches,
        design_flow=known(units.design_flow, 0.0) * reaches,
        boosted_flow=np.where(units.boost_detector != UNKNOWN, boosted, flow) * reaches,
        boosts=runs & (units.boost_detector != UNKNOWN) & (boosted * reaches > flow * reaches),
        mixing_factor=known(units.mixing_factor, given.bases.mixing_factor[units.room]),
        runs=runs,
    )


def unknown_outdoor_share(arrangement: Integers) -> Floats:
    """Outdoor share taken where none is recorded."""
    shares = [UNKNOWN_OUTDOOR_SHARE[name] for name in (*ARRANGEMENTS, None)]
    return np.array(shares)[arrangement]  # an unknown arrangement is -1, the last


def _combined(
    given: Columns, room: Conditions, units: UnitAir, moved: Floats, with_nature: bool
) -> tuple[Floats, Floats, Floats, Floats, Mask, Floats]:
    """Supply and exhaust as counted, air as moved, air by fans, whether natural, and the factor."""
    blows = is_one_of(given.units.arrangement, (_SUPPLY, _BALANCED))
    draws = given.units.arrangement != _SUPPLY
    credited = moved / units.mixing_factor

    def total(flow: Floats, part: Mask) -> Floats:
        return sum_by_group(np.where(part, flow, 0.0), given.units.room, given.count)

    supply, exhaust = total(credited, blows), total(credited, draws)
    by_fans = np.maximum(total(moved, blows), total(moved, draws))
    by_units = np.maximum(supply, exhaust)
    natural = (room.natural_flow >= by_units) & with_nature
    factor = quotient(by_fans, by_units, where_zero=given.bases.mixing_factor)
    return (
        np.where(natural, 0.0, supply),
        np.where(natural, room.natural_flow, exhaust),
        np.where(natural, room.natural_flow, by_fans),
        by_fans,
        natural,
        factor,
    )
