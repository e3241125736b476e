"""What flows out of a broken line: liquid by Bernoulli, gas choked or not (methods G6)."""

from typing import Final

import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import Floats, non_negative, positive
from service.physics.constants import GAS_CONSTANT
from service.physics.errors import OutOfRange

# Share of the ideal flow. [1]  Methods G6.
SHARP_EDGE: Final = 0.62
SHORT_PIPE: Final = 1.0
RESTRICTOR: Final = 0.9


def bore_area(bore: ArrayLike) -> Floats:
    r"""Free area of a round bore.

    Parameters
    ----------
    bore : array_like, shape (...)
        Inner diameter; above zero. [m]

    Returns
    -------
    ndarray, shape (...)
        Area. [m2]

    Raises
    ------
    OutOfRange
        The bore is not above zero, or not a number.

    Notes
    -----
    .. math:: A = \pi d^2 / 4

    Examples
    --------
    >>> bore_area([0.01]).round(9)
    array([7.854e-05])
    """
    area: Floats = 0.25 * np.pi * positive("bore", bore) ** 2
    return area


def liquid_outflow(
    area: ArrayLike,
    density: ArrayLike,
    upstream_pressure: ArrayLike,
    downstream_pressure: ArrayLike,
    *,
    discharge_coefficient: ArrayLike = SHARP_EDGE,
) -> Floats:
    r"""Liquid that flows out of an opening, as if none of it flashed on the way.

    Parameters
    ----------
    area : array_like, shape (...)
        Of the opening; zero or more. [m2]
    density : array_like, shape (...)
        Of the liquid before it flows; above zero. [kg/m3]
    upstream_pressure, downstream_pressure : array_like, shape (...)
        Absolute; above zero. [Pa]
    discharge_coefficient : array_like, shape (...), default 0.62
        0.62 for a sharp edge, 0.8 to 1 for a short pipe. [1]

    Returns
    -------
    ndarray, shape (...)
        Mass flow; none where the pressure outside is the higher. [kg/s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: \dot m = C_d A \sqrt{2 \rho \max(0, p_1 - p_2)}

    Bernoulli's equation. Exact for subcooled liquid; a saturated one flashes and flows less
    ([api-520]_, annex C), so that it is an upper bound.

    Examples
    --------
    >>> liquid_outflow(bore_area(0.01), 738.6, 4e5, 101_325.0).round(4)
    np.float64(1.0228)
    """
    drop = positive("upstream_pressure", upstream_pressure) - positive(
        "downstream_pressure", downstream_pressure
    )
    speed = np.sqrt(2.0 * positive("density", density) * np.maximum(drop, 0.0))
    free = non_negative("discharge_coefficient", discharge_coefficient) * non_negative("area", area)
    flow: Floats = free * speed
    return flow


def critical_pressure_ratio(gamma: ArrayLike) -> Floats:
    r"""Pressure outside over that before, below which the flow of a gas grows no more.

    Parameters
    ----------
    gamma : array_like, shape (...)
        Ratio of the heat capacities; above 1. [1]

    Returns
    -------
    ndarray, shape (...)
        Ratio. [1]

    Raises
    ------
    OutOfRange
        An element is not above 1, or not a number.

    Notes
    -----
    .. math:: r_c = \left(\frac{2}{\gamma + 1}\right)^{\gamma / (\gamma - 1)}

    By [iso-9300]_.

    Examples
    --------
    >>> critical_pressure_ratio([1.4, 5.0 / 3.0]).round(4)
    array([0.5283, 0.4871])
    """
    ratio = _above_one(gamma)
    critical: Floats = (2.0 / (ratio + 1.0)) ** (ratio / (ratio - 1.0))
    return critical


def gas_outflow(
    area: ArrayLike,
    upstream_pressure: ArrayLike,
    downstream_pressure: ArrayLike,
    *,
    molar_mass: ArrayLike,
    temperature: ArrayLike,
    gamma: ArrayLike,
    discharge_coefficient: ArrayLike = SHARP_EDGE,
) -> Floats:
    r"""Gas that flows out of an opening, choked where the pressure before it is high enough.

    Parameters
    ----------
    area : array_like, shape (...)
        Of the opening; zero or more. [m2]
    upstream_pressure, downstream_pressure : array_like, shape (...)
        Absolute; above zero. [Pa]
    molar_mass : array_like, shape (...)
        Above zero. [kg/mol]
    temperature : array_like, shape (...)
        Of the gas before it flows; above zero. [K]
    gamma : array_like, shape (...)
        Ratio of the heat capacities; above 1. [1]
    discharge_coefficient : array_like, shape (...), default 0.62
        0.62 for a sharp edge, 0.9 for a restrictor. [1]

    Returns
    -------
    ndarray, shape (...)
        Mass flow; none where the pressure outside is the higher. [kg/s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math::
        \dot m = C_d A p_1 \sqrt{\frac{M}{R T}}
        \sqrt{\frac{2 \gamma}{\gamma - 1} \left(r^{2/\gamma} - r^{(\gamma + 1)/\gamma}\right)},
        \qquad r = \max(r_c, \min(1, p_2 / p_1))

    Isentropic flow of an ideal gas, [iso-9300]_ and [api-520]_; at the critical ratio this is the
    formula for choked flow.

    Examples
    --------
    >>> gas_outflow(
    ...     bore_area(0.004),
    ...     11e5,
    ...     101_325.0,
    ...     molar_mass=0.0280135,
    ...     temperature=293.15,
    ...     gamma=1.4,
    ...     discharge_coefficient=0.85,
    ... ).round(6)
    np.float64(0.027275)
    """
    before = positive("upstream_pressure", upstream_pressure)
    outside = positive("downstream_pressure", downstream_pressure)
    heats = _above_one(gamma)
    ratio = np.clip(outside / before, critical_pressure_ratio(heats), 1.0)
    expansion = ratio ** (2.0 / heats) - ratio ** ((heats + 1.0) / heats)
    function = np.sqrt(2.0 * heats / (heats - 1.0) * np.maximum(expansion, 0.0))
    still = GAS_CONSTANT * positive("temperature", temperature)
    free = non_negative("discharge_coefficient", discharge_coefficient) * non_negative("area", area)
    flow: Floats = free * before * np.sqrt(positive("molar_mass", molar_mass) / still) * function
    return flow


def _above_one(gamma: ArrayLike) -> Floats:
    ratio = np.asarray(gamma, dtype=np.float64)
    if not bool(np.all(np.isfinite(ratio) & (ratio > 1.0))):
        raise OutOfRange("gamma", "above 1 and finite")
    return ratio
