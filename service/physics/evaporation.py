"""How fast liquid and dry ice become gas (methods G1 and G8)."""

from numpy.typing import ArrayLike

from service.physics.arrays import Floats, fraction, non_negative, positive
from service.physics.constants import SECONDS_PER_DAY, SECONDS_PER_HOUR
from service.physics.gas import gas_volume_of_mass


def evaporation_mass_rate(liquid_volume_per_day: ArrayLike, density: ArrayLike) -> Floats:
    r"""Mass that evaporates per second, from the liquid lost per day.

    Parameters
    ----------
    liquid_volume_per_day : array_like, shape (...)
        Liquid lost per day; zero or more. [m3/d]
    density : array_like, shape (...)
        Density of the liquid at its normal boiling point; above zero. [kg/m3]

    Returns
    -------
    ndarray, shape (...)
        Mass rate, broadcast over the inputs. [kg/s]

    Raises
    ------
    OutOfRange
        An input is below its range or not a number.

    Notes
    -----
    .. math:: \dot m = \dot V_l \rho_l / 86400

    A vessel's loss is its capacity times the daily share on its data plate; see
    [gas-industry-guide]_.

    Examples
    --------
    >>> evaporation_mass_rate([0.00345], 806.08).round(9)
    array([3.2187e-05])
    """
    volume = non_negative("liquid_volume_per_day", liquid_volume_per_day)
    return volume * positive("density", density) / SECONDS_PER_DAY


def release_rate(
    mass_rate: ArrayLike, molar_mass: ArrayLike, *, pressure: ArrayLike, temperature: ArrayLike
) -> Floats:
    r"""Volume of gas released per second, at the pressure and temperature of the room.

    Parameters
    ----------
    mass_rate : array_like, shape (...)
        Mass that becomes gas per second; zero or more. [kg/s]
    molar_mass : array_like, shape (...)
        Molar mass of the gas; above zero. [kg/mol]
    pressure : array_like, shape (...)
        Absolute pressure in the room; above zero. [Pa]
    temperature : array_like, shape (...)
        Temperature of the room; above zero. [K]

    Returns
    -------
    ndarray, shape (...)
        Volume rate, broadcast over the inputs. [m3/s]

    Raises
    ------
    OutOfRange
        An input is below its range or not a number.

    Notes
    -----
    .. math:: R = \dot m / \rho_g

    Gas is counted as warm [ideal-gas]_: at the mouth of the vessel its volume is smaller (helium by
    about 100 times), so this is the bound.

    Examples
    --------
    >>> release_rate([3.2187e-05], 0.0280135, pressure=101325.0, temperature=293.15).round(8)
    array([2.764e-05])
    """
    rate = non_negative("mass_rate", mass_rate)
    return gas_volume_of_mass(rate, molar_mass, pressure=pressure, temperature=temperature)


def dry_ice_mass_rate(mass: ArrayLike, share_per_hour: ArrayLike) -> Floats:
    r"""Mass of dry ice that sublimes per second.

    Parameters
    ----------
    mass : array_like, shape (...)
        Mass of dry ice; zero or more. [kg]
    share_per_hour : array_like, shape (...)
        Share of that mass that sublimes in an hour, 0 to 1. [1/h]

    Returns
    -------
    ndarray, shape (...)
        Mass rate, broadcast over the inputs. [kg/s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: \dot m = f m / 3600

    Small packages lose about 0.02 per hour [dry-ice-packages]_; on a floor the heat of concrete
    takes 0.3. Dry ice is never gone at once.

    Examples
    --------
    >>> dry_ice_mass_rate([50.0], 0.01).round(8)
    array([0.00013889])
    """
    share = fraction("share_per_hour", share_per_hour)
    return non_negative("mass", mass) * share / SECONDS_PER_HOUR
