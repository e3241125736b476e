"""What a gas detector reads, later than the room it stands in (methods M1)."""

from math import log
from typing import Final

import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import Floats, Integers, Mask, finite, non_negative, positive
from service.physics.course import Course
from service.physics.relaxation import LONGEST, kept_share

# Halvings of a bracket: more than the bits of a double's fraction, so that nothing is left of it.
_HALVINGS: Final = 60


def time_constant(t90: ArrayLike) -> Floats:
    r"""Time constant of a first-order sensor, from the time to ninety percent of a step.

    Parameters
    ----------
    t90 : array_like, shape (...)
        Time to read ninety percent of a step; above zero. [s]

    Returns
    -------
    ndarray, shape (...)
        Time constant. [s]

    Raises
    ------
    OutOfRange
        The time is zero, negative or not a number.

    Notes
    -----
    .. math:: \tau = t_{90} / \ln 10

    The step response of a first-order lag, :math:`1 - e^{-t/\tau}`, solved for 0.9.

    Examples
    --------
    >>> time_constant([30.0]).round(4)
    array([13.0288])
    """
    return positive("t90", t90) / log(10.0)


def reading_after(
    elapsed: ArrayLike,
    *,
    reading: ArrayLike,
    start: ArrayLike,
    steady: ArrayLike,
    rate: ArrayLike,
    constant: ArrayLike,
) -> Floats:
    r"""Reading of a first-order sensor while the fraction around it relaxes.

    Parameters
    ----------
    elapsed : array_like, shape (...)
        Time since the start; zero or more. [s]
    reading : array_like, shape (...)
        Reading at the start. [1]
    start : array_like, shape (...)
        Fraction around the sensor at the start. [1]
    steady : array_like, shape (...)
        Fraction that the room tends to. [1]
    rate : array_like, shape (...)
        Turnovers of the room per second; zero or more. [1/s]
    constant : array_like, shape (...)
        Time constant of the sensor; above zero. [s]

    Returns
    -------
    ndarray, shape (...)
        Reading, broadcast over the inputs. [1]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: y = G_s + (y_0 - G_s) e^{-t/\tau}
              + (G_0 - G_s) \frac{e^{-kt} - e^{-t/\tau}}{1 - k\tau}

    The solution of :math:`\tau \dot y = G - y` for the closed forms of [laboratory-odh]_. The last
    quotient is written so that it has its limit where k tau is 1.

    Examples
    --------
    >>> reading_after(
    ...     [0.0, 30.0], reading=0.0, start=1.0, steady=1.0, rate=0.0, constant=13.0288
    ... ).round(4)
    array([0. , 0.9])
    """
    time, tau = non_negative("elapsed", elapsed), positive("constant", constant)
    target = finite("steady", steady)
    turns, lags = non_negative("rate", rate) * time, time / tau
    left = np.exp(-np.minimum(lags, LONGEST))
    # (exp(-kt) - exp(-t/tau)) / (1 - k tau) without a difference of near equals.
    share = kept_share(np.abs(lags - turns))
    slow = np.exp(-np.minimum(np.minimum(turns, lags), LONGEST))
    lagging = slow * lags * share
    caught_up = (finite("reading", reading) - target) * left
    followed: Floats = target + caught_up + (finite("start", start) - target) * lagging
    return followed


def alarm_time(
    run: Course, rows: Integers, level: ArrayLike, *, t90: ArrayLike, delay: ArrayLike
) -> Floats:
    r"""Time at which detectors in rooms first read a level.

    Parameters
    ----------
    run : Course
        Course of the rooms.
    rows : ndarray of int, shape (detectors,)
        Row of the course in which each detector stands.
    level : array_like, shape (detectors,)
        Fraction at which each gives alarm. [1]
    t90 : array_like, shape (detectors,)
        Time to read ninety percent of a step; above zero. [s]
    delay : array_like, shape (detectors,)
        Time the sample takes to the sensor, averaging of the unit included; zero or more. [s]

    Returns
    -------
    ndarray, shape (detectors,)
        Time since the start of the course; not-a-number where the level is never read. [s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: \tau \dot y = G(t - t_d) - y, \quad y(0) = 0

    A reading rises while the fraction is above it, so in each segment it has at most one height,
    where the two meet; the level is sought on the way up to it by halving. A level of zero or
    less is read at once, after the delay.

    Examples
    --------
    >>> from service.physics.ventilation import course
    >>> run = course([[3600.0]], release=0.05, supply=0.2, exhaust=0.0, volume=100.0)
    >>> alarm_time(run, np.array([0]), [0.069212], t90=[30.0], delay=[10.0]).round(1)
    array([193.1])
    """
    sought, tau = finite("level", level), time_constant(t90)
    reading = np.zeros(rows.size)
    found = np.where(sought <= 0.0, 0.0, np.nan)
    for segment in range(run.steady.shape[1]):
        at_start = _Segment(run, rows, segment, reading, tau)
        top = at_start.time_of_height()
        crossed: Mask = np.isnan(found) & (at_start.read(top) >= sought)
        if crossed.any():
            within = at_start.time_of(sought, top)
            found = np.where(crossed, run.times[rows, segment] + within, found)
        reading = at_start.read(at_start.length)
    return found + non_negative("delay", delay)


class _Segment:
    """Detectors in one segment of their rooms."""

    def __init__(
        self, run: Course, rows: Integers, segment: int, reading: Floats, constant: Floats
    ) -> None:
        self.length = run.times[rows, segment + 1] - run.times[rows, segment]
        self.reading = reading
        self.start = run.ends[rows, segment]
        self.steady = run.steady[rows, segment]
        self.rate = run.rates[rows, segment]
        self.constant = constant

    def read(self, elapsed: Floats) -> Floats:
        """Reading some time into the segment."""
        return reading_after(
            elapsed,
            reading=self.reading,
            start=self.start,
            steady=self.steady,
            rate=self.rate,
            constant=self.constant,
        )

    def time_of_height(self) -> Floats:
        """Time of the highest reading: where the reading meets the fraction, or an end."""
        ahead = self._is_ahead(self.length)
        low, high = np.zeros_like(self.length), self.length.copy()
        for _ in range(_HALVINGS):
            middle = 0.5 * (low + high)
            still = self._is_ahead(middle)
            low, high = np.where(still, middle, low), np.where(still, high, middle)
        top = np.where(ahead, self.length, low)
        return np.where(self.start > self.reading, top, self._later_end())

    def time_of(self, level: Floats, top: Floats) -> Floats:
        """Time of a level on the way up to the height."""
        low, high = np.zeros_like(top), top.copy()
        for _ in range(_HALVINGS):
            middle = 0.5 * (low + high)
            below = self.read(middle) < level
            low, high = np.where(below, middle, low), np.where(below, high, middle)
        return high

    def _is_ahead(self, elapsed: Floats) -> Mask:
        """Whether the fraction is above the reading, which then rises."""
        turned = np.exp(-np.minimum(self.rate * elapsed, LONGEST))
        ahead: Mask = self.steady + (self.start - self.steady) * turned > self.read(elapsed)
        return ahead

    def _later_end(self) -> Floats:
        """Where the reading falls first, the higher of both ends."""
        rises = self.read(self.length) > self.reading
        return np.where(rises, self.length, 0.0)
