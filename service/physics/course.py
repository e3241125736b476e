"""The course of rooms through segments of steady flows (methods D6)."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import Floats, Integers, finite
from service.physics.relaxation import relaxed, time_between

# Two ends that differ by less are one height, reached at the earlier: rounding moves the
# fifteenth figure, and the time of an extreme must not jump with it.
_SAME_HEIGHT = 1e-12


@dataclass(frozen=True, slots=True)
class Course:
    """Released-gas fraction of many rooms over time, exact at and between the ends of segments.

    Attributes
    ----------
    times : ndarray, shape (rows, segments + 1)
        Time at the start and at the end of each segment. [s]
    ends : ndarray, shape (rows, segments + 1)
        Released-gas fraction at those times; within a segment it only rises or only falls. [1]
    steady : ndarray, shape (rows, segments)
        Fraction that each segment tends to. [1]
    rates : ndarray, shape (rows, segments)
        Turnovers of the room per second in each segment. [1/s]
    """

    times: Floats
    ends: Floats
    steady: Floats
    rates: Floats

    @property
    def highest(self) -> Floats:
        """Highest fraction of the course [1], shape (rows,)."""
        highest: Floats = self.ends.max(axis=1)
        return highest

    @property
    def at(self) -> Floats:
        """Time of the highest fraction [s], the earliest where there are several, shape (rows,)."""
        highest = self.highest[:, np.newaxis]
        first = np.argmax(self.ends >= highest - _SAME_HEIGHT * np.abs(highest), axis=1)
        return _picked(self.times, first)

    @property
    def last(self) -> Floats:
        """Fraction at the end of the course [1], shape (rows,)."""
        return self.ends[:, -1]

    def first_time_above(self, mark: ArrayLike) -> Floats:
        r"""Time at which the fraction first reaches a mark.

        Parameters
        ----------
        mark : array_like, shape () or (rows,)
            Released-gas fraction. [1]

        Returns
        -------
        ndarray, shape (rows,)
            Time; 0 where the start is at the mark or above, not-a-number where the course never
            reaches it. [s]

        Raises
        ------
        OutOfRange
            The mark is not finite.

        Notes
        -----
        The inverse of [laboratory-odh]_ in the first segment that ends at the mark or above.
        """
        marks = self._marks(mark)
        reached = self.ends >= marks[:, np.newaxis]
        first = np.argmax(reached, axis=1)
        crossed = self._crossing(marks, np.maximum(first - 1, 0))
        time = np.where(first == 0, 0.0, crossed)
        return np.where(reached.any(axis=1), time, np.nan)

    def back_below(self, mark: ArrayLike) -> Floats:
        r"""Time at which the fraction is back at a mark or below it for good.

        Parameters
        ----------
        mark : array_like, shape () or (rows,)
            Released-gas fraction. [1]

        Returns
        -------
        ndarray, shape (rows,)
            Time; 0 where the course is never above the mark, not-a-number where it ends above. [s]

        Raises
        ------
        OutOfRange
            The mark is not finite.

        Notes
        -----
        The inverse of [laboratory-odh]_ in the segment after the last end above the mark.
        """
        marks = self._marks(mark)
        above = self.ends > marks[:, np.newaxis]
        segments = self.steady.shape[1]
        last = segments - np.argmax(above[:, ::-1], axis=1)
        crossed = self._crossing(marks, np.minimum(last, max(segments - 1, 0)))
        time = np.where(last == segments, np.nan, crossed)
        return np.where(above.any(axis=1), time, 0.0)

    def _marks(self, mark: ArrayLike) -> Floats:
        return np.broadcast_to(finite("mark", mark), (self.ends.shape[0],))

    def _crossing(self, marks: Floats, segment: Integers) -> Floats:
        """Time of a mark in a segment whose ends lie on both sides of it."""
        if self.steady.shape[1] == 0:
            return np.zeros_like(marks)
        start, begin = _picked(self.ends, segment), _picked(self.times, segment)
        steady, rate = _picked(self.steady, segment), _picked(self.rates, segment)
        length = _picked(self.times, segment + 1) - begin
        within = time_between(start, marks, steady, rate)
        # A segment that starts at the mark crosses it at once; one that only ends at it, by
        # rounding at its steady state, does so at its end.
        within = np.where(start == marks, 0.0, np.where(np.isnan(within), length, within))
        return begin + np.minimum(within, length)


def _picked(values: Floats, column: Integers) -> Floats:
    picked: Floats = np.take_along_axis(values, column[:, np.newaxis], axis=1)[:, 0]
    return picked


def ends_of_segments(start: Floats, steady: Floats, turnovers: Floats) -> Floats:
    r"""Fraction at the start and at the end of each segment, for values already checked.

    Parameters
    ----------
    start : ndarray, shape (rows,)
        Released-gas fraction at the start. [1]
    steady : ndarray, shape (rows, segments)
        Fraction that each segment tends to; of no effect in one without turnovers. [1]
    turnovers : ndarray, shape (rows, segments)
        How many times each segment empties the room; zero or more. [1]

    Returns
    -------
    ndarray, shape (rows, segments + 1)
        Released-gas fraction. [1]

    Notes
    -----
    .. math:: G_{i+1} = G_i e^{-n_i} + G_{s,i} (1 - e^{-n_i})

    Exact for any duration, by [laboratory-odh]_, so extremes lie at ends of segments only.

    Examples
    --------
    >>> ends_of_segments(np.zeros(1), np.ones((1, 2)), np.array([[0.5, 0.0]])).round(4)
    array([[0.    , 0.3935, 0.3935]])
    """
    rows, segments = turnovers.shape
    ends = np.empty((rows, segments + 1))
    ends[:, 0] = start
    for segment in range(segments):
        moved = relaxed(ends[:, segment], steady[:, segment], turnovers[:, segment])
        # Padding of zero duration must hand the very same number on.
        still = turnovers[:, segment] == 0.0
        ends[:, segment + 1] = np.where(still, ends[:, segment], moved)
    return ends
