"""Density and volume of gas at the pressure and temperature of a room (methods A3)."""

from numpy.typing import ArrayLike

from service.physics.arrays import Floats, non_negative, positive
from service.physics.constants import GAS_CONSTANT


def gas_density(molar_mass: ArrayLike, *, pressure: ArrayLike, temperature: ArrayLike) -> Floats:
    r"""Density of a gas at the pressure and temperature of the room.

    Parameters
    ----------
    molar_mass : array_like, shape (...)
        Molar mass of the gas; above zero. [kg/mol]
    pressure : array_like, shape (...)
        Absolute pressure in the room; above zero. [Pa]
    temperature : array_like, shape (...)
        Temperature of the room; above zero. [K]

    Returns
    -------
    ndarray, shape (...)
        Density, broadcast over the inputs. [kg/m3]

    Raises
    ------
    OutOfRange
        An input is zero, negative or not a number.

    Notes
    -----
    .. math:: \rho = p M / (R T)

    The ideal gas [ideal-gas]_. From 0 to 3000 m and 5 to 40 degrees Celsius it is within 0.1 % of
    the reference equations for nitrogen, oxygen, argon, helium, hydrogen, neon and air, 0.3 % for
    methane and krypton, 0.7 % for carbon dioxide, nitrous oxide and xenon, and too light, which is
    the cautious side, for all but helium, hydrogen and neon (0.06 %).

    Examples
    --------
    >>> gas_density([0.0280135], pressure=101325.0, temperature=293.15).round(4)
    array([1.1646])
    """
    mass = positive("molar_mass", molar_mass)
    return (
        positive("pressure", pressure)
        * mass
        / (GAS_CONSTANT * positive("temperature", temperature))
    )


def gas_volume_of_mass(
    mass: ArrayLike, molar_mass: ArrayLike, *, pressure: ArrayLike, temperature: ArrayLike
) -> Floats:
    r"""Volume that a mass of gas takes at the pressure and temperature of the room.

    Parameters
    ----------
    mass : array_like, shape (...)
        Mass that becomes gas; zero or more. [kg]
    molar_mass : array_like, shape (...)
        Molar mass of the gas; above zero. [kg/mol]
    pressure : array_like, shape (...)
        Absolute pressure in the room; above zero. [Pa]
    temperature : array_like, shape (...)
        Temperature of the room; above zero. [K]

    Returns
    -------
    ndarray, shape (...)
        Volume, broadcast over the inputs. [m3]

    Raises
    ------
    OutOfRange
        An input is below its range or not a number.

    Notes
    -----
    .. math:: V_g = m R T / (p M)

    See [ideal-gas]_. The same formula turns a mass rate into a volume rate.

    Examples
    --------
    >>> gas_volume_of_mass([1.0], 0.0440098, pressure=101325.0, temperature=293.15).round(4)
    array([0.5466])
    """
    return non_negative("mass", mass) / gas_density(
        molar_mass, pressure=pressure, temperature=temperature
    )


def gas_volume_of_liquid(
    liquid_volume: ArrayLike,
    liquid_density: ArrayLike,
    molar_mass: ArrayLike,
    *,
    pressure: ArrayLike,
    temperature: ArrayLike,
) -> Floats:
    r"""Volume of gas that a volume of liquid becomes in the room.

    Parameters
    ----------
    liquid_volume : array_like, shape (...)
        Volume of liquid; zero or more. [m3]
    liquid_density : array_like, shape (...)
        Density of the liquid at its normal boiling point; above zero. [kg/m3]
    molar_mass : array_like, shape (...)
        Molar mass of the gas; above zero. [kg/mol]
    pressure : array_like, shape (...)
        Absolute pressure in the room; above zero. [Pa]
    temperature : array_like, shape (...)
        Temperature of the room; above zero. [K]

    Returns
    -------
    ndarray, shape (...)
        Volume of gas, broadcast over the inputs. [m3]

    Raises
    ------
    OutOfRange
        An input is below its range or not a number.

    Notes
    -----
    .. math:: V_g = V_l \rho_l R T / (p M)

    See [ideal-gas]_. No ratio is stored: between 15 and 21 degrees Celsius alone it moves by 2 %,
    and at 1500 m a litre becomes a fifth more gas than at sea level. Liquid saturated at a raised
    pressure is lighter (nitrogen at 4 bar absolute by 8 %), so this overstates it: the cautious
    side.

    Examples
    --------
    >>> gas_volume_of_liquid(
    ...     [0.001], 806.08, 0.0280135, pressure=101325.0, temperature=293.15
    ... ).round(4)
    array([0.6922])
    """
    mass = non_negative("liquid_volume", liquid_volume) * positive("liquid_density", liquid_density)
    return gas_volume_of_mass(mass, molar_mass, pressure=pressure, temperature=temperature)
