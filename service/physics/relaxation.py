"""How a well-mixed room moves towards its steady state: the curve, its mean and its inverse.

For values already checked, so that a course of many segments is not checked at each.
"""

import numpy as np

from service.physics.arrays import Floats, quotient

# exp(-300) is 5e-131: nothing is left of any start, and its products are still normal doubles.
LONGEST = 300.0
# A fraction smaller than this is no gas at all, not one molecule in any room.
SMALLEST = 1e-100


def relaxed(start: Floats, steady: Floats, turnovers: Floats) -> Floats:
    r"""Fraction on its way from a start to a steady state.

    Parameters
    ----------
    start : ndarray, shape (...)
        Fraction at the start. [1]
    steady : ndarray, shape (...)
        Fraction it tends to. [1]
    turnovers : ndarray, shape (...)
        How many times the room has been emptied; zero or more. [1]

    Returns
    -------
    ndarray, shape (...)
        Fraction, between the two. [1]

    Notes
    -----
    .. math:: G = G_0 e^{-n} + G_s (1 - e^{-n})

    The closed form of [laboratory-odh]_ as a sum of terms of one sign, so that neither a nearly
    clean room nor a nearly steady one loses figures.

    Examples
    --------
    >>> relaxed(np.array([1.0]), np.array([0.0]), np.array([0.0]))
    array([1.])
    """
    exponent = np.minimum(turnovers, LONGEST)
    kept = np.where(np.abs(start) < SMALLEST, 0.0, start)
    sought = np.where(np.abs(steady) < SMALLEST, 0.0, steady)
    mixed = kept * np.exp(-exponent) - sought * np.expm1(-exponent)
    # Rounding may step over the steady state by one unit in the last place.
    within: Floats = np.clip(mixed, np.minimum(kept, sought), np.maximum(kept, sought))
    return within


def kept_share(turnovers: Floats) -> Floats:
    r"""Share of the start in the mean of a relaxation.

    Parameters
    ----------
    turnovers : ndarray, shape (...)
        How many times the room has been emptied; zero or more. [1]

    Returns
    -------
    ndarray, shape (...)
        Share, 1 at the start and 0 in the end. [1]

    Notes
    -----
    .. math:: (1 - e^{-n}) / n

    From the integral of the closed form of [laboratory-odh]_. Not taken from `gained_share`, since
    the difference would lose figures in a room long purged.

    Examples
    --------
    >>> kept_share(np.array([0.0, 1.0])).round(6)
    array([1.      , 0.632121])
    """
    lost = -np.expm1(-np.minimum(turnovers, LONGEST))
    return quotient(lost, turnovers, where_zero=1.0)


def gained_share(turnovers: Floats) -> Floats:
    r"""Share of the steady state in the mean of a relaxation.

    Parameters
    ----------
    turnovers : ndarray, shape (...)
        How many times the room has been emptied; zero or more. [1]

    Returns
    -------
    ndarray, shape (...)
        Share, 0 at the start and 1 in the end. [1]

    Notes
    -----
    .. math:: 1 - (1 - e^{-n}) / n

    From the integral of the closed form of [laboratory-odh]_; below n = 0.1 by its power series,
    since the difference would lose figures there.

    Examples
    --------
    >>> gained_share(np.array([0.0, 1.0])).round(6)
    array([0.      , 0.367879])
    """
    small = np.minimum(turnovers, 0.1)
    series = np.zeros_like(small)
    for order in range(9, 0, -1):
        series = small / (order + 1) * (1.0 - series)
    large = np.maximum(turnovers, 0.1)
    return np.where(turnovers < 0.1, series, 1.0 - kept_share(large))


def time_between(start: Floats, target: Floats, steady: Floats, rate: Floats) -> Floats:
    r"""Time a relaxation takes to a target on its way.

    Parameters
    ----------
    start, target, steady : ndarray, shape (...)
        Fraction at the start, to reach, and tended to. [1]
    rate : ndarray, shape (...)
        Turnovers per second; zero or more. [1/s]

    Returns
    -------
    ndarray, shape (...)
        Time; not-a-number where the target does not lie strictly between start and steady state.
        [s]

    Notes
    -----
    .. math:: t = \frac{1}{k} \ln\left(1 + \frac{G_t - G_0}{G_s - G_t}\right)

    The inverse of [laboratory-odh]_, written so that a target close to the start keeps its figures.

    Examples
    --------
    >>> time_between(np.zeros(1), np.array([0.5]), np.ones(1), np.array([0.001])).round(3)
    array([693.147])
    """
    way, rest, flow = np.broadcast_arrays(target - start, steady - target, rate)
    passed = (np.sign(way) * np.sign(rest) > 0.0) & (flow > 0.0)
    ratio = np.divide(way, rest, out=np.zeros(way.shape), where=passed)
    time = np.full(way.shape, np.nan)
    np.divide(np.log1p(ratio), flow, out=time, where=passed)
    return time
