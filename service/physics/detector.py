"""What a gas detector reads, later than the room it stands in (methods M1)."""

from math import log
from typing import Final

import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import Floats, Integers, finite, non_negative, positive
from service.physics.course import Course
from service.physics.relaxation import LONGEST, kept_share
from service.physics.roots import smallest_enough

_EVERY: Final = slice(None)
_TINY: Final = 1e-12


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
    where the two meet; the level is sought on the way up to it by the bracketing of
    [chandrupatla]_. A level of zero or
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
        piece = _Segment(run, rows, segment, reading, tau)
        top = piece.time_of_height()
        crossed = np.flatnonzero(np.isnan(found) & (piece.read(top) >= sought))
        within = piece.time_of(sought, top, crossed)
        found[crossed] = run.times[rows[crossed], segment] + within
        reading = piece.read(piece.length)
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

    def read(self, elapsed: Floats, chosen: Integers | slice = _EVERY) -> Floats:
        """Reading some time into the segment."""
        return reading_after(
            elapsed,
            reading=self.reading[chosen],
            start=self.start[chosen],
            steady=self.steady[chosen],
            rate=self.rate[chosen],
            constant=self.constant[chosen],
        )

    def time_of_height(self) -> Floats:
        """Time of the highest reading: where the reading meets the fraction, or an end."""
        # A reading that falls at first may rise to its end, or be highest where it began.
        at_end = self.read(self.length)
        top = np.where((self.start > self.reading) | (at_end > self.reading), self.length, 0.0)
        left = np.exp(-np.minimum(self.rate * self.length, LONGEST))
        fraction = self.steady + (self.start - self.steady) * left
        # Only a fraction that falls can be overtaken; one that rises or that nothing moves is equal
        # at last by rounding.
        falls = (self.start > self.steady) & (self.rate > 0.0)
        overtaken = np.flatnonzero(falls & (self.start > self.reading) & ~(fraction > at_end))
        top[overtaken] = np.minimum(top[overtaken], self._meets(overtaken))
        return top

    def _meets(self, rows: Integers) -> Floats:
        """Time at which a reading on its way up meets a fraction on its way down.

        Setting the two solutions equal gives t = tau q ln(1 + s q) / (s q) with s = 1 - k tau and
        q = (G0 - y0) / (k tau (G0 - Gs)); the quotient is 1 where s is 0.
        """
        lag = self.rate[rows] * self.constant[rows]
        start = self.start[rows]
        above = (start - self.reading[rows]) / (lag * (start - self.steady[rows]))
        grown = np.maximum((1.0 - lag) * above, -1.0 + _TINY)
        small = np.abs(grown) < _TINY
        stretch = np.where(small, 1.0, np.log1p(grown) / np.where(small, 1.0, grown))
        meets: Floats = self.constant[rows] * above * stretch
        return meets

    def time_of(self, level: Floats, top: Floats, rows: Integers) -> Floats:
        """Time of a level on the way up to the height, for rows that reach it."""
        return smallest_enough(
            lambda some, elapsed: level[rows[some]] - self.read(elapsed, rows[some]), top[rows]
        )
