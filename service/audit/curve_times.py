"""Where the points of a course are put: at what is exact, and between where it changes."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Final

import numpy as np

from service.physics.arrays import Floats, rounded
from service.physics.averages import fraction_at
from service.physics.course import Course
from service.physics.relaxation import time_between

# Share of the points between that follow the change; the rest follow the time, so that a course
# that has come to rest is still a line with points on it.
_BY_CHANGE: Final = 0.75


def times_of(run: Course, end: float, exact: Iterable[float], most: int) -> Floats:
    """Times of the points of a course of one row, rounded and rising, at most so many.

    Where there are more exact times than points, the first of them are kept; then come the ends
    of segments; what is left is put between.
    """
    kept = np.array(list(dict.fromkeys([0.0, end, *exact]))[:most])
    joints = np.setdiff1d(rounded(run.times[0]), kept)
    joints = _some(joints[(joints > 0.0) & (joints < end)], most - kept.size)
    kept = np.concatenate([kept, joints])
    spare = most - kept.size
    return np.unique(np.concatenate([kept, rounded(_between(run, end, spare))]))


def _some(values: Floats, most: int) -> Floats:
    """So many of the values, evenly by their order."""
    if values.size <= most:
        return values
    return values[np.linspace(0.0, values.size - 1.0, most).astype(np.int64)]


def _between(run: Course, end: float, count: int) -> Floats:
    times = np.minimum(run.times[0], end)
    levels = fraction_at(run, times[np.newaxis, :])[0]
    if not bool(np.any(levels != levels[0])):
        return _by_time(end, count)
    by_change = round(count * _BY_CHANGE)
    return np.concatenate(
        [_by_change(run, times, levels, by_change), _by_time(end, count - by_change)]
    )


def _by_time(end: float, count: int) -> Floats:
    return np.linspace(0.0, end, count + 2)[1:-1]


def _by_change(run: Course, times: Floats, levels: Floats, count: int) -> Floats:
    """Times between which the fraction moves by equal steps, up and down alike."""
    way = np.diff(levels)
    gone = np.cumsum(np.abs(way))
    sought = gone[-1] * np.arange(1, count + 1) / (count + 1)
    segment = np.minimum(np.searchsorted(gone, sought), way.size - 1)
    into = sought - gone[segment] + np.abs(way[segment])
    target = levels[segment] + np.sign(way[segment]) * into
    within = time_between(levels[segment], target, run.steady[0, segment], run.rates[0, segment])
    length = times[segment + 1] - times[segment]
    # A step that ends where its segment does is not strictly inside it.
    within = np.clip(np.where(np.isnan(within), length, within), 0.0, length)
    found: Floats = times[segment] + within
    return found
