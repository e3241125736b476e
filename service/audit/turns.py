"""When an assessment can next change by itself: the turns of rules and of inputs that age."""

from collections.abc import Iterator, Sequence

import numpy as np

from service.audit.columns import (
    DETECTOR_STATES,
    FILLED_BY,
    UNIT_STATES,
    VESSEL_STATES,
    Moments,
)
from service.audit.outages import next_outage_turn
from service.audit.rules.rule import Judged, Subject, Tables, rooms_of
from service.physics.arrays import Integers

_OFF = DETECTOR_STATES.index("off")
_IN_SERVICE = DETECTOR_STATES.index("in-service")
_RUNNING = UNIT_STATES.index("running")
_AUTOMATIC = FILLED_BY.index("automatic")
_EMPTY = VESSEL_STATES.index("empty")


def next_turns(
    tables: Tables, judged: Sequence[tuple[Subject, Judged]], at: np.datetime64
) -> Moments:
    """Least moment, strictly later than now, at which each room asked for can change."""
    turns = np.full(len(tables.rooms), np.datetime64("NaT", "us"))
    for subject, answer in judged:
        _take_earlier(turns, rooms_of(tables, subject), answer.turns_at, at)
    for room, moment in _ageing(tables, at):
        _take_earlier(turns, tables.sound[room], moment, at)
    return turns


def _ageing(tables: Tables, at: np.datetime64) -> Iterator[tuple[Integers, Moments]]:
    """Moments at which an input ages; only where that can make a difference."""
    table = tables.cases.table
    vessels, units, detectors = table.given.vessels, table.given.units, table.given.detectors
    # Both readings of the contents are shown, so a recorded amount counts whatever the basis says.
    recorded = ~np.isnan(vessels.contents_volume) | ~np.isnan(vessels.contents_mass)
    relied_on = table.given.bases.as_recorded[vessels.room] | (vessels.state == _EMPTY) | recorded
    relied_on &= table.stock.count_holds & table.stock.present
    yield vessels.room[relied_on], vessels.count_due[relied_on]
    closes = (vessels.filled_by == _AUTOMATIC) & (vessels.high_level == 1) & table.stock.present
    yield vessels.room[closes], vessels.shut_off_test_due[closes]
    lines = table.given.lines
    acts = table.lines.shut_off_holds
    yield lines.room[acts], lines.test_due[acts]
    # A count that counts for nothing now cannot age, but one that holds may decide how long.
    yield lines.room, lines.source_count_due
    piped = vessels.has_pipe & table.stock.present
    yield vessels.room[piped], vessels.pipe_due[piped]
    would_run = units.state == _RUNNING
    outage = next_outage_turn(units.outage_begins, units.outage_ends, at)
    yield units.room[would_run], outage[would_run]
    # One that an outage has stopped is asked again when that ends.
    measured = table.air.units.measurement_holds & table.air.units.runs
    yield units.room[measured], units.measurement_due[measured]
    watches = detectors.state != _OFF
    yield detectors.room[watches], detectors.silenced_since[watches]
    in_service = detectors.state == _IN_SERVICE
    outage = next_outage_turn(detectors.outage_begins, detectors.outage_ends, at)
    yield detectors.room[in_service], outage[in_service]


def _take_earlier(turns: Moments, room: Integers, moment: Moments, at: np.datetime64) -> None:
    # Comparisons with not-a-time are false, so what has no turn is left out.
    later = moment > at
    np.fmin.at(turns, room[later], moment[later])
