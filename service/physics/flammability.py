"""Lower limits of flammable gases together (methods E3)."""

import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import Floats, fraction, non_negative, positive, quotient
from service.physics.errors import OutOfRange


def mixture_lower_limit(fractions: ArrayLike, lower_limits: ArrayLike, axis: int = -1) -> Floats:
    r"""Lower flammable limit of several flammable gases together.

    Parameters
    ----------
    fractions : array_like, shape (..., gases, ...)
        How much of each flammable gas there is, in any one unit; zero or more. [1]
    lower_limits : array_like, shape (..., gases, ...)
        Lower limit of each in air, by volume, above 0 to 1; broadcast against the fractions. [1]
    axis : int, default -1
        The axis along which the gases lie.

    Returns
    -------
    ndarray, shape (...)
        Limit of all flammable gases together, by volume in air; the lowest of the limits where
        there is none of them. [1]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: L = \frac{\sum x_i}{\sum x_i / L_i}

    The rule of [le-chatelier]_. It fits gases that burn alike, hydrogen, methane and the other
    paraffins among them; inert gas and air are no part of the sum.

    Examples
    --------
    >>> mixture_lower_limit([[0.5, 0.5], [0.0, 1.0]], [0.04, 0.044]).round(4)
    array([0.0419, 0.044 ])
    """
    amounts, limits = np.broadcast_arrays(
        non_negative("fractions", fractions), _limits(lower_limits)
    )
    return quotient(
        amounts.sum(axis=axis),
        (amounts / limits).sum(axis=axis),
        where_zero=limits.min(axis=axis),
    )


def share_of_lower_limit(fractions: ArrayLike, lower_limits: ArrayLike, axis: int = -1) -> Floats:
    r"""How near the air of a room is to burning, as a share of the lower flammable limit.

    Parameters
    ----------
    fractions : array_like, shape (..., gases, ...)
        Fraction of each flammable gas in the air, by volume, 0 to 1. [1]
    lower_limits : array_like, shape (..., gases, ...)
        Lower limit of each in air, by volume, above 0 to 1; broadcast against the fractions. [1]
    axis : int, default -1
        The axis along which the gases lie.

    Returns
    -------
    ndarray, shape (...)
        Share of the limit; 1 is at the limit of the mixture, whatever it is made of. [1]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: s = \sum x_i / L_i = \sum x_i / L

    The rule of [le-chatelier]_; of one gas alone it is its fraction by its own limit. Too rich a
    mixture does not burn, but it passes the range in which it does: no upper limit is asked for.

    Examples
    --------
    >>> share_of_lower_limit([[0.01, 0.0], [0.01, 0.011]], [0.04, 0.044])
    array([0.25, 0.5 ])
    """
    shares: Floats = (fraction("fractions", fractions) / _limits(lower_limits)).sum(axis=axis)
    return shares


def _limits(lower_limits: ArrayLike) -> Floats:
    limits = positive("lower_limits", lower_limits)
    if not bool(np.all(limits <= 1.0)):
        raise OutOfRange("lower_limits", "above 0 and at most 1")
    return limits
