"""The cold cloud of released gas and room air: temperature, density, oxygen (methods F4, F5).

It tells why fog is no measure of safe air, and why cold helium falls before it rises.
"""

from collections.abc import Callable
from functools import partial
from typing import Final

import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import Floats, positive
from service.physics.constants import GAS_CONSTANT, OXYGEN_IN_AIR, STANDARD_PRESSURE
from service.physics.errors import OutOfRange
from service.physics.fluids import FLUIDS
from service.physics.properties import gas_enthalpy, saturated_enthalpies

# Below its dew point air condenses, and the balance no longer holds. [K]  Methods F4.
AIR_DEW_POINT: Final = 81.75
_HALVINGS: Final = 60


def cloud_temperature(
    fluid_key: str,
    released_fraction: ArrayLike,
    *,
    room_temperature: float = 293.15,
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
        Of the air; above its dew point. [K]
    from_liquid : bool, default False
        Whether the air has to evaporate the liquid as well, or takes up saturated vapour.

    Returns
    -------
    ndarray, shape (...)
        Temperature. [K]

    Raises
    ------
    OutOfRange
        The fraction is not between 0 and 1, the fluid is none of those listed, or the mixture would
        be colder than the dew point of air, 81.7 K.

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
    fractions = _shares(released_fraction)
    liquid, vapour = saturated_enthalpies(fluid_key, STANDARD_PRESSURE)
    before = liquid if from_liquid else vapour
    gas, air = FLUIDS[fluid_key], FLUIDS["air"]
    warm = gas_enthalpy("air", STANDARD_PRESSURE, room_temperature)
    coldest = max(gas.boiling_k, AIR_DEW_POINT) + 1e-6

    def excess(share: float, kelvin: float) -> float:
        of_gas = gas_enthalpy(fluid_key, STANDARD_PRESSURE, kelvin) - before
        of_air = gas_enthalpy("air", STANDARD_PRESSURE, kelvin) - warm
        return (
            share * gas.molar_mass_kg_mol * of_gas + (1.0 - share) * air.molar_mass_kg_mol * of_air
        )

    found = np.empty(fractions.size)
    for place, share in enumerate(fractions.ravel().tolist()):
        if excess(share, coldest) > 0.0:
            raise OutOfRange("released_fraction", "so small that the mixture stays above 81.7 K")
        found[place] = _root(partial(excess, share), coldest, room_temperature)
    return found.reshape(fractions.shape)


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
        An input is outside its range or not a number.

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
    gas, air = FLUIDS[fluid_key].molar_mass_kg_mol, FLUIDS["air"].molar_mass_kg_mol
    mean = share * gas + (1.0 - share) * air
    density: Floats = (
        STANDARD_PRESSURE * mean / (GAS_CONSTANT * positive("temperature", temperature))
    )
    return density


def compact_layer(
    fluid_key: str, gas_volume: float, layer_volume: float, *, room_temperature: float = 293.15
) -> tuple[float, float]:
    r"""Released fraction and oxygen of a layer that holds all the gas, as cold as it is mixed.

    Parameters
    ----------
    fluid_key : str
        Of `service.physics.fluids.FLUIDS`.
    gas_volume : float
        Gas let go, at the temperature of the room; above zero. [m3]
    layer_volume : float
        Of the layer; above zero. [m3]
    room_temperature : float, default 293.15
        Of the air. [K]

    Returns
    -------
    tuple of float
        Mole fraction of released gas, and of oxygen. [1]

    Raises
    ------
    OutOfRange
        An input is outside its range, or the layer is too small for a mixture above 81.7 K.

    Notes
    -----
    .. math:: \frac{V_g T_m(X)}{T_a X} = V_{layer}, \qquad C = C_0 (1 - X)

    Less severe than the two-zone bound, since a cold cloud is compact; an estimate by the same
    balance as `cloud_temperature`, of liquid that the air evaporates, with [ideal-gas]_ volumes.

    Examples
    --------
    >>> share, oxygen = compact_layer("nitrogen", 6.92, 30.0)
    >>> round(share, 3), round(oxygen, 3)
    (0.174, 0.173)
    """
    gas, layer = (
        float(positive("gas_volume", gas_volume)),
        float(positive("layer_volume", layer_volume)),
    )

    def missing(share: float) -> float:
        cold = float(
            cloud_temperature(fluid_key, share, room_temperature=room_temperature, from_liquid=True)
        )
        return layer - gas * cold / (room_temperature * share)

    warm = gas / layer
    if warm >= 1.0:
        raise OutOfRange("layer_volume", "larger than the gas at the temperature of the room")
    # Cold gas takes less room, so that the share lies below that of warm gas.
    share = _root(missing, warm * 0.4, warm)
    return share, float(OXYGEN_IN_AIR * (1.0 - share))


def _shares(released_fraction: ArrayLike) -> Floats:
    share = np.asarray(released_fraction, dtype=np.float64)
    if not bool(np.all((share > 0.0) & (share < 1.0))):
        raise OutOfRange("released_fraction", "above 0 and below 1")
    return share


def _root(rising: Callable[[float], float], low: float, high: float) -> float:
    """Where a rising function passes zero, by halving."""
    for _ in range(_HALVINGS):
        middle = 0.5 * (low + high)
        if rising(middle) > 0.0:
            high = middle
        else:
            low = middle
    return 0.5 * (low + high)
