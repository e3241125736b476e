"""Ambient air: pressure with height, oxygen, water, and the marks oxygen is held against."""

import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import Floats, between, fraction, positive
from service.physics.constants import (
    ATMOSPHERE_EXPONENT,
    ATMOSPHERE_HIGHEST,
    ATMOSPHERE_LAPSE,
    ATMOSPHERE_LOWEST,
    ATMOSPHERE_TEMPERATURE,
    OXYGEN_IN_AIR,
    STANDARD_PRESSURE,
    ZERO_CELSIUS,
)

# The Magnus form as fitted by Alduchov and Eskridge over -40 to 50 degrees Celsius.
_MAGNUS_PRESSURE = 610.94  # [Pa]
_MAGNUS_FACTOR = 17.625  # [1]
_MAGNUS_TEMPERATURE = 243.04  # [K]
_MAGNUS_LOWEST = ZERO_CELSIUS - 40.0  # [K]
_MAGNUS_HIGHEST = ZERO_CELSIUS + 50.0  # [K]


def station_pressure(elevation: ArrayLike) -> Floats:
    r"""Air pressure at a height above sea level in the standard atmosphere.

    Parameters
    ----------
    elevation : array_like, shape (...)
        Geopotential height, -5000 to 11 000; geometric height differs by 0.05 % at 3000 m. [m]

    Returns
    -------
    ndarray, shape (...)
        Pressure. [Pa]

    Raises
    ------
    OutOfRange
        The elevation is outside the troposphere or not a number.

    Notes
    -----
    .. math:: p = p_0 (1 - L h / T_0)^{g M / (R^* L)}

    ISO 2533 [iso-2533]_ prints the same with rounded numbers,
    :math:`p_0 (1 - 2.25577 \cdot 10^{-5} h)^{5.25588}`; up to 3000 m both agree to 4e-7. Weather
    moves the pressure by 3 % either way, so a barometer on site wins over this.

    Examples
    --------
    >>> station_pressure([0.0, 1500.0]).round(0)
    array([101325.,  84556.])
    """
    height = between("elevation", elevation, ATMOSPHERE_LOWEST, ATMOSPHERE_HIGHEST)
    cooling = 1.0 - ATMOSPHERE_LAPSE * height / ATMOSPHERE_TEMPERATURE
    return STANDARD_PRESSURE * cooling**ATMOSPHERE_EXPONENT


def oxygen_partial_pressure(oxygen: ArrayLike, pressure: ArrayLike) -> Floats:
    r"""Partial pressure of oxygen in a gas.

    Parameters
    ----------
    oxygen : array_like, shape (...)
        Oxygen fraction by volume, 0 to 1. [1]
    pressure : array_like, shape (...)
        Absolute pressure; above zero. [Pa]

    Returns
    -------
    ndarray, shape (...)
        Partial pressure, broadcast over the inputs. [Pa]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: p_{O_2} = C p

    Dalton's law for an ideal mixture [ideal-gas]_.

    Examples
    --------
    >>> oxygen_partial_pressure([0.2], 101325.0)
    array([20265.])
    """
    return fraction("oxygen", oxygen) * positive("pressure", pressure)


def oxygen_at_partial_pressure(partial_pressure: ArrayLike, pressure: ArrayLike) -> Floats:
    r"""Oxygen fraction at which air of a pressure has a partial pressure of oxygen.

    Parameters
    ----------
    partial_pressure : array_like, shape (...)
        Partial pressure of oxygen; above zero. [Pa]
    pressure : array_like, shape (...)
        Absolute pressure; above zero. [Pa]

    Returns
    -------
    ndarray, shape (...)
        Fraction, broadcast over the inputs; above 1 where no gas of that pressure has so much. [1]

    Raises
    ------
    OutOfRange
        An input is zero, negative or not a number.

    Notes
    -----
    .. math:: C = p_{O_2} / p

    Dalton's law for an ideal mixture [ideal-gas]_.

    Examples
    --------
    >>> oxygen_at_partial_pressure([18_000.0], 90_000.0)
    array([0.2])
    """
    return positive("partial_pressure", partial_pressure) / positive("pressure", pressure)


def water_saturation_pressure(temperature: ArrayLike) -> Floats:
    r"""Vapour pressure of water over a flat surface of liquid.

    Parameters
    ----------
    temperature : array_like, shape (...)
        Temperature, 233.15 to 323.15. [K]

    Returns
    -------
    ndarray, shape (...)
        Vapour pressure. [Pa]

    Raises
    ------
    OutOfRange
        The temperature is outside the range of the fit or not a number.

    Notes
    -----
    .. math:: p_{ws} = 610.94 \exp\frac{17.625\, t}{t + 243.04}

    with t in degrees Celsius: the Magnus form of [alduchov-eskridge]_.

    Examples
    --------
    >>> water_saturation_pressure([293.15]).round(0)
    array([2333.])
    """
    celsius = between("temperature", temperature, _MAGNUS_LOWEST, _MAGNUS_HIGHEST) - ZERO_CELSIUS
    return _MAGNUS_PRESSURE * np.exp(_MAGNUS_FACTOR * celsius / (celsius + _MAGNUS_TEMPERATURE))


def oxygen_in_moist_air(
    temperature: ArrayLike,
    relative_humidity: ArrayLike,
    *,
    pressure: ArrayLike,
    oxygen_in_dry_air: ArrayLike = OXYGEN_IN_AIR,
) -> Floats:
    r"""Oxygen fraction of air with water vapour in it.

    Parameters
    ----------
    temperature : array_like, shape (...)
        Temperature of the air, 233.15 to 323.15. [K]
    relative_humidity : array_like, shape (...)
        Relative humidity, 0 to 1. [1]
    pressure : array_like, shape (...)
        Absolute pressure; above zero. [Pa]
    oxygen_in_dry_air : array_like, shape (...), default 0.2095
        Oxygen fraction of the air without its water. [1]

    Returns
    -------
    ndarray, shape (...)
        Oxygen fraction, broadcast over the inputs; 0 where water alone would reach the pressure.
        [1]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: C = C_0 (1 - \varphi p_{ws} / p)

    with the vapour pressure of [alduchov-eskridge]_. An audit leaves humidity off, since meters are
    set on ambient air; this explains a meter that reads 20.2 % in a humid store without a leak.

    Examples
    --------
    >>> oxygen_in_moist_air([303.15], 0.9, pressure=101325.0).round(4)
    array([0.2016])
    """
    water = fraction("relative_humidity", relative_humidity) * water_saturation_pressure(
        temperature
    )
    dry_share = np.clip(1.0 - water / positive("pressure", pressure), 0.0, None)
    return fraction("oxygen_in_dry_air", oxygen_in_dry_air) * dry_share


def oxygen_danger_mark(
    pressure: ArrayLike, *, deficient: ArrayLike, danger: ArrayLike, danger_pressure: ArrayLike
) -> Floats:
    r"""Oxygen fraction below which air of a pressure is dangerous.

    Parameters
    ----------
    pressure : array_like, shape (...)
        Absolute pressure of the site; above zero. [Pa]
    deficient : array_like, shape (...)
        Fraction below which air counts as oxygen-deficient at any height. [1]
    danger : array_like, shape (...)
        Fraction that is dangerous at sea level. [1]
    danger_pressure : array_like, shape (...)
        Partial pressure of oxygen that is dangerous at any height; above zero. [Pa]

    Returns
    -------
    ndarray, shape (...)
        Danger mark, broadcast over the inputs; never above the deficient mark. [1]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: C_d = \min(C_1,\; \max(C_2,\; p_2 / p))

    Oxygen acts by its partial pressure, of which [laboratory-odh]_ prints 135 mmHg, but clean air
    has less than that from 1370 m on; so the mark rises with height as far as the legal fraction
    [osha-1910-146]_ and no farther.

    Examples
    --------
    >>> oxygen_danger_mark(
    ...     [101325.0, 70108.5], deficient=0.195, danger=0.18, danger_pressure=18_000.0
    ... )
    array([0.18 , 0.195])
    """
    by_pressure = oxygen_at_partial_pressure(positive("danger_pressure", danger_pressure), pressure)
    wanted = np.maximum(fraction("danger", danger), by_pressure)
    return np.minimum(fraction("deficient", deficient), wanted)


def oxygen_critical_mark(
    pressure: ArrayLike,
    *,
    danger_mark: ArrayLike,
    critical: ArrayLike,
    critical_pressure: ArrayLike,
) -> Floats:
    r"""Oxygen fraction below which air of a pressure leaves no time for self-rescue.

    Parameters
    ----------
    pressure : array_like, shape (...)
        Absolute pressure of the site; above zero. [Pa]
    danger_mark : array_like, shape (...)
        Danger mark at that pressure, by `oxygen_danger_mark`. [1]
    critical : array_like, shape (...)
        Fraction that is critical at sea level. [1]
    critical_pressure : array_like, shape (...)
        Partial pressure of oxygen that is critical at any height; above zero. [Pa]

    Returns
    -------
    ndarray, shape (...)
        Critical mark, broadcast over the inputs; never above the danger mark. [1]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: C_c = \min(C_d,\; \max(C_3,\; p_3 / p))

    By the physiological tables of [gas-industry-guide]_: at 10 % of sea-level air a person loses
    consciousness within minutes.

    Examples
    --------
    >>> oxygen_critical_mark(
    ...     [101325.0, 70108.5],
    ...     danger_mark=[0.18, 0.195],
    ...     critical=0.10,
    ...     critical_pressure=10_130.0,
    ... ).round(4)
    array([0.1   , 0.1445])
    """
    by_pressure = oxygen_at_partial_pressure(
        positive("critical_pressure", critical_pressure), pressure
    )
    wanted = np.maximum(fraction("critical", critical), by_pressure)
    return np.minimum(fraction("danger_mark", danger_mark), wanted)
