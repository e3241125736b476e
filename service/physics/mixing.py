"""Gas released into a closed room at once (methods C)."""

import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import Floats, finite, fraction, non_negative, positive, quotient
from service.physics.constants import OXYGEN_IN_AIR
from service.physics.errors import OutOfRange
from service.physics.relaxation import LONGEST


def oxygen_after_displacement(
    gas_volume: ArrayLike, room_volume: ArrayLike, *, oxygen_before: ArrayLike = OXYGEN_IN_AIR
) -> Floats:
    r"""Oxygen fraction of a closed room once released gas has pushed air out.

    Parameters
    ----------
    gas_volume : array_like, shape (...)
        Gas released, at room temperature and pressure. [m3]
    room_volume : array_like, shape (...)
        Net volume, fittings left out; above zero. [m3]
    oxygen_before : array_like, shape (...), default 0.2095
        Oxygen fraction before the release, by volume. [1]

    Returns
    -------
    ndarray, shape (...)
        Oxygen fraction, broadcast over the inputs; 0 once gas fills the room. [1]

    Raises
    ------
    OutOfRange
        An input is below its range or not a number.

    Notes
    -----
    .. math:: x = x_0 \, \max(0,\; 1 - V_g / V_r)

    What leaves is taken to be air alone, the cautious case. The mean of the room: cold gas that
    lies on the floor is worse. See [gas-industry-guide]_.

    Examples
    --------
    >>> oxygen_after_displacement([0.0, 7.0], 70.0)
    array([0.2095 , 0.18855])
    """
    gas_share = non_negative("gas_volume", gas_volume) / positive("room_volume", room_volume)
    return fraction("oxygen_before", oxygen_before) * np.clip(1.0 - gas_share, 0.0, None)


def oxygen_after_mixing(
    gas_volume: ArrayLike, room_volume: ArrayLike, *, oxygen_before: ArrayLike = OXYGEN_IN_AIR
) -> Floats:
    r"""Oxygen fraction of a closed room when gas mixes at once and the mixture leaves.

    Parameters
    ----------
    gas_volume : array_like, shape (...)
        Gas released, at room temperature and pressure. [m3]
    room_volume : array_like, shape (...)
        Net volume, fittings left out; above zero. [m3]
    oxygen_before : array_like, shape (...), default 0.2095
        Oxygen fraction before the release, by volume. [1]

    Returns
    -------
    ndarray, shape (...)
        Oxygen fraction, broadcast over the inputs. [1]

    Raises
    ------
    OutOfRange
        An input is below its range or not a number.

    Notes
    -----
    .. math:: x = x_0 \exp(-V_g / V_r)

    The well-mixed balance of [laboratory-odh]_ without ventilation; never below
    `oxygen_after_displacement`.

    Examples
    --------
    >>> oxygen_after_mixing([0.0, 7.0], 70.0).round(5)
    array([0.2095 , 0.18956])
    """
    gas_share = non_negative("gas_volume", gas_volume) / positive("room_volume", room_volume)
    return fraction("oxygen_before", oxygen_before) * np.exp(-np.minimum(gas_share, LONGEST))


def oxygen_after_dilution(
    gas_volume: ArrayLike, room_volume: ArrayLike, *, oxygen_before: ArrayLike = OXYGEN_IN_AIR
) -> Floats:
    r"""Oxygen fraction of an enclosure that nothing leaves while gas is added.

    Parameters
    ----------
    gas_volume : array_like, shape (...)
        Gas released, at room temperature and pressure. [m3]
    room_volume : array_like, shape (...)
        Net volume, fittings left out; above zero. [m3]
    oxygen_before : array_like, shape (...), default 0.2095
        Oxygen fraction before the release, by volume. [1]

    Returns
    -------
    ndarray, shape (...)
        Oxygen fraction, broadcast over the inputs. [1]

    Raises
    ------
    OutOfRange
        An input is below its range or not a number.

    Notes
    -----
    .. math:: x = x_0 / (1 + V_g / V_r)

    Conservation of oxygen in an ideal mixture [ideal-gas]_. For comparison only: a room is not
    sealed, and in a sealed one the pressure rises while the partial pressure of oxygen stays.

    Examples
    --------
    >>> oxygen_after_dilution([0.0, 7.0], 70.0).round(5)
    array([0.2095 , 0.19045])
    """
    gas_share = non_negative("gas_volume", gas_volume) / positive("room_volume", room_volume)
    return fraction("oxygen_before", oxygen_before) / (1.0 + gas_share)


def released_fraction_after_displacement(
    gas_volume: ArrayLike,
    room_volume: ArrayLike,
    *,
    fraction_before: ArrayLike = 0.0,
    dilution_volume: ArrayLike | None = None,
) -> Floats:
    r"""Released-gas fraction of a closed room once gas has pushed out what was there.

    Parameters
    ----------
    gas_volume : array_like, shape (...)
        Gas released, at room temperature and pressure. [m3]
    room_volume : array_like, shape (...)
        Net volume, fittings left out; above zero. [m3]
    fraction_before : array_like, shape (...), default 0
        Released-gas fraction before. [1]
    dilution_volume : array_like, shape (...), default `gas_volume`
        The part of the gas that counts in the fraction, where that is not all of it. [m3]

    Returns
    -------
    ndarray, shape (...)
        Released-gas fraction, broadcast over the inputs; that of the gas once it fills the room.
        [1]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: G = 1 - (1 - G_0) \max(0,\; 1 - V_g / V_r)

    The same formula as `oxygen_after_displacement`, by [gas-industry-guide]_. With a part
    :math:`V_d` that counts, :math:`G = G_0 (1 - x) + x V_d / V_g` where
    :math:`x = \min(1, V_g / V_r)`.

    Examples
    --------
    >>> released_fraction_after_displacement([0.0, 7.0, 100.0], 70.0)
    array([0. , 0.1, 1. ])
    """
    volume = non_negative("gas_volume", gas_volume)
    gas_share = volume / positive("room_volume", room_volume)
    before = finite("fraction_before", fraction_before)
    filled = np.minimum(gas_share, 1.0)
    return before * (1.0 - filled) + filled * _counted_share(volume, dilution_volume)


def released_fraction_after_mixing(
    gas_volume: ArrayLike,
    room_volume: ArrayLike,
    *,
    fraction_before: ArrayLike = 0.0,
    dilution_volume: ArrayLike | None = None,
) -> Floats:
    r"""Released-gas fraction of a closed room when gas mixes at once and the mixture leaves.

    Parameters
    ----------
    gas_volume : array_like, shape (...)
        Gas released, at room temperature and pressure. [m3]
    room_volume : array_like, shape (...)
        Net volume, fittings left out; above zero. [m3]
    fraction_before : array_like, shape (...), default 0
        Released-gas fraction before. [1]
    dilution_volume : array_like, shape (...), default `gas_volume`
        The part of the gas that counts in the fraction, where that is not all of it. [m3]

    Returns
    -------
    ndarray, shape (...)
        Released-gas fraction, broadcast over the inputs. [1]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: G = 1 - (1 - G_0) \exp(-V_g / V_r)

    The same formula as `oxygen_after_mixing`, by [laboratory-odh]_. With a part :math:`V_d` that
    counts, :math:`G = G_0 e^{-x} + (1 - e^{-x}) V_d / V_g`.

    Examples
    --------
    >>> released_fraction_after_mixing([0.0, 7.0], 70.0).round(6)
    array([0.      , 0.095163])
    """
    volume = non_negative("gas_volume", gas_volume)
    gas_share = np.minimum(volume / positive("room_volume", room_volume), LONGEST)
    before = finite("fraction_before", fraction_before)
    return before * np.exp(-gas_share) - np.expm1(-gas_share) * _counted_share(
        volume, dilution_volume
    )


def _counted_share(volume: Floats, dilution_volume: ArrayLike | None) -> Floats:
    if dilution_volume is None:
        return np.ones_like(volume)
    counted = finite("dilution_volume", dilution_volume)
    return quotient(counted, volume, where_zero=0.0)


def gas_volume_to_reach_by_displacement(
    room_volume: ArrayLike, *, oxygen: ArrayLike, oxygen_before: ArrayLike = OXYGEN_IN_AIR
) -> Floats:
    r"""Volume of gas that brings a closed room to an oxygen fraction, by displacement.

    Parameters
    ----------
    room_volume : array_like, shape (...)
        Net volume, fittings left out; above zero. [m3]
    oxygen : array_like, shape (...)
        Oxygen fraction to reach, 0 to 1. [1]
    oxygen_before : array_like, shape (...), default 0.2095
        Oxygen fraction before the release; above zero. [1]

    Returns
    -------
    ndarray, shape (...)
        Volume of gas, broadcast over the inputs; 0 where the room is there already. [m3]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: V_g = V_r (1 - x / x_0)

    `oxygen_after_displacement` solved for the gas; see [gas-industry-guide]_.

    Examples
    --------
    >>> gas_volume_to_reach_by_displacement([70.0], oxygen=0.18855).round(6)
    array([7.])
    """
    share_left = fraction("oxygen", oxygen) / _oxygen_before(oxygen_before)
    return positive("room_volume", room_volume) * np.clip(1.0 - share_left, 0.0, None)


def gas_volume_to_reach_by_mixing(
    room_volume: ArrayLike, *, oxygen: ArrayLike, oxygen_before: ArrayLike = OXYGEN_IN_AIR
) -> Floats:
    r"""Volume of gas that brings a closed room to an oxygen fraction, by mixing.

    Parameters
    ----------
    room_volume : array_like, shape (...)
        Net volume, fittings left out; above zero. [m3]
    oxygen : array_like, shape (...)
        Oxygen fraction to reach; above zero. [1]
    oxygen_before : array_like, shape (...), default 0.2095
        Oxygen fraction before the release; above zero. [1]

    Returns
    -------
    ndarray, shape (...)
        Volume of gas, broadcast over the inputs; 0 where the room is there already. [m3]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: V_g = V_r \ln(x_0 / x)

    `oxygen_after_mixing` solved for the gas; see [laboratory-odh]_.

    Examples
    --------
    >>> gas_volume_to_reach_by_mixing([70.0], oxygen=0.195).round(4)
    array([5.0206])
    """
    ratio = _oxygen_before(oxygen_before) / positive("oxygen", fraction("oxygen", oxygen))
    return positive("room_volume", room_volume) * np.log(np.maximum(ratio, 1.0))


def room_volume_to_stay_above_by_displacement(
    gas_volume: ArrayLike, *, oxygen: ArrayLike, oxygen_before: ArrayLike = OXYGEN_IN_AIR
) -> Floats:
    r"""Smallest room that keeps an oxygen fraction when gas is released, by displacement.

    Parameters
    ----------
    gas_volume : array_like, shape (...)
        Gas released, at room temperature and pressure. [m3]
    oxygen : array_like, shape (...)
        Oxygen fraction to keep; below `oxygen_before`. [1]
    oxygen_before : array_like, shape (...), default 0.2095
        Oxygen fraction before the release. [1]

    Returns
    -------
    ndarray, shape (...)
        Net volume, broadcast over the inputs. [m3]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number; no room keeps what it had before.

    Notes
    -----
    .. math:: V_r = V_g / (1 - x / x_0)

    `oxygen_after_displacement` solved for the room; see [gas-industry-guide]_.

    Examples
    --------
    >>> room_volume_to_stay_above_by_displacement([7.0], oxygen=0.18855).round(6)
    array([70.])
    """
    before = _oxygen_before(oxygen_before)
    kept = _below_before(oxygen, before)
    return non_negative("gas_volume", gas_volume) / ((before - kept) / before)


def room_volume_to_stay_above_by_mixing(
    gas_volume: ArrayLike, *, oxygen: ArrayLike, oxygen_before: ArrayLike = OXYGEN_IN_AIR
) -> Floats:
    r"""Smallest room that keeps an oxygen fraction when gas is released, by mixing.

    Parameters
    ----------
    gas_volume : array_like, shape (...)
        Gas released, at room temperature and pressure. [m3]
    oxygen : array_like, shape (...)
        Oxygen fraction to keep; above zero and below `oxygen_before`. [1]
    oxygen_before : array_like, shape (...), default 0.2095
        Oxygen fraction before the release. [1]

    Returns
    -------
    ndarray, shape (...)
        Net volume, broadcast over the inputs. [m3]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number; no room keeps what it had before.

    Notes
    -----
    .. math:: V_r = V_g / \ln(x_0 / x)

    `oxygen_after_mixing` solved for the room; see [laboratory-odh]_.

    Examples
    --------
    >>> room_volume_to_stay_above_by_mixing([5.0], oxygen=0.195).round(3)
    array([69.711])
    """
    before = _oxygen_before(oxygen_before)
    kept = positive("oxygen", _below_before(oxygen, before))
    return non_negative("gas_volume", gas_volume) / np.log1p((before - kept) / kept)


def _oxygen_before(oxygen_before: ArrayLike) -> Floats:
    return positive("oxygen_before", fraction("oxygen_before", oxygen_before))


def _below_before(oxygen: ArrayLike, before: Floats) -> Floats:
    kept = fraction("oxygen", oxygen)
    if not bool(np.all(kept < before)):
        raise OutOfRange("oxygen", "below oxygen_before")
    return kept
