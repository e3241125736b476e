"""The array type, and the checks at the door of a formula."""

from typing import TypeAlias

import numpy as np
import numpy.typing as npt
from numpy.typing import ArrayLike

from service.physics.errors import OutOfRange

Floats: TypeAlias = npt.NDArray[np.float64]
Integers: TypeAlias = npt.NDArray[np.int64]
Mask: TypeAlias = npt.NDArray[np.bool_]

SIGNIFICANT_FIGURES = 10

# Powers of ten are exact in double precision up to 10^22, so a value in this range is
# rounded by one exact scale, and the result is the double nearest to the short decimal.
_SMALLEST_SCALED = 1e-12
_LARGEST_SCALED = 1e15


def positive(name: str, value: ArrayLike) -> Floats:
    """Return the value as an array, refused unless it is above zero and finite throughout.

    Parameters
    ----------
    name : str
        Parameter to name in the error.
    value : array_like, shape (...)
        Value to check.

    Returns
    -------
    ndarray, shape (...)
        The value in double precision.

    Raises
    ------
    OutOfRange
        An element is zero, negative, infinite or not a number.

    Examples
    --------
    >>> positive("volume", [1, 2])
    array([1., 2.])
    """
    array = np.asarray(value, dtype=np.float64)
    # Asked for what must hold, not for what must not, so that not-a-number fails.
    return _held(name, array, np.isfinite(array) & (array > 0.0), "above 0 and finite")


def non_negative(name: str, value: ArrayLike) -> Floats:
    """Return the value as an array, refused unless it is zero or more and finite throughout.

    Parameters
    ----------
    name : str
        Parameter to name in the error.
    value : array_like, shape (...)
        Value to check.

    Returns
    -------
    ndarray, shape (...)
        The value in double precision.

    Raises
    ------
    OutOfRange
        An element is negative, infinite or not a number.

    Examples
    --------
    >>> non_negative("release", [0, 2])
    array([0., 2.])
    """
    array = np.asarray(value, dtype=np.float64)
    return _held(name, array, np.isfinite(array) & (array >= 0.0), "0 or more and finite")


def fraction(name: str, value: ArrayLike) -> Floats:
    """Return the value as an array, refused unless it lies from 0 to 1 throughout.

    Parameters
    ----------
    name : str
        Parameter to name in the error.
    value : array_like, shape (...)
        Value to check. [1]

    Returns
    -------
    ndarray, shape (...)
        The value in double precision. [1]

    Raises
    ------
    OutOfRange
        An element is below 0, above 1 or not a number.

    Examples
    --------
    >>> fraction("oxygen", 0.2)
    array(0.2)
    """
    return between(name, value, 0.0, 1.0)


def between(name: str, value: ArrayLike, low: float, high: float) -> Floats:
    """Return the value as an array, refused unless it lies in a closed range throughout.

    Parameters
    ----------
    name : str
        Parameter to name in the error.
    value : array_like, shape (...)
        Value to check.
    low, high : float
        Ends of the range, both allowed.

    Returns
    -------
    ndarray, shape (...)
        The value in double precision.

    Raises
    ------
    OutOfRange
        An element lies outside the range or is not a number.

    Examples
    --------
    >>> between("elevation", 100, -5000.0, 11000.0)
    array(100.)
    """
    array = np.asarray(value, dtype=np.float64)
    return _held(name, array, (array >= low) & (array <= high), f"from {low:g} to {high:g}")


def finite(name: str, value: ArrayLike) -> Floats:
    """Return the value as an array, refused unless it is finite throughout.

    Parameters
    ----------
    name : str
        Parameter to name in the error.
    value : array_like, shape (...)
        Value to check.

    Returns
    -------
    ndarray, shape (...)
        The value in double precision.

    Raises
    ------
    OutOfRange
        An element is infinite or not a number.

    Examples
    --------
    >>> finite("start", -1)
    array(-1.)
    """
    array = np.asarray(value, dtype=np.float64)
    return _held(name, array, np.isfinite(array), "finite")


def _held(name: str, array: Floats, holds: Mask, wanted: str) -> Floats:
    if not holds.all():
        raise OutOfRange(name, wanted)
    return array


def quotient(numerator: ArrayLike, denominator: ArrayLike, *, where_zero: ArrayLike) -> Floats:
    """Divide, with a value of the caller's where the denominator is zero.

    Parameters
    ----------
    numerator, denominator : array_like, shape (...)
        What is divided by what.
    where_zero : array_like, shape (...)
        Answer where the denominator is exactly zero.

    Returns
    -------
    ndarray, shape (...)
        The quotient, broadcast over the inputs.

    Notes
    -----
    No division by zero takes place, so that a run with floating-point errors raised stays quiet.

    Examples
    --------
    >>> quotient([1.0, 1.0], [2.0, 0.0], where_zero=7.0)
    array([0.5, 7. ])
    """
    above, below, instead = np.broadcast_arrays(
        np.asarray(numerator, dtype=np.float64),
        np.asarray(denominator, dtype=np.float64),
        np.asarray(where_zero, dtype=np.float64),
    )
    result = instead.copy()
    np.divide(above, below, out=result, where=below != 0.0)
    return result


def rounded(values: ArrayLike) -> Floats:
    """Return values rounded to ten significant figures.

    Parameters
    ----------
    values : array_like, shape (...)
        What leaves the solver, before anything judges, stores or prints it.

    Returns
    -------
    ndarray, shape (...)
        The doubles nearest to the ten-figure decimals; zero, infinity and not-a-number as given.

    Notes
    -----
    Rounding twice is rounding once. A value outside 1e-12 to 1e15 goes through its decimal text,
    since no power of ten there is exact.

    Examples
    --------
    >>> rounded([0.123456789012345, 1234567890123.0])
    array([1.23456789e-01, 1.23456789e+12])
    """
    given = np.asarray(values, dtype=np.float64)
    result = np.array(given, ndmin=1)
    size = np.abs(result)
    counted = np.isfinite(result) & (size > 0.0)
    scaled = counted & (size >= _SMALLEST_SCALED) & (size < _LARGEST_SCALED)
    result[scaled] = _rounded_by_scale(result[scaled])
    spelled = counted & ~scaled
    result[spelled] = [float(f"{value:.{SIGNIFICANT_FIGURES - 1}e}") for value in result[spelled]]
    return result.reshape(given.shape)


def _rounded_by_scale(values: Floats) -> Floats:
    places = SIGNIFICANT_FIGURES - 1 - np.floor(np.log10(np.abs(values)))
    up = 10.0 ** np.clip(places, 0.0, None)
    down = 10.0 ** np.clip(-places, 0.0, None)
    whole: Floats = np.rint(values * up / down) / up * down
    return whole


def sum_by_group(values: ArrayLike, groups: npt.ArrayLike, count: int) -> Floats:
    """Sum values by group, in the order of the records.

    Parameters
    ----------
    values : array_like, shape (records,)
        What is summed, such as the gas of each vessel.
    groups : array_like of int, shape (records,)
        Index of the group of each record, such as its room.
    count : int
        Number of groups; a group without a record sums to zero.

    Returns
    -------
    ndarray, shape (count,)
        The sums.

    Raises
    ------
    OutOfRange
        A value is not finite, or an index is not one of a group.

    Notes
    -----
    The one function for sums over a varying number of vessels: floating-point addition depends on
    its order, and two rooms with the same vessels in the same order must get the same sum.

    Examples
    --------
    >>> sum_by_group([1.0, 2.0, 4.0], [0, 2, 0], 3)
    array([5., 0., 2.])
    """
    weights = finite("values", values)
    index = np.asarray(groups, dtype=np.int64)
    if not bool(np.all((index >= 0) & (index < count))):
        raise OutOfRange("groups", f"from 0 to {count - 1}")
    if weights.ndim != 1 or weights.shape != index.shape:
        raise OutOfRange("groups", "one index for each value")
    return np.bincount(index, weights=weights, minlength=count).astype(np.float64)
