"""Properties of the fluids away from tabulated points, asked of the property library.

Alone in importing the library, and only once something is asked of it: the import takes seconds.
"""

from collections.abc import Callable, Mapping
from functools import lru_cache
from math import isfinite
from types import MappingProxyType
from typing import Final

from service.physics.errors import OutOfRange
from service.physics.fluids import FLUIDS

# Compressed hydrogen is warm, and so the normal mixture of its two forms; liquid that has stood for
# days is parahydrogen.
_GASES: Final[Mapping[str, str]] = MappingProxyType(
    {
        "nitrogen": "Nitrogen",
        "oxygen": "Oxygen",
        "argon": "Argon",
        "helium": "Helium",
        "hydrogen": "Hydrogen",
        "methane": "Methane",
        "neon": "Neon",
        "krypton": "Krypton",
        "xenon": "Xenon",
        "nitrous-oxide": "NitrousOxide",
        "air": "Air",
        "carbon-dioxide": "CarbonDioxide",
    }
)
_LIQUIDS: Final[Mapping[str, str]] = MappingProxyType({**_GASES, "hydrogen": "ParaHydrogen"})

# What a state on the saturation line is given by, and where that line ends.
_BOILING: Final = MappingProxyType(
    {"T": ("temperature", "Ttriple", "Tcrit"), "P": ("pressure", "ptriple", "pcrit")}
)

# A room asks for the same few states again and again.
_REMEMBERED: Final = 16_384


def gas_density_at(fluid_key: str, pressure: float, temperature: float) -> float:
    r"""Density of a fluid in the single phase that it has at a pressure and a temperature.

    Parameters
    ----------
    fluid_key : str
        One of `service.physics.fluids.FLUIDS`; hydrogen is the normal mixture.
    pressure : float
        Absolute pressure; above zero. [Pa]
    temperature : float
        Temperature; above zero. [K]

    Returns
    -------
    float
        Density, of the liquid where the pressure is above that of saturation. [kg/m3]

    Raises
    ------
    OutOfRange
        The fluid is none of those listed, the state is one for which its equation does not hold, or
        it lies on the saturation line, where two densities answer.

    Notes
    -----
    .. math:: p = \rho R T / M \, (1 + \delta \, \partial \alpha^r / \partial \delta)

    solved for the density; :math:`\alpha^r(\tau, \delta)` is the residual Helmholtz energy of the
    fluid's reference equation [property-library]_.

    Examples
    --------
    >>> round(gas_density_at("nitrogen", 20e6, 288.15), 1)
    223.2
    """
    return _ask(_name(fluid_key, _GASES), "D", "P", pressure, "T", temperature)


def saturation_pressure(fluid_key: str, temperature: float) -> float:
    r"""Pressure at which a fluid boils at a temperature.

    Parameters
    ----------
    fluid_key : str
        One of `service.physics.fluids.FLUIDS`.
    temperature : float
        Temperature, from the triple point to the critical point. [K]

    Returns
    -------
    float
        Absolute pressure; of air where its first bubble forms. [Pa]

    Raises
    ------
    OutOfRange
        The fluid is none of those listed, or there is no liquid at that temperature.

    Notes
    -----
    .. math:: g_l(p, T) = g_v(p, T)

    Equal Gibbs energies of the two phases, by the reference equations of [property-library]_.

    Examples
    --------
    >>> round(saturation_pressure("carbon-dioxide", 288.15) / 1e5, 2)
    50.87
    """
    return _boiling(fluid_key, "P", "T", temperature, 0.0)


def saturated_liquid_density(fluid_key: str, temperature: float) -> float:
    r"""Density of a boiling liquid at a temperature.

    Parameters
    ----------
    fluid_key : str
        One of `service.physics.fluids.FLUIDS`.
    temperature : float
        Temperature, from the triple point to the critical point. [K]

    Returns
    -------
    float
        Density of the liquid. [kg/m3]

    Raises
    ------
    OutOfRange
        The fluid is none of those listed, or there is no liquid at that temperature.

    Notes
    -----
    .. math:: g_l(\rho_l, T) = g_v(\rho_v, T), \quad p(\rho_l, T) = p(\rho_v, T)

    By the reference equations of [property-library]_.

    Examples
    --------
    >>> round(saturated_liquid_density("carbon-dioxide", 288.15), 1)
    821.2
    """
    return _boiling(fluid_key, "D", "T", temperature, 0.0)


def saturated_enthalpies(fluid_key: str, pressure: float) -> tuple[float, float]:
    r"""Specific enthalpies of a boiling liquid and of its vapour at a pressure.

    Parameters
    ----------
    fluid_key : str
        One of `service.physics.fluids.FLUIDS`; hydrogen is parahydrogen.
    pressure : float
        Absolute pressure, from the triple point to the critical point. [Pa]

    Returns
    -------
    tuple of float
        Of the liquid, of the vapour; their zero is arbitrary, so only differences mean something.
        [J/kg]

    Raises
    ------
    OutOfRange
        The fluid is none of those listed, or there is no boiling at that pressure.

    Notes
    -----
    .. math:: h_v - h_l = L

    By the reference equations of [property-library]_.

    Examples
    --------
    >>> liquid, vapour = saturated_enthalpies("nitrogen", 101325.0)
    >>> round((vapour - liquid) / 1000.0, 1)
    199.2
    """
    liquid, vapour = (_boiling(fluid_key, "H", "P", pressure, quality) for quality in (0.0, 1.0))
    return liquid, vapour


def gas_enthalpy(fluid_key: str, pressure: float, temperature: float) -> float:
    r"""Specific enthalpy of a fluid at a pressure and a temperature.

    Parameters
    ----------
    fluid_key : str
        One of `service.physics.fluids.FLUIDS`; hydrogen is parahydrogen.
    pressure : float
        Absolute pressure; above zero. [Pa]
    temperature : float
        Temperature; above zero. [K]

    Returns
    -------
    float
        Enthalpy, from the same arbitrary zero as `saturated_enthalpies`. [J/kg]

    Raises
    ------
    OutOfRange
        The fluid is none of those listed, or its equation does not hold for the state.

    Notes
    -----
    .. math:: h = u + p / \rho

    By the reference equations of [property-library]_.

    Examples
    --------
    >>> liquid, vapour = saturated_enthalpies("nitrogen", 101325.0)
    >>> round((gas_enthalpy("nitrogen", 101325.0, 293.15) - vapour) / 1000.0, 1)
    226.9
    """
    return _ask(_name(fluid_key, _LIQUIDS), "H", "P", pressure, "T", temperature)


def critical_point(fluid_key: str) -> tuple[float, float]:
    r"""Temperature and pressure above which a fluid has no boiling point.

    Parameters
    ----------
    fluid_key : str
        One of `service.physics.fluids.FLUIDS`.

    Returns
    -------
    tuple of float
        Temperature and absolute pressure. [K], [Pa]

    Raises
    ------
    OutOfRange
        The fluid is none of those listed.

    Notes
    -----
    .. math:: (\partial p / \partial \rho)_T = (\partial^2 p / \partial \rho^2)_T = 0

    By the reference equations of [property-library]_.

    Examples
    --------
    >>> temperature, pressure = critical_point("xenon")
    >>> round(temperature, 2), round(pressure / 1e5, 2)
    (289.73, 58.42)
    """
    name = _name(fluid_key, _LIQUIDS)
    temperature, pressure = (_ask(name, output) for output in ("Tcrit", "pcrit"))
    return temperature, pressure


def _name(fluid_key: str, names: Mapping[str, str]) -> str:
    if fluid_key not in names:
        raise OutOfRange("fluid_key", f"one of {', '.join(sorted(FLUIDS))}")
    return names[fluid_key]


def _boiling(fluid_key: str, output: str, given: str, value: float, quality: float) -> float:
    name = _name(fluid_key, _LIQUIDS)
    quantity, lowest, highest = _BOILING[given]
    # The library would go on below the triple point, where there is ice and no liquid.
    low, high = _ask(name, lowest), _ask(name, highest)
    if not low <= value <= high:
        raise OutOfRange(quantity, f"from {low:g} to {high:g}, where {fluid_key} boils")
    return _ask(name, output, given, value, "Q", quality)


@lru_cache(maxsize=_REMEMBERED)
def _ask(
    name: str,
    output: str,
    first: str = "",
    first_value: float = 0.0,
    second: str = "",
    second_value: float = 0.0,
) -> float:
    state = (first, first_value, second, second_value) if first else ()
    try:
        answer = float(_library()(output, *state, name))
    except ValueError as refused:
        raise OutOfRange("state", f"one that the equation of {name} holds for") from refused
    if not isfinite(answer):
        raise OutOfRange("state", f"one that the equation of {name} holds for")
    return answer


@lru_cache(maxsize=1)
def _library() -> Callable[..., float]:
    """Load the library at the first question: most commands and most rooms never ask one."""
    from CoolProp.CoolProp import PropsSI

    return PropsSI
