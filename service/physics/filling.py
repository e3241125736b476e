"""What is lost while vessels are filled, and while liquid is let down (methods A6 and G2)."""

import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import Floats, fraction, non_negative, positive
from service.physics.constants import ROOM_TEMPERATURE, STANDARD_PRESSURE
from service.physics.fluids import FLUIDS
from service.physics.properties import critical_point, gas_enthalpy, saturated_enthalpies

_ICE = FLUIDS["carbon-dioxide"]


def filling_gas_rate(
    flow: ArrayLike, loss_fraction: ArrayLike, liquid_density: ArrayLike, gas_density: ArrayLike
) -> Floats:
    r"""Gas that comes off per second while liquid is filled.

    Parameters
    ----------
    flow : array_like, shape (...)
        Liquid transferred; zero or more. [m3/s]
    loss_fraction : array_like, shape (...)
        Share of it that is lost as gas, 0 to 1. [1]
    liquid_density : array_like, shape (...)
        Density of the liquid at its normal boiling point; above zero. [kg/m3]
    gas_density : array_like, shape (...)
        Density of the gas at the pressure and temperature of the room; above zero. [kg/m3]

    Returns
    -------
    ndarray, shape (...)
        Gas, broadcast over the inputs. [m3/s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: R = f \dot V_l \rho_l / \rho_g

    Of nitrogen 5 to 10 % is lost into a cold vessel and 10 to 30 % into a warm one, of helium 10 to
    20 % into a cold one [gas-industry-guide]_. With a share of 1 it is the gas of an overfill, all
    of which evaporates.

    Examples
    --------
    >>> filling_gas_rate([10.0 / 60_000.0], 0.1, 806.08, 1.1648).round(5)
    array([0.01153])
    """
    liquid = non_negative("flow", flow) * fraction("loss_fraction", loss_fraction)
    mass = liquid * positive("liquid_density", liquid_density)
    return mass / positive("gas_density", gas_density)


def filling_time(capacity: ArrayLike, flow: ArrayLike) -> Floats:
    r"""Time to fill a vessel from empty.

    Parameters
    ----------
    capacity : array_like, shape (...)
        Volume of liquid that the vessel takes; zero or more. [m3]
    flow : array_like, shape (...)
        Liquid transferred; above zero. [m3/s]

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
    .. math:: t = V_l / \dot V_l

    The longest that a filling lasts, from empty [gas-industry-guide]_; what is lost meanwhile is
    taken from the liquid transferred, and is not added to the time.

    Examples
    --------
    >>> filling_time([0.2], 10.0 / 60_000.0).round(6)
    array([1200.])
    """
    return non_negative("capacity", capacity) / positive("flow", flow)


def cool_down_liquid(
    metal_mass: ArrayLike,
    enthalpy_change: ArrayLike,
    latent_heat: ArrayLike,
    *,
    sensible_heat: ArrayLike = 0.0,
    use_of_cold_gas: ArrayLike = 0.0,
) -> Floats:
    r"""Mass of liquid that evaporates while metal is cooled down.

    Parameters
    ----------
    metal_mass : array_like, shape (...)
        Mass of metal cooled; zero or more. [kg]
    enthalpy_change : array_like, shape (...)
        Heat that a kilogram of the metal gives up on the way; zero or more. [J/kg]
    latent_heat : array_like, shape (...)
        Heat of evaporation of the liquid; above zero. [J/kg]
    sensible_heat : array_like, shape (...), default 0
        Heat that its cold vapour takes on the way to room temperature; zero or more. [J/kg]
    use_of_cold_gas : array_like, shape (...), default 0
        Share of that heat that the vapour takes from the metal, 0 to 1. [1]

    Returns
    -------
    ndarray, shape (...)
        Mass of liquid, broadcast over the inputs. [kg]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: m = m_{met} \Delta h / (L + u \, \Delta h_g)

    Balance of heat, with enthalpies of metals from [nist-cryogenic-materials]_: 304 steel gives up
    83.3 kJ/kg from 293 to 77 K, and 89.0 kJ/kg to 4.2 K. Latent heat alone is the cautious side;
    the truth lies between the two ends of u, for helium a factor of 70 apart.

    Examples
    --------
    >>> cool_down_liquid(
    ...     1.0, 83.3e3, 199.18e3, sensible_heat=226.9e3, use_of_cold_gas=[0, 1]
    ... ).round(4)
    array([0.4182, 0.1955])
    """
    heat = non_negative("metal_mass", metal_mass) * non_negative("enthalpy_change", enthalpy_change)
    gas_heat = non_negative("sensible_heat", sensible_heat)
    used = fraction("use_of_cold_gas", use_of_cold_gas) * gas_heat
    return heat / (positive("latent_heat", latent_heat) + used)


def flash_fraction(
    fluid_key: str, source_pressure: ArrayLike, to_pressure: ArrayLike = STANDARD_PRESSURE
) -> Floats:
    r"""Share of a boiling liquid that evaporates by itself when its pressure is let down.

    Parameters
    ----------
    fluid_key : str
        The one fluid of all transfers, of `service.physics.fluids.FLUIDS`.
    source_pressure : array_like, shape (...)
        Absolute pressure at which the liquid boils where it comes from; above zero. [Pa]
    to_pressure : array_like, shape (...), default 101325
        Absolute pressure where it goes, from the triple point to the critical point. [Pa]

    Returns
    -------
    ndarray, shape (...)
        Share that becomes vapour, broadcast over the inputs; 0 where the pressure does not fall, 1
        from the critical pressure on. [1]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number, or the fluid is none of those known; carbon
        dioxide has no liquid at the pressure of a room, see `vapour_and_snow_fraction`.

    Notes
    -----
    .. math:: x = \frac{h_l(p_1) - h_l(p_2)}{h_v(p_2) - h_l(p_2)}

    The enthalpy stays in a throttle; by [property-library]_. Nitrogen that boils at 2.8 bar
    absolute loses a tenth. Above the critical pressure there is no boiling, and the pressure alone
    does not say how cold the fluid is: all of it is counted as gas, the bound.

    Examples
    --------
    >>> flash_fraction("nitrogen", [101325.0, 4e5]).round(4)
    array([0.    , 0.1464])
    """
    pressures = np.broadcast_arrays(
        positive("source_pressure", source_pressure), positive("to_pressure", to_pressure)
    )
    states = np.stack([each.ravel() for each in pressures], axis=1)
    _, critical_pressure = critical_point(fluid_key)
    # One question a pair, whatever the number of vessels filled alike.
    different, of_state = np.unique(states, axis=0, return_inverse=True)
    answers = [
        _flash(fluid_key, source, to, critical_pressure) for source, to in different.tolist()
    ]
    shares: Floats = np.array(answers, dtype=np.float64)[of_state].reshape(pressures[0].shape)
    return shares


def vapour_and_snow_fraction(source_pressure: ArrayLike) -> tuple[Floats, Floats]:
    r"""Shares of vapour and of snow when liquid carbon dioxide is let out to 101 325 Pa.

    Parameters
    ----------
    source_pressure : array_like, shape (...)
        Absolute pressure at which the liquid boils, 0.518 to 7.377 MPa. [Pa]

    Returns
    -------
    tuple of ndarray, shape (...)
        Share that becomes vapour at once, share that becomes snow; together 1. [1]

    Raises
    ------
    OutOfRange
        The pressure is one at which no liquid carbon dioxide boils, or not a number.

    Notes
    -----
    .. math:: s = \frac{h_v(T_s) - h_l(p_1)}{L_s}, \quad
              h_v(T_s) = h(p_0, 20\,^\circ\mathrm{C}) - \Delta h

    The enthalpy stays in a throttle; the latent heat of sublimation and the heat that takes the
    cold vapour to 20 degrees Celsius are tabulated from [span-wagner]_, the rest is from
    [property-library]_. The snow follows as gas while it sublimes.

    Examples
    --------
    >>> vapour, snow = vapour_and_snow_fraction([20e5])
    >>> vapour.round(3), snow.round(3)
    (array([0.535]), array([0.465]))
    """
    pressure = positive("source_pressure", source_pressure)
    warm_gas = gas_enthalpy(_ICE.slug, STANDARD_PRESSURE, ROOM_TEMPERATURE)
    cold_vapour = warm_gas - _ICE.sensible_heat_to_20c_j_kg
    different, of_state = np.unique(pressure.ravel(), return_inverse=True)
    liquid = np.array(
        [saturated_enthalpies(_ICE.slug, at)[0] for at in different.tolist()], dtype=np.float64
    )
    shares = (cold_vapour - liquid) / _ICE.latent_heat_j_kg
    snow: Floats = shares[of_state].reshape(pressure.shape)
    return 1.0 - snow, snow


def _flash(fluid_key: str, source: float, to: float, critical_pressure: float) -> float:
    liquid, vapour = saturated_enthalpies(fluid_key, to)
    if source >= critical_pressure:
        return 1.0
    if source <= to:
        return 0.0
    hot, _ = saturated_enthalpies(fluid_key, source)
    # A liquid nearly at its critical point may carry more heat than the cold vapour.
    return min((hot - liquid) / (vapour - liquid), 1.0)
