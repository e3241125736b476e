"""Whether people are out before a room is dangerous (methods M2)."""

import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import Floats, Mask, non_negative, positive
from service.physics.errors import OutOfRange


def time_to_leave(react: ArrayLike, distance: ArrayLike, speed: ArrayLike) -> Floats:
    r"""Time from an alarm until people are out.

    Parameters
    ----------
    react : array_like, shape (...)
        Time to take in an alarm and set off; zero or more. [s]
    distance : array_like, shape (...)
        Way to the exit; zero or more. [m]
    speed : array_like, shape (...)
        Speed of walking; above zero. [m/s]

    Returns
    -------
    ndarray, shape (...)
        Time, broadcast over the inputs. [s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: t = t_{react} + d / v

    30 s to react and 1 m/s, or 0.5 m/s impaired, are [common-practice]_.

    Examples
    --------
    >>> time_to_leave(30.0, [15.0, 0.0], 1.0)
    array([45., 30.])
    """
    walk = non_negative("distance", distance) / positive("speed", speed)
    return non_negative("react", react) + walk


def egress_margin(
    danger_time: ArrayLike,
    alarm_time: ArrayLike,
    *,
    react: ArrayLike,
    distance: ArrayLike,
    speed: ArrayLike,
) -> Floats:
    r"""Time left between people being out and the room being dangerous.

    Parameters
    ----------
    danger_time : array_like, shape (...)
        When the room itself becomes dangerous; infinite where it never does. [s]
    alarm_time : array_like, shape (...)
        When the alarm sounds, delays included; infinite where it never does. [s]
    react : array_like, shape (...)
        Time to take in an alarm and set off; zero or more. [s]
    distance : array_like, shape (...)
        Way to the exit; zero or more. [m]
    speed : array_like, shape (...)
        Speed of walking; above zero. [m/s]

    Returns
    -------
    ndarray, shape (...)
        Margin, broadcast over the inputs; negative where people are still inside. Infinite where
        the room never becomes dangerous, and minus infinity where it does without an alarm. [s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: m = t_{danger} - (t_{alarm} + t_{react} + d / v)

    Danger is that of the mean of the room, not of what the detector reads; both follow from the
    balance of [laboratory-odh]_. Who stands nearer the release than the detector has less.

    Examples
    --------
    >>> egress_margin([487.0, 60.0], 193.14, react=30.0, distance=15.0, speed=1.0).round(2)
    array([ 248.86, -178.14])
    """
    danger, alarm = np.broadcast_arrays(
        _time("danger_time", danger_time), _time("alarm_time", alarm_time)
    )
    out = time_to_leave(react, distance, speed)
    sounds: Mask = np.isfinite(alarm)
    margin = np.where(sounds, danger - np.where(sounds, alarm, 0.0) - out, -np.inf)
    return np.where(np.isfinite(danger), margin, np.inf)


def _time(name: str, value: ArrayLike) -> Floats:
    """A time that may be never, which is infinite and not not-a-number."""
    time = np.asarray(value, dtype=np.float64)
    if not bool(np.all(time >= 0.0)):
        raise OutOfRange(name, "0 or more, infinite for never")
    return time
