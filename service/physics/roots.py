"""Roots of monotone functions, for many rows at once."""

from collections.abc import Callable
from typing import TypeAlias

import numpy as np

from service.physics.arrays import Floats, Integers

# Given indices of rows and one argument for each: what is too much there. It never rises in the
# argument, and is zero or less where the argument is enough.
Excess: TypeAlias = Callable[[Integers, Floats], Floats]

_RELATIVE_WIDTH = 1e-11
# Some ten steps are usual; bisection alone would need a hundred for any bracket met here.
_MOST_STEPS = 500


def smallest_enough(excess: Excess, upper: Floats) -> Floats:
    r"""Smallest argument, row by row, at which a falling function is zero or less.

    Parameters
    ----------
    excess : callable
        Given indices of rows and an argument for each, returns the function's values there;
        continuous and never rising in the argument.
    upper : ndarray, shape (rows,)
        An argument that is enough.

    Returns
    -------
    ndarray, shape (rows,)
        The smallest argument from 0 to `upper` that is enough, to 1e-11 of itself and from the
        side that is enough; 0 where 0 is.

    Raises
    ------
    ArithmeticError
        The function jumps at zero, so that no smallest argument is enough.

    Notes
    -----
    The bracketing method of [chandrupatla]_: inverse quadratic interpolation where it is safe, and
    bisection where it is not, as on a stretch where the function is flat.

    Examples
    --------
    >>> smallest_enough(lambda rows, x: 2.0 - x**3, np.array([2.0, 5.0])).round(9)
    array([1.25992105, 1.25992105])
    """
    answer = np.zeros_like(upper)
    at_zero = excess(np.arange(upper.size), answer)
    # Asked for what is enough, so that not-a-number is not.
    rows = np.flatnonzero(~(at_zero <= 0.0))
    # The latest point, the one across the root from it, and the one before; zero and upper begin.
    # Rounding may leave upper itself a hair short, so it is taken at its word.
    at_upper = np.minimum(excess(rows, upper[rows]), 0.0)
    points = np.stack([upper[rows], answer[rows], answer[rows]])
    values = np.stack([at_upper, at_zero[rows], at_zero[rows]])
    share = np.full(rows.size, 0.5)
    for _ in range(_MOST_STEPS):
        if rows.size == 0:
            return answer
        points, values = _narrowed(excess, rows, points, values, share)
        width = np.abs(points[1] - points[0])
        allowed = _RELATIVE_WIDTH * np.maximum(points[0], points[1])
        done = width <= allowed
        answer[rows[done]] = np.where(values[0] <= 0.0, points[0], points[1])[done]
        going = ~done
        rows, points, values = rows[going], points[:, going], values[:, going]
        least_share = 0.5 * allowed[going] / width[going]
        share = np.clip(_next_share(points, values), least_share, 1.0 - least_share)
    raise ArithmeticError("a function that should be continuous jumps at zero")


def _narrowed(
    excess: Excess, rows: Integers, points: Floats, values: Floats, share: Floats
) -> tuple[Floats, Floats]:
    latest = points[0] + share * (points[1] - points[0])
    found = excess(rows, latest)
    same_side = (found <= 0.0) == (values[0] <= 0.0)
    across, before = np.where(same_side, points[[1, 0]], points[:2])
    value_across, value_before = np.where(same_side, values[[1, 0]], values[:2])
    return np.stack([latest, across, before]), np.stack([found, value_across, value_before])


def _next_share(points: Floats, values: Floats) -> Floats:
    """Share of the way from the latest point to the one across at which to look next."""
    (a, b, c), (at_a, at_b, at_c) = points, values
    position = (a - b) / (c - b)
    height = (at_a - at_b) / (at_c - at_b)
    safe = (height**2 < position) & ((1.0 - height) ** 2 < 1.0 - position)
    share = np.full(position.size, 0.5)
    (a, b, c), (at_a, at_b, at_c) = points[:, safe], values[:, safe]
    share[safe] = at_a / (at_b - at_a) * at_c / (at_b - at_c) + (c - a) / (b - a) * at_a / (
        at_c - at_a
    ) * at_b / (at_c - at_b)
    return share
