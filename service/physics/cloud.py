"""The cold cloud of released gas and room air: temperature, density, oxygen (methods F4, F5).

It tells why fog is no measure of safe air, and why cold helium falls before it rises.
"""

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import Floats, Integers, positive
from service.physics.constants import (
    GAS_CONSTANT,
    OXYGEN_IN_AIR,
    ROOM_TEMPERATURE,
    STANDARD_PRESSURE,
)
from service.physics.errors import OutOfRange
from service.physics.fluids import FLUIDS, FluidData
from service.physics.properties import gas_enthalpy, saturated_enthalpies
from service.physics.roots import smallest_enough

# Below its dew point air condenses, and the balance no longer holds. [K]  CoolProp 8.0.0.
AIR_DEW_POINT: Final = 81.72
# The tabulated boiling points are rounded to a thousandth; a hair above them all of it is gas. [K]
_ABOVE_BOILING: Final = 0.01


def cloud_temperature(
    fluid_key: str,
    released_fraction: ArrayLike,
    *,
    room_temperature: float = ROOM_TEMPERATURE,
    from_liquid: bool = False,
) -> Floats:
    r"""Temperature of a mixture of cold released gas and room air.

    Parameters
    ----------
    fluid_key : str
        Of `service.physics.fluids.FLUIDS`.
    released_fraction : array_like, shape (...)
        Mole fraction of released gas in the mixture, above 0 and below 1. [1]
    room_temperature : float, default 293.15
        Of the air; above its dew point and the boiling point of the fluid. [K]
    from_liquid : bool, default False
        Whether the air has to evaporate the liquid as well, or takes up saturated vapour.

    Returns
    -------
    ndarray, shape (...)
        Temperature. [K]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number, the fluid is none of those listed or does not
        boil at 101 325 Pa, or the mixture would be colder than its boiling point or than the dew
        point of air, 81.7 K.

    Notes
    -----
    .. math:: y M_g (h_g(T_m) - h_0) + (1 - y) M_a (h_a(T_m) - h_a(T_a)) = 0

    Adiabatic, at 101 325 Pa, dry, an ideal mixture of the real gases of [property-library]_; heat
    from walls and moisture only warm it.

    Examples
    --------
    >>> cloud_temperature("nitrogen", [0.5]).round(0)
    array([184.])
    """
    shares = _shares(released_fraction)
    balance = _balance(fluid_key, room_temperature, from_liquid=from_liquid)
    if not bool(np.all(shares <= balance.largest_share())):
        raise OutOfRange(
            "released_fraction", f"so small that the mixture stays above {balance.coldest:.1f} K"
        )
    return balance.temperature(shares)


def cloud_density(fluid_key: str, released_fraction: ArrayLike, temperature: ArrayLike) -> Floats:
    r"""Density of a mixture of released gas and air.

    Parameters
    ----------
    fluid_key : str
        Of `service.physics.fluids.FLUIDS`.
    released_fraction : array_like, shape (...)
        Mole fraction of released gas, above 0 and below 1. [1]
    temperature : array_like, shape (...)
        Of the mixture; above zero. [K]

    Returns
    -------
    ndarray, shape (...)
        Density at 101 325 Pa. [kg/m3]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number, or the fluid is none of those listed.

    Notes
    -----
    .. math:: \rho_m = \frac{p M_m}{R T_m}

    The [ideal-gas]_.

    Examples
    --------
    >>> cloud_density("nitrogen", 0.5, 184.2).round(3)
    np.float64(1.885)
    """
    share = _shares(released_fraction)
    gas, air = _fluid(fluid_key).molar_mass_kg_mol, FLUIDS["air"].molar_mass_kg_mol
    mean = share * gas + (1.0 - share) * air
    density: Floats = (
        STANDARD_PRESSURE * mean / (GAS_CONSTANT * positive("temperature", temperature))
    )
    return density


def cloud_oxygen(fluid_key: str, released_fraction: ArrayLike) -> Floats:
    r"""Oxygen in a mixture of released gas and air.

    Parameters
    ----------
    fluid_key : str
        Of `service.physics.fluids.FLUIDS`.
    released_fraction : array_like, shape (...)
        Mole fraction of released gas, above 0 and below 1. [1]

    Returns
    -------
    ndarray, shape (...)
        Oxygen fraction, by volume; above that of air where the gas is oxygen itself. [1]

    Raises
    ------
    OutOfRange
        The fraction is not between 0 and 1, or the fluid is none of those listed.

    Notes
    -----
    .. math:: C = (1 - y) C_0 + y C_g

    Fractions by volume are those by mole in an [ideal-gas]_.

    Examples
    --------
    >>> cloud_oxygen("nitrogen", [0.5])
    array([0.10475])
    """
    share = _shares(released_fraction)
    oxygen: Floats = (1.0 - share) * OXYGEN_IN_AIR + share * _fluid(fluid_key).oxygen_fraction
    return oxygen


def air_to_evaporate(fluid_key: str, *, room_temperature: float = ROOM_TEMPERATURE) -> float:
    r"""Air that just evaporates a liquid, where the heat comes from nothing else.

    Parameters
    ----------
    fluid_key : str
        Of `service.physics.fluids.FLUIDS`.
    room_temperature : float, default 293.15
        Of the air; above its dew point and the boiling point of the fluid. [K]

    Returns
    -------
    float
        Mass of air by mass of liquid. [1]

    Raises
    ------
    OutOfRange
        The temperature is outside its range or not a number, or the fluid is none of those listed
        or does not boil at 101 325 Pa.

    Notes
    -----
    .. math:: \frac{m_a}{m} = \frac{L}{h_a(T_a) - h_a(T_c)}

    with the air cooled as far as the boiling point of the liquid or its own dew point, whichever is
    the warmer, by enthalpies of [property-library]_. The vapour stays as cold as it forms.

    Examples
    --------
    >>> round(air_to_evaporate("nitrogen"), 3)
    0.928
    """
    balance = _balance(fluid_key, room_temperature, from_liquid=True)
    liquid, vapour = saturated_enthalpies(fluid_key, STANDARD_PRESSURE)
    given_up = balance.given_up_by_air(balance.coldest) / FLUIDS["air"].molar_mass_kg_mol
    return (vapour - liquid) / given_up


def compact_layer(
    fluid_key: str,
    gas_volume: ArrayLike,
    layer_volume: ArrayLike,
    *,
    room_temperature: float = ROOM_TEMPERATURE,
) -> tuple[Floats, Floats]:
    r"""Released fraction and oxygen of a layer that holds all the gas, as cold as it is mixed.

    Parameters
    ----------
    fluid_key : str
        Of `service.physics.fluids.FLUIDS`.
    gas_volume : array_like, shape (...)
        Gas let go, at the temperature of the room; above zero. [m3]
    layer_volume : array_like, shape (...)
        Of the layer; above zero. [m3]
    room_temperature : float, default 293.15
        Of the air; above its dew point and the boiling point of the fluid. [K]

    Returns
    -------
    share, oxygen : ndarray, shape (...)
        Mole fraction of released gas, and of oxygen. [1]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number, the fluid is none of those listed or does not
        boil at 101 325 Pa, or the layer is too small for a mixture above 81.7 K and above the
        boiling point.

    Notes
    -----
    .. math:: \frac{V_g T_m(X)}{T_a X} = V_{layer}, \qquad C = (1 - X) C_0 + X C_g

    Less severe than the two-zone bound, since a cold cloud is compact; an estimate by the same
    balance as `cloud_temperature`, of liquid that the air evaporates, with [ideal-gas]_ volumes. A
    layer may be smaller than its gas would be once it is warm.

    Examples
    --------
    >>> share, oxygen = compact_layer("nitrogen", [6.92], 30.0)
    >>> share.round(3), oxygen.round(3)
    (array([0.174]), array([0.173]))
    """
    gas, layer = np.broadcast_arrays(
        positive("gas_volume", gas_volume), positive("layer_volume", layer_volume)
    )
    balance = _balance(fluid_key, room_temperature, from_liquid=True)
    largest = balance.largest_share()
    # What share the layer would be of warm gas, and of gas as cold as the balance holds: the root
    # lies between them.
    warm = (gas / layer).ravel()
    least = warm * balance.coldest / room_temperature
    if not bool(np.all(least <= largest)):
        raise OutOfRange(
            "layer_volume", f"large enough that the mixture stays above {balance.coldest:.1f} K"
        )

    def too_large(rows: Integers, more: Floats) -> Floats:
        share = least[rows] + more
        size: Floats = warm[rows] * balance.temperature(share) / (room_temperature * share)
        return size - 1.0

    share = least + smallest_enough(too_large, np.minimum(warm, largest) - least)
    found: Floats = share.reshape(gas.shape)
    return found, cloud_oxygen(fluid_key, found)


@dataclass(frozen=True, slots=True)
class _Balance:
    """Heat that air gives up and released gas takes, by the mole [J/mol]."""

    fluid: FluidData
    room_temperature: float
    coldest: float  # at which all of it still is gas [K]
    air_before: float  # [J/kg]
    gas_before: float  # [J/kg]

    def given_up_by_air(self, kelvin: float) -> float:
        now = gas_enthalpy("air", STANDARD_PRESSURE, kelvin)
        return FLUIDS["air"].molar_mass_kg_mol * (self.air_before - now)

    def taken_by_gas(self, kelvin: float) -> float:
        now = gas_enthalpy(self.fluid.slug, STANDARD_PRESSURE, kelvin)
        return self.fluid.molar_mass_kg_mol * (now - self.gas_before)

    def largest_share(self) -> float:
        """Released mole fraction at which the mixture is as cold as the balance holds."""
        given, taken = self.given_up_by_air(self.coldest), self.taken_by_gas(self.coldest)
        return given / (given + taken)

    def temperature(self, shares: Floats) -> Floats:
        """Where the two are equal, for shares no larger than the largest."""
        share = shares.ravel()

        def too_cold(rows: Integers, warmer: Floats) -> Floats:
            kelvins = (self.coldest + warmer).tolist()
            given = np.array([self.given_up_by_air(kelvin) for kelvin in kelvins])
            taken = np.array([self.taken_by_gas(kelvin) for kelvin in kelvins])
            excess: Floats = (1.0 - share[rows]) * given - share[rows] * taken
            return excess

        widest = np.full(share.shape, self.room_temperature - self.coldest)
        warmer = smallest_enough(too_cold, widest)
        return self.coldest + warmer.reshape(shares.shape)


def _balance(fluid_key: str, room_temperature: float, *, from_liquid: bool) -> _Balance:
    fluid = _fluid(fluid_key)
    liquid, vapour = saturated_enthalpies(fluid_key, STANDARD_PRESSURE)
    coldest = max(fluid.boiling_k, AIR_DEW_POINT) + _ABOVE_BOILING
    # Asked for what must hold, so that not-a-number is refused.
    if not coldest < room_temperature < np.inf:
        raise OutOfRange("room_temperature", f"above {coldest:.1f} and finite")
    return _Balance(
        fluid=fluid,
        room_temperature=room_temperature,
        coldest=coldest,
        air_before=gas_enthalpy("air", STANDARD_PRESSURE, room_temperature),
        gas_before=liquid if from_liquid else vapour,
    )


def _fluid(fluid_key: str) -> FluidData:
    if fluid_key not in FLUIDS:
        raise OutOfRange("fluid_key", f"one of {', '.join(sorted(FLUIDS))}")
    return FLUIDS[fluid_key]


def _shares(released_fraction: ArrayLike) -> Floats:
    share = np.asarray(released_fraction, dtype=np.float64)
    if not bool(np.all((share > 0.0) & (share < 1.0))):
        raise OutOfRange("released_fraction", "above 0 and below 1")
    return share
