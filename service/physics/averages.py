"""Means over a moving window of a course, exact on its segments (methods E2)."""

import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import Floats, Integers, positive, quotient
from service.physics.course import Course
from service.physics.errors import OutOfRange
from service.physics.relaxation import gained_share, kept_share, relaxed
from service.physics.roots import smallest_enough

# Up to so many, comparing all times with all segments is quicker than seeking row by row.
_FEW_SEGMENTS = 40


def fraction_at(run: Course, times: ArrayLike) -> Floats:
    r"""Released-gas fraction of each row of a course at times of its own.

    Parameters
    ----------
    run : Course
        The course.
    times : array_like, shape (rows, times)
        Times since the start of the run; zero or more. [s]

    Returns
    -------
    ndarray, shape (rows, times)
        Released-gas fraction; after the end of the run the last one. [1]

    Raises
    ------
    OutOfRange
        The times are not one row for each of the course, or one is negative or not a number.

    Notes
    -----
    .. math:: G = G_i e^{-n} + G_{s,i} (1 - e^{-n}), \quad n = k_i (t - t_i)

    The closed form of [laboratory-odh]_ in the segment that holds the time.

    Examples
    --------
    >>> from service.physics.ventilation import course
    >>> run = course([[600.0]], release=0.05, supply=0.2, exhaust=0.0, volume=100.0)
    >>> fraction_at(run, [[0.0, 600.0, 900.0]]).round(6)
    array([[0.      , 0.155374, 0.155374]])
    """
    wanted = _times(run, times)
    if run.steady.shape[1] == 0:
        return np.repeat(run.ends[:, :1], wanted.shape[1], axis=1)
    return _fraction_in(run, _segment_at(run, wanted), wanted)


def highest_mean(run: Course, window: ArrayLike) -> Floats:
    r"""Highest mean of the fraction over any window of a length, row by row.

    Parameters
    ----------
    run : Course
        The course.
    window : array_like, shape () or (rows,)
        Length of the window; above zero. [s]

    Returns
    -------
    ndarray, shape (rows,)
        Highest mean. A run shorter than the window is taken to stay at its last fraction. [1]

    Raises
    ------
    OutOfRange
        The window is zero, negative or not a number.

    Notes
    -----
    .. math:: \max_t \frac{1}{w} \int_t^{t+w} G \, ds

    The integral is that of the closed forms of [laboratory-odh]_. The highest window begins or ends
    where a segment does, or where the fraction at both its ends is the same. Between two such times
    the difference of the two has one turning point at most, so that it falls through zero once at
    most on either side of it, and there the root is found.

    Examples
    --------
    >>> from service.physics.ventilation import course
    >>> run = course([[600.0, 600.0]], release=[[0.1, 0]], supply=0.2, exhaust=0.0, volume=100.0)
    >>> highest_mean(run, 300.0).round(6)
    array([0.256007])
    """
    rows, segments = run.steady.shape
    widths = np.broadcast_to(positive("window", window), (rows,))[:, np.newaxis]
    if segments == 0:
        return run.last
    latest = np.clip(run.times[:, -1:] - widths, 0.0, None)
    joints = np.concatenate([run.times, run.times - widths], axis=1)
    joints = np.sort(np.clip(joints, 0.0, latest), axis=1)
    turns = _turning_points(run, joints, widths)
    joints = np.sort(np.concatenate([joints, turns], axis=1), axis=1)
    crossings = _falls_through_zero(run, joints, widths)
    begins = np.concatenate([joints, crossings], axis=1)
    means = (_integral_to(run, begins + widths) - _integral_to(run, begins)) / widths
    highest: Floats = means.max(axis=1)
    return highest


def _times(run: Course, times: ArrayLike) -> Floats:
    wanted = np.asarray(times, dtype=np.float64)
    if wanted.ndim != 2 or wanted.shape[0] != run.ends.shape[0]:
        raise OutOfRange("times", "of shape (rows, times)")
    if not bool(np.all(np.isfinite(wanted) & (wanted >= 0.0))):
        raise OutOfRange("times", "0 or more and finite")
    return wanted


def _segment_at(run: Course, times: Floats) -> Integers:
    """Index of the segment that holds each time; the last one holds all that is later."""
    begins = run.times[:, 1:-1]
    if begins.shape[1] > _FEW_SEGMENTS:
        # Courses of networks have hundreds: all against all would take gigabytes.
        found = [
            np.searchsorted(row, wanted, side="right")
            for row, wanted in zip(begins, times, strict=True)
        ]
        return np.array(found, dtype=np.int64).reshape(times.shape)
    passed = begins[:, :, np.newaxis] <= times[:, np.newaxis, :]
    segment: Integers = passed.sum(axis=1, dtype=np.int64)
    return segment


def _elapsed(run: Course, segment: Integers, times: Floats) -> Floats:
    """Time since the segment began, as far as the segment goes."""
    begin = np.take_along_axis(run.times, segment, axis=1)
    end = np.take_along_axis(run.times, segment + 1, axis=1)
    return np.clip(times, begin, end) - begin


def _fraction_in(run: Course, segment: Integers, times: Floats) -> Floats:
    start = np.take_along_axis(run.ends, segment, axis=1)
    steady = np.take_along_axis(run.steady, segment, axis=1)
    rate = np.take_along_axis(run.rates, segment, axis=1)
    return relaxed(start, steady, rate * _elapsed(run, segment, times))


def _integral_to(run: Course, times: Floats) -> Floats:
    """Integral of the fraction from the start of the run, the last fraction held after its end."""
    lengths = np.diff(run.times, axis=1)
    areas = _area(run.ends[:, :-1], run.steady, run.rates, lengths)
    before = np.concatenate([np.zeros_like(run.times[:, :1]), np.cumsum(areas, axis=1)], axis=1)
    segment = _segment_at(run, times)
    within = _area(
        np.take_along_axis(run.ends, segment, axis=1),
        np.take_along_axis(run.steady, segment, axis=1),
        np.take_along_axis(run.rates, segment, axis=1),
        _elapsed(run, segment, times),
    )
    beyond = np.clip(times - run.times[:, -1:], 0.0, None) * run.ends[:, -1:]
    return np.take_along_axis(before, segment, axis=1) + within + beyond


def _area(start: Floats, steady: Floats, rate: Floats, length: Floats) -> Floats:
    turnovers = rate * length
    return length * (start * kept_share(turnovers) + steady * gained_share(turnovers))


def _turning_points(run: Course, joints: Floats, widths: Floats) -> Floats:
    """Where the fractions at both ends of the window change equally fast; else the joint itself."""
    left, right = joints[:, :-1], joints[:, 1:]
    middle = (left + right) / 2.0
    trailing, leading = _segment_at(run, middle), _segment_at(run, middle + widths)
    slope, rate = _slope_in(run, trailing, left)
    slope_ahead, rate_ahead = _slope_in(run, leading, left + widths)
    alike = np.sign(slope) * np.sign(slope_ahead) > 0.0
    ratio = quotient(np.abs(slope), np.where(alike, np.abs(slope_ahead), 0.0), where_zero=1.0)
    later = quotient(np.log(ratio), rate - rate_ahead, where_zero=0.0)
    return left + np.clip(later, 0.0, right - left)


def _slope_in(run: Course, segment: Integers, times: Floats) -> tuple[Floats, Floats]:
    steady = np.take_along_axis(run.steady, segment, axis=1)
    rate = np.take_along_axis(run.rates, segment, axis=1)
    return rate * (steady - _fraction_in(run, segment, times)), rate


def _falls_through_zero(run: Course, joints: Floats, widths: Floats) -> Floats:
    """Where the fraction at the window's end falls below that at its start; else the joint."""
    left, right = joints[:, :-1], joints[:, 1:]
    middle = (left + right) / 2.0
    trailing, leading = _segment_at(run, middle), _segment_at(run, middle + widths)
    row_of, column_of = np.indices(left.shape)

    def fraction(row: Integers, segment: Integers, time: Floats) -> Floats:
        begin, end = run.times[row, segment], run.times[row, segment + 1]
        elapsed = np.clip(time, begin, end) - begin
        turnovers = run.rates[row, segment] * elapsed
        return relaxed(run.ends[row, segment], run.steady[row, segment], turnovers)

    def difference(chosen: Integers, later: Floats) -> Floats:
        row, column = row_of.flat[chosen], column_of.flat[chosen]
        begin = left[row, column] + later
        ahead = fraction(row, leading[row, column], begin + widths[row, 0])
        return ahead - fraction(row, trailing[row, column], begin)

    every = np.arange(left.size)
    lengths = (right - left).ravel()
    starts_above = difference(every, np.zeros(left.size)) > 0.0
    ends_below = difference(every, lengths) < 0.0
    falling = np.flatnonzero(starts_above & ends_below)
    crossing = left.ravel().copy()
    crossing[falling] += smallest_enough(
        lambda chosen, later: difference(falling[chosen], later), lengths[falling]
    )
    return crossing.reshape(left.shape)
