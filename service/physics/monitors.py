"""By how much the reading of a gas detector is late, or wrong (methods M3 and M4)."""

from numpy.typing import ArrayLike

from service.physics.arrays import Floats, finite, fraction, non_negative, positive


def lag_of_reading(constant: ArrayLike, *, delay: ArrayLike = 0.0) -> Floats:
    r"""Time by which a reading trails a fraction that rises or falls steadily.

    Parameters
    ----------
    constant : array_like, shape (...)
        Time constant of the sensor; above zero. [s]
    delay : array_like, shape (...), default 0
        Time that the sample takes to reach the sensor; zero or more. [s]

    Returns
    -------
    ndarray, shape (...)
        Lag, broadcast over the inputs. [s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: t_{lag} = t_d + \tau

    What is left of a first-order lag on a ramp after a few time constants; before that it is less.
    The reading is that of `service.physics.detector`, for the slopes of [laboratory-odh]_.

    Examples
    --------
    >>> lag_of_reading([13.0288], delay=10.0)
    array([23.0288])
    """
    return non_negative("delay", delay) + positive("constant", constant)


def error_of_reading(slope: ArrayLike, constant: ArrayLike, *, delay: ArrayLike = 0.0) -> Floats:
    r"""By how much a reading differs from a fraction that rises or falls steadily.

    Parameters
    ----------
    slope : array_like, shape (...)
        Change of the fraction per second, negative where it falls. [1/s]
    constant : array_like, shape (...)
        Time constant of the sensor; above zero. [s]
    delay : array_like, shape (...), default 0
        Time that the sample takes to reach the sensor; zero or more. [s]

    Returns
    -------
    ndarray, shape (...)
        Reading less the fraction, broadcast over the inputs; positive where the fraction falls. [1]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: y - C = -\dot C \, (t_d + \tau)

    In a room without ventilation oxygen falls fastest at the start, by R C0/V [laboratory-odh]_, so
    that the reading is never further from the truth than with that slope.

    Examples
    --------
    >>> error_of_reading([-1e-4], 13.0288, delay=10.0).round(6)
    array([0.002303])
    """
    return -finite("slope", slope) * lag_of_reading(constant, delay=delay)


def reading_of_cell_zeroed_elsewhere(
    oxygen: ArrayLike, station_pressure: ArrayLike, zeroed_pressure: ArrayLike
) -> Floats:
    r"""What an electrochemical oxygen cell reads that was zeroed at another pressure.

    Parameters
    ----------
    oxygen : array_like, shape (...)
        Oxygen fraction around the cell, 0 to 1. [1]
    station_pressure : array_like, shape (...)
        Absolute pressure where the cell is; above zero. [Pa]
    zeroed_pressure : array_like, shape (...)
        Absolute pressure where it was zeroed on clean air; above zero. [Pa]

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
    .. math:: y = C \, p / p_{zero}

    Such a cell gives a current by the partial pressure of oxygen, which is the fraction times the
    pressure by Dalton's law [ideal-gas]_. Carried up it reads too low and alarms in clean air;
    carried down it reads too high, the dangerous side.

    Examples
    --------
    >>> reading_of_cell_zeroed_elsewhere([0.2095], 84556.0, 101325.0).round(4)
    array([0.1748])
    """
    partial = fraction("oxygen", oxygen) * positive("station_pressure", station_pressure)
    return partial / positive("zeroed_pressure", zeroed_pressure)
