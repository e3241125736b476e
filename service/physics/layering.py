"""Released gas that stays where it goes: a bound, not a prediction (methods F1 to F3)."""

from typing import Final

import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import Floats, fraction, non_negative, positive

# Height up to which people stand and crouch, breathing. [m]  Common practice, no source.
BREATHING_HEIGHT: Final = 1.5


def breathing_zone_volume(
    floor_area: ArrayLike,
    height: ArrayLike,
    *,
    net_share: ArrayLike = 1.0,
    zone_height: ArrayLike = BREATHING_HEIGHT,
) -> Floats:
    r"""Volume in which people breathe, and in which gas heavier than air may all stay.

    Parameters
    ----------
    floor_area : array_like, shape (...)
        Floor of the room; above zero. [m2]
    height : array_like, shape (...)
        Floor to ceiling; above zero. [m]
    net_share : array_like, shape (...), default 1
        Share of the volume that fittings leave free, 0 to 1. [1]
    zone_height : array_like, shape (...), default 1.5
        Height of the zone; above zero; 0.5 for who kneels or has fallen. [m]

    Returns
    -------
    ndarray, shape (...)
        Net volume, broadcast over the inputs; of the whole room where that is lower. [m3]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: V_z = s A_f \min(H, z_b)

    Two-zone bound: all the gas stays in the zone and pushes its air out, by
    `service.physics.mixing.oxygen_after_displacement`. Geometry alone; no published model of this
    use is both simple and validated, and rooms with ventilation are far better. Gas that warms and
    drifts at breathing height is what [gas-industry-guide]_ warns of.

    Examples
    --------
    >>> breathing_zone_volume([20.0, 20.0], [2.5, 1.2])
    array([30., 24.])
    """
    tall = np.minimum(positive("height", height), positive("zone_height", zone_height))
    return positive("floor_area", floor_area) * tall * fraction("net_share", net_share)


def ceiling_zone_volume(
    floor_area: ArrayLike,
    height: ArrayLike,
    *,
    net_share: ArrayLike = 1.0,
    zone_height: ArrayLike = BREATHING_HEIGHT,
) -> Floats:
    r"""Volume above people's heads, in which gas lighter than air may all stay.

    Parameters
    ----------
    floor_area : array_like, shape (...)
        Floor of the room; above zero. [m2]
    height : array_like, shape (...)
        Floor to ceiling; above zero. [m]
    net_share : array_like, shape (...), default 1
        Share of the volume that fittings leave free, 0 to 1. [1]
    zone_height : array_like, shape (...), default 1.5
        Height at which the zone begins; above zero. [m]

    Returns
    -------
    ndarray, shape (...)
        Net volume, broadcast over the inputs; of the whole room where it is no higher than the
        height at which the zone begins. [m3]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: V_z = s A_f (H - z_b) \text{ where } H > z_b, \text{ else } s A_f H

    Two-zone bound, as in `breathing_zone_volume`, for hydrogen, helium and warm methane, which
    [gas-industry-guide]_ looks for at the ceiling. A room little higher than where the zone begins
    has a thin one, and so a hard bound; a room without such a zone is taken whole.

    Examples
    --------
    >>> ceiling_zone_volume([20.0, 20.0], [2.5, 1.2])
    array([20., 24.])
    """
    tall, begins = np.broadcast_arrays(
        positive("height", height), positive("zone_height", zone_height)
    )
    above = np.where(tall > begins, tall - begins, tall)
    return positive("floor_area", floor_area) * above * fraction("net_share", net_share)


def depth_of_cold_layer(
    mass: ArrayLike, vapour_density: ArrayLike, floor_area: ArrayLike
) -> Floats:
    r"""Depth at which vapour as cold as its liquid lies on a floor, nothing mixed into it.

    Parameters
    ----------
    mass : array_like, shape (...)
        Mass that has evaporated; zero or more. [kg]
    vapour_density : array_like, shape (...)
        Density of the saturated vapour at the boiling point; above zero. [kg/m3]
    floor_area : array_like, shape (...)
        Floor on which it lies; above zero. [m2]

    Returns
    -------
    ndarray, shape (...)
        Depth, broadcast over the inputs. [m]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: d_c = m / (\rho_v A_f)

    The thinnest layer of undiluted gas, with densities of [property-library]_: it says how fast a
    pit fills. It grows as it warms, to `depth_of_warm_layer`.

    Examples
    --------
    >>> depth_of_cold_layer([8.0608], 4.6121, 20.0).round(4)
    array([0.0874])
    """
    volume = non_negative("mass", mass) / positive("vapour_density", vapour_density)
    return volume / positive("floor_area", floor_area)


def depth_of_warm_layer(gas_volume: ArrayLike, floor_area: ArrayLike) -> Floats:
    r"""Depth at which gas as warm as the room lies on a floor, nothing mixed into it.

    Parameters
    ----------
    gas_volume : array_like, shape (...)
        Gas released, at room temperature and pressure; zero or more. [m3]
    floor_area : array_like, shape (...)
        Floor on which it lies; above zero. [m2]

    Returns
    -------
    ndarray, shape (...)
        Depth, broadcast over the inputs. [m]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: d_w = V_g / A_f

    The bound for height: nitrogen grows by 3.96 from saturated vapour to gas at 20 degrees Celsius,
    argon by 3.47, helium by 102 [property-library]_.

    Examples
    --------
    >>> depth_of_warm_layer([6.9202], 20.0).round(4)
    array([0.346])
    """
    return non_negative("gas_volume", gas_volume) / positive("floor_area", floor_area)


def liquid_to_fill_pit(
    pit_volume: ArrayLike, liquid_density: ArrayLike, gas_density: ArrayLike
) -> Floats:
    r"""Volume of liquid whose gas fills a pit, trench or shaft to its edge.

    Parameters
    ----------
    pit_volume : array_like, shape (...)
        Volume of the pit; zero or more. [m3]
    liquid_density : array_like, shape (...)
        Density of the liquid at its normal boiling point; above zero. [kg/m3]
    gas_density : array_like, shape (...)
        Density of the gas in the pit; above zero: saturated vapour while it is cold, gas at room
        temperature, the cautious side, once it is warm. [kg/m3]

    Returns
    -------
    ndarray, shape (...)
        Volume of liquid, broadcast over the inputs. [m3]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: V_l = V_{pit} \rho_g / \rho_l

    A pit that gas can fill holds no oxygen (bound), with densities of [property-library]_.
    Ventilation of the room counts for nothing there unless its extract reaches the pit's floor.

    Examples
    --------
    >>> liquid_to_fill_pit(3.0, 806.08, [4.6121, 1.1648]).round(5)
    array([0.01716, 0.00434])
    """
    mass = non_negative("pit_volume", pit_volume) * positive("gas_density", gas_density)
    return mass / positive("liquid_density", liquid_density)
