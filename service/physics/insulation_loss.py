"""What evaporates when the insulating vacuum of a vessel is lost (methods G3)."""

from typing import Final

import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import Floats, fraction, non_negative, positive
from service.physics.constants import GRAVITY, STEFAN_BOLTZMANN

# Air that rushes in onto surfaces below about 60 K. [W/m2]  Lehmann and Zahn, ICEC 7 (1978).
HELIUM_BARE: Final = 38_000.0
HELIUM_WITH_MULTILAYER: Final = 6_000.0
# Vessels whose wall is warmer: a jacket that leaks, and one torn open to the room. [W/m2]
# Methods G3, (b) and (c): `heat_flux_in_open_air` and `heat_flux_condensing` at 77.36 K, 1 m high.
JACKET_LEAKS: Final = 2_800.0
JACKET_OPEN: Final = 6_900.0

# An inner vessel is longer than it is wide: its surface over that of a sphere. [1]
# Common practice, no source.
LONGER_THAN_A_SPHERE: Final = 1.3


def vessel_surface(liquid_volume: ArrayLike) -> Floats:
    r"""Surface of an inner vessel of which only its volume is known.

    Parameters
    ----------
    liquid_volume : array_like, shape (...)
        Zero or more. [m3]

    Returns
    -------
    ndarray, shape (...)
        Surface. [m2]

    Raises
    ------
    OutOfRange
        A volume is negative or not a number.

    Notes
    -----
    .. math:: A = 1.3 \, (36 \pi V^2)^{1/3}

    The surface of a sphere, and a share more; [common-practice]_.

    Examples
    --------
    >>> vessel_surface([0.1]).round(3)
    array([1.354])
    """
    volume = non_negative("liquid_volume", liquid_volume)
    surface: Floats = LONGER_THAN_A_SPHERE * np.cbrt(36.0 * np.pi * volume**2)
    return surface


def evaporation_by_heat(area: ArrayLike, heat_flux: ArrayLike, latent_heat: ArrayLike) -> Floats:
    r"""Mass that heat through a surface evaporates.

    Parameters
    ----------
    area : array_like, shape (...)
        Of the cold surface; zero or more. [m2]
    heat_flux : array_like, shape (...)
        Zero or more. [W/m2]
    latent_heat : array_like, shape (...)
        Of evaporation; above zero. [J/kg]

    Returns
    -------
    ndarray, shape (...)
        Mass flow. [kg/s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: \dot m = q A / L

    Below the critical pressure. The flux onto helium by [lehmann-zahn]_.

    Examples
    --------
    >>> evaporation_by_heat(1.2, 6000.0, 20_560.0).round(4)
    np.float64(0.3502)
    """
    heat = non_negative("area", area) * non_negative("heat_flux", heat_flux)
    flow: Floats = heat / positive("latent_heat", latent_heat)
    return flow


def heat_flux_in_jacket(
    gap: ArrayLike, temperature_difference: ArrayLike, *, conductivity: ArrayLike
) -> Floats:
    r"""Heat through still air in the jacket of a vessel.

    Parameters
    ----------
    gap : array_like, shape (...)
        Width of the jacket; above zero. [m]
    temperature_difference : array_like, shape (...)
        Across it; zero or more. [K]
    conductivity : array_like, shape (...)
        Of the air at its mean temperature; above zero. [W/(m K)]

    Returns
    -------
    ndarray, shape (...)
        Heat flux. [W/m2]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: q = k \, \Delta T / e

    The kind of calculation of [iso-21013-3]_; the low end of the bracket.

    Examples
    --------
    >>> heat_flux_in_jacket(0.05, 215.8, conductivity=0.01723).round(1)
    np.float64(74.4)
    """
    drop = non_negative("temperature_difference", temperature_difference)
    flux: Floats = positive("conductivity", conductivity) * drop / positive("gap", gap)
    return flux


def heat_flux_in_open_air(
    wall: ArrayLike,
    air: ArrayLike,
    *,
    height: ArrayLike,
    conductivity: ArrayLike,
    viscosity: ArrayLike,
    diffusivity: ArrayLike,
    emissivity: ArrayLike = 0.9,
) -> Floats:
    r"""Heat from the air and the walls of a room onto a bare cold wall that stands upright.

    Parameters
    ----------
    wall, air : array_like, shape (...)
        Temperatures; above zero. [K]
    height : array_like, shape (...)
        Of the wall; above zero. [m]
    conductivity : array_like, shape (...)
        Of air at the mean temperature; above zero. [W/(m K)]
    viscosity, diffusivity : array_like, shape (...)
        Kinematic viscosity and thermal diffusivity of air there; above zero. [m2/s]
    emissivity : array_like, shape (...), default 0.9
        Of the wall, 0 to 1. [1]

    Returns
    -------
    ndarray, shape (...)
        Heat flux. [W/m2]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math::
        \mathrm{Nu} = \left(0.825 + \frac{0.387 \, \mathrm{Ra}^{1/6}}
        {(1 + (0.492/\mathrm{Pr})^{9/16})^{8/27}}\right)^2, \qquad
        q = \frac{k \mathrm{Nu}}{H} \Delta T + \varepsilon \sigma (T_a^4 - T_w^4)

    Natural convection by [churchill-chu]_ and radiation.

    Examples
    --------
    >>> heat_flux_in_open_air(
    ...     77.36,
    ...     293.15,
    ...     height=1.0,
    ...     conductivity=0.01723,
    ...     viscosity=6.56e-6,
    ...     diffusivity=8.97e-6,
    ... ).round(-2)
    np.float64(2800.0)
    """
    cold, warm = positive("wall", wall), positive("air", air)
    tall, carried = positive("height", height), positive("conductivity", conductivity)
    slow, spread = positive("viscosity", viscosity), positive("diffusivity", diffusivity)
    expansion = 2.0 / (cold + warm)
    drop = np.abs(warm - cold)
    rayleigh = GRAVITY * expansion * drop * tall**3 / (slow * spread)
    prandtl = slow / spread
    shape = (1.0 + (0.492 / prandtl) ** (9.0 / 16.0)) ** (8.0 / 27.0)
    nusselt = (0.825 + 0.387 * rayleigh ** (1.0 / 6.0) / shape) ** 2
    radiated = fraction("emissivity", emissivity) * STEFAN_BOLTZMANN * (warm**4 - cold**4)
    flux: Floats = carried * nusselt / tall * (warm - cold) + radiated
    return flux


def heat_flux_condensing(
    wall: ArrayLike,
    dew_point: ArrayLike,
    *,
    height: ArrayLike,
    latent_heat: ArrayLike,
    conductivity: ArrayLike,
    density: ArrayLike,
    viscosity: ArrayLike,
) -> Floats:
    r"""Heat onto a clean bare wall on which air condenses and runs down.

    Parameters
    ----------
    wall, dew_point : array_like, shape (...)
        Temperature of the wall, and dew point of air, the higher of the two; above zero. [K]
    height : array_like, shape (...)
        Of the wall; above zero. [m]
    latent_heat : array_like, shape (...)
        Of air; above zero. [J/kg]
    conductivity, density, viscosity : array_like, shape (...)
        Of liquid air: thermal conductivity [W/(m K)], density [kg/m3] and dynamic viscosity [Pa s].

    Returns
    -------
    ndarray, shape (...)
        Heat flux; none where the wall is not below the dew point. [W/m2]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math::
        q = 0.943 \left(\frac{g \rho^2 L k^3}{\mu H \Delta T}\right)^{1/4} \Delta T

    The film of [nusselt-film]_, the density of the vapour left out; the high end of the bracket.
    What condenses first is half oxygen, which conducts better than air does.

    Examples
    --------
    >>> heat_flux_condensing(
    ...     77.36,
    ...     81.72,
    ...     height=1.0,
    ...     latent_heat=204_810.0,
    ...     conductivity=0.1542,
    ...     density=1008.4,
    ...     viscosity=2.105e-4,
    ... ).round(-2)
    np.float64(6900.0)
    """
    drop = np.maximum(positive("dew_point", dew_point) - positive("wall", wall), 0.0)
    carried, dense = positive("conductivity", conductivity), positive("density", density)
    driven = GRAVITY * dense**2 * positive("latent_heat", latent_heat) * carried**3
    slow = positive("viscosity", viscosity) * positive("height", height)
    flux: Floats = 0.943 * (driven / slow) ** 0.25 * drop**0.75
    return flux
