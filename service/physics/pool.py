"""Cold liquid on a floor: what the floor evaporates, spreading or held by a bund (methods G5)."""

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import Floats, non_negative, positive
from service.physics.constants import GRAVITY
from service.physics.errors import OutOfRange

# Depth at which a pool stops spreading on smooth concrete. [m]  Methods G5.
FILM: Final = 0.005
# Flux that boiling can take up at most: the order of the critical heat flux of nitrogen. [W/m2]
CRITICAL_FLUX: Final = 200_000.0
# Straight pieces that the slowing evaporation of a bund is laid out in. Where the last of it goes
# ten million times as late as the floor keeps up, eight lie less than a sixth above the curve.
_PIECES: Final = 8


@dataclass(frozen=True, slots=True)
class Floor:
    """What a floor is made of.

    Attributes
    ----------
    conductivity : float
        Of heat. [W/(m K)]
    diffusivity : float
        Thermal. [m2/s]
    """

    conductivity: float
    diffusivity: float

    def __post_init__(self) -> None:
        """Refuse what no floor can be made of."""
        positive("conductivity", self.conductivity)
        positive("diffusivity", self.diffusivity)

    @property
    def effusivity(self) -> float:
        """How readily it gives heat to a colder surface [W s^0.5/(m2 K)]."""
        return float(self.conductivity / np.sqrt(self.diffusivity))


# Stone mix, 2300 kg/m3 and 880 J/(kg K): the faster of the two sets in use. Incropera (from
# memory).
CONCRETE: Final = Floor(1.4, 1.4 / (2300.0 * 880.0))


def floor_heat(
    time: ArrayLike,
    temperature_difference: ArrayLike,
    *,
    floor: Floor = CONCRETE,
    highest_flux: float = np.inf,
) -> Floats:
    r"""Heat that each square metre of a floor has given to a cold pool by a time.

    Parameters
    ----------
    time : array_like, shape (...)
        Since the liquid met the floor; zero or more. [s]
    temperature_difference : array_like, shape (...)
        Floor before, less boiling point; zero or more. [K]
    floor : Floor, default concrete
        What it is made of.
    highest_flux : float, default none
        What boiling can take up at most. [W/m2]

    Returns
    -------
    ndarray, shape (...)
        Heat. [J/m2]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: Q = 2 k \, \Delta T \sqrt{\frac{t}{\pi \alpha}}

    A half-space whose surface is at the boiling point from the start, [carslaw-jaeger]_. With a
    highest flux :math:`q_m` the first :math:`t_m = (k \Delta T / q_m)^2 / (\pi \alpha)` go at that
    flux, and the heat later is less by :math:`q_m t_m`.

    Examples
    --------
    >>> floor_heat(10.0, 215.8).round(-3)
    np.float64(1296000.0)
    """
    since = non_negative("time", time)
    drop = non_negative("temperature_difference", temperature_difference)
    strength = floor.effusivity * drop / np.sqrt(np.pi)
    without: Floats = 2.0 * strength * np.sqrt(since)
    most = _highest(highest_flux)
    if np.isinf(most):
        return without
    until = (strength / most) ** 2
    return np.where(since <= until, most * since, without - most * until)


def floor_heat_flux(
    time: ArrayLike,
    temperature_difference: ArrayLike,
    *,
    floor: Floor = CONCRETE,
    highest_flux: float = np.inf,
) -> Floats:
    r"""Heat flux from a floor into a cold pool at a time.

    Parameters
    ----------
    time : array_like, shape (...)
        Since the liquid met the floor; above zero. [s]
    temperature_difference : array_like, shape (...)
        Floor before, less boiling point; zero or more. [K]
    floor : Floor, default concrete
        What it is made of.
    highest_flux : float, default none
        What boiling can take up at most. [W/m2]

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
    .. math:: q = \min\left(q_m, \; \frac{k \, \Delta T}{\sqrt{\pi \alpha t}}\right)

    The rate of change of `floor_heat`, [carslaw-jaeger]_.

    Examples
    --------
    >>> floor_heat_flux([0.1, 1.0], 215.8, highest_flux=200_000.0).round(-3)
    array([200000., 200000.])
    """
    drop = non_negative("temperature_difference", temperature_difference)
    flux = floor.effusivity * drop / np.sqrt(np.pi * positive("time", time))
    lower: Floats = np.minimum(flux, _highest(highest_flux))
    return lower


def evaporation_rate(
    time: ArrayLike,
    area: ArrayLike,
    temperature_difference: ArrayLike,
    latent_heat: ArrayLike,
    *,
    floor: Floor = CONCRETE,
    highest_flux: float = np.inf,
) -> Floats:
    r"""Liquid that a pool of steady area loses at a time.

    Parameters
    ----------
    time : array_like, shape (...)
        Since the liquid met the floor; above zero. [s]
    area : array_like, shape (...)
        Of the pool; zero or more. [m2]
    temperature_difference : array_like, shape (...)
        Floor before, less boiling point; zero or more. [K]
    latent_heat : array_like, shape (...)
        Of evaporation; above zero. [J/kg]
    floor : Floor, default concrete
        What it is made of.
    highest_flux : float, default none
        What boiling can take up at most. [W/m2]

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
    .. math:: \dot m = \frac{A}{L} \frac{k \, \Delta T}{\sqrt{\pi \alpha t}}

    By [carslaw-jaeger]_, as used for cold pools by [shaw-briscoe]_.

    Examples
    --------
    >>> evaporation_rate(10.0, 5.0, 215.8, 199_180.0).round(3)
    np.float64(1.627)
    """
    flux = floor_heat_flux(time, temperature_difference, floor=floor, highest_flux=highest_flux)
    flow: Floats = non_negative("area", area) / positive("latent_heat", latent_heat) * flux
    return flow


def time_to_evaporate(
    mass: ArrayLike,
    area: ArrayLike,
    temperature_difference: ArrayLike,
    latent_heat: ArrayLike,
    *,
    floor: Floor = CONCRETE,
    highest_flux: float = np.inf,
) -> Floats:
    r"""Time until a pool of steady area is gone.

    Parameters
    ----------
    mass : array_like, shape (...)
        Of the liquid; zero or more. [kg]
    area : array_like, shape (...)
        Of the pool; above zero. [m2]
    temperature_difference : array_like, shape (...)
        Floor before, less boiling point; above zero. [K]
    latent_heat : array_like, shape (...)
        Of evaporation; above zero. [J/kg]
    floor : Floor, default concrete
        What it is made of.
    highest_flux : float, default none
        What boiling can take up at most. [W/m2]

    Returns
    -------
    ndarray, shape (...)
        Time. [s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: t = \pi \alpha \left(\frac{m L}{2 A k \, \Delta T}\right)^2

    The inverse of `floor_heat`, [carslaw-jaeger]_. With a highest flux :math:`q_m` a pool that
    lasts beyond :math:`t_m` needs :math:`q_m t_m` more heat than that for its mass, one that does
    not is gone after :math:`m L / (A q_m)`: the uncapped time is the shorter, and so the cautious.

    Examples
    --------
    >>> time_to_evaporate(40.304, 5.0, 215.795, 199_180.0).round(2)
    np.float64(15.34)
    """
    mass_heat = non_negative("mass", mass) * positive("latent_heat", latent_heat)
    heat = mass_heat / positive("area", area)
    drop = positive("temperature_difference", temperature_difference)
    strength = floor.effusivity * drop / np.sqrt(np.pi)
    most = _highest(highest_flux)
    spared = strength**2 / most
    at_most = np.divide(heat, most)
    return np.where(heat <= spared, at_most, ((heat + spared) / (2.0 * strength)) ** 2)


def growing_pool_rate(
    time: ArrayLike,
    growth: ArrayLike,
    temperature_difference: ArrayLike,
    latent_heat: ArrayLike,
    *,
    floor: Floor = CONCRETE,
) -> Floats:
    r"""Liquid that a pool loses while it spreads at a steady rate.

    Parameters
    ----------
    time : array_like, shape (...)
        Since it began to spread; zero or more. [s]
    growth : array_like, shape (...)
        Of the radius squared; zero or more. [m2/s]
    temperature_difference : array_like, shape (...)
        Floor before, less boiling point; zero or more. [K]
    latent_heat : array_like, shape (...)
        Of evaporation; above zero. [J/kg]
    floor : Floor, default concrete
        What it is made of.

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
    .. math:: \dot m = \frac{k \, \Delta T}{L \sqrt{\pi \alpha}} \, \pi c \, 2 \sqrt{t}

    Each ring by its own time since it was wetted, [shaw-briscoe]_.

    Examples
    --------
    >>> growing_pool_rate(5.0, 1.0, 215.795, 199_180.0).round(2)
    np.float64(14.46)
    """
    drop = non_negative("temperature_difference", temperature_difference)
    strength = floor.effusivity * drop / np.sqrt(np.pi) / positive("latent_heat", latent_heat)
    wetted = np.pi * non_negative("growth", growth) * 2.0
    flow: Floats = strength * wetted * np.sqrt(non_negative("time", time))
    return flow


def spread_area(liquid_volume: ArrayLike, *, film: float = FILM) -> Floats:
    r"""Area that spilt liquid covers once it has spread.

    Parameters
    ----------
    liquid_volume : array_like, shape (...)
        Zero or more. [m3]
    film : float, default 0.005
        Depth at which it stops; above zero. [m]

    Returns
    -------
    ndarray, shape (...)
        Area. [m2]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: A = V / h_{min}

    By [yellow-book]_: 5 mm on smooth concrete, 10 mm on rough.

    Examples
    --------
    >>> spread_area([0.05])
    array([10.])
    """
    area: Floats = non_negative("liquid_volume", liquid_volume) / positive("film", film)
    return area


def time_to_spread(liquid_volume: ArrayLike, *, film: float = FILM) -> Floats:
    r"""Time in which liquid let go at once spreads to its last depth.

    Parameters
    ----------
    liquid_volume : array_like, shape (...)
        Above zero. [m3]
    film : float, default 0.005
        Depth at which it stops; above zero. [m]

    Returns
    -------
    ndarray, shape (...)
        Time. [s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: r^2 = t \sqrt{8 g V / \pi}

    Gravity against inertia, from a point: [shaw-briscoe]_.

    Examples
    --------
    >>> time_to_spread(0.05).round(2)
    np.float64(2.85)
    """
    volume = positive("liquid_volume", liquid_volume)
    time: Floats = spread_area(volume, film=film) / np.pi / np.sqrt(8.0 * GRAVITY * volume / np.pi)
    return time


def bund_segments(
    feed: ArrayLike,
    lasts: ArrayLike,
    area: ArrayLike,
    temperature_difference: ArrayLike,
    latent_heat: ArrayLike,
    *,
    longest: ArrayLike,
    floor: Floor = CONCRETE,
) -> tuple[Floats, Floats]:
    r"""Gas, by mass, of liquid that runs into a bund: steady mean rates, one after another.

    Parameters
    ----------
    feed : array_like, shape (rows,)
        Liquid that runs in; zero or more. [kg/s]
    lasts : array_like, shape (rows,)
        For how long; zero or more, or infinite. [s]
    area : array_like, shape (rows,)
        Of the floor inside the bund; above zero. [m2]
    temperature_difference : array_like, shape (rows,)
        Floor before, less boiling point; above zero. [K]
    latent_heat : array_like, shape (rows,)
        Of evaporation; above zero. [J/kg]
    longest : array_like, shape (rows,)
        What comes later is left out; above zero. [s]
    floor : Floor, default concrete
        What it is made of.

    Returns
    -------
    durations : ndarray, shape (rows, 9)
        Of the pieces. [s]
    rates : ndarray, shape (rows, 9)
        Mass flow of gas in each. [kg/s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: m(t) = \min\bigl(f \min(t, \tau),\; A \, Q(t) / L\bigr)

    with the heat :math:`Q` of `floor_heat`: by no time can more have evaporated than has run in, or
    than a floor that was wet from the start has given, [carslaw-jaeger]_. The curve is laid out in
    tangents, which lie above it: chords would lie below and let a pool evaporate later than it may.
    They end when all that has run in is gas, so that none is lost.

    Examples
    --------
    >>> durations, rates = bund_segments(
    ...     [0.5], [600.0], [2.0], [215.8], [199_180.0], longest=[345_600.0]
    ... )
    >>> (durations * rates).sum().round(9)
    np.float64(300.0)
    """
    flow, end = non_negative("feed", feed), positive("longest", longest)
    until = np.minimum(np.asarray(lasts, dtype=np.float64), end)
    until = non_negative("lasts", until)
    drop = positive("temperature_difference", temperature_difference)
    heat = positive("latent_heat", latent_heat)
    # Mass by the square root of time, from a floor that was wet from the start.
    strength = 2.0 * positive("area", area) * floor.effusivity * drop / np.sqrt(np.pi) / heat
    whole = flow * until
    keeps_up = np.divide(strength, flow, out=np.full(flow.shape, np.inf), where=flow > 0.0) ** 2
    first = np.minimum(keeps_up, until)
    dry = np.maximum((whole / strength) ** 2, first)
    ends, mass = _tangents(flow * first, first, whole, dry)
    begins = np.concatenate([np.zeros((first.size, 1)), ends], axis=1)
    gains = np.diff(np.concatenate([np.zeros((first.size, 1)), mass], axis=1), axis=1)
    lengths = np.diff(begins, axis=1)
    rates = np.divide(gains, lengths, out=np.zeros_like(gains), where=lengths > 0.0)
    cut = np.minimum(begins, end[:, np.newaxis])
    return np.diff(cut, axis=1), np.maximum(rates, 0.0)


def _tangents(begun: Floats, first: Floats, whole: Floats, dry: Floats) -> tuple[Floats, Floats]:
    """Ends of straight pieces above a root of time, and the mass by then: arrays (rows, 9).

    The curve goes by the square root of time from `begun` at `first` to `whole` at `dry`. Where
    those are one the pieces have no length.
    """
    growth = np.divide(dry, first, out=np.ones_like(dry), where=first > 0.0)[:, np.newaxis]
    # Touching points over the first time; two tangents of a root meet at their geometric mean. From
    # the last one it is half a step to the end, where the tangent meets a level line.
    touches = growth ** (np.arange(_PIECES) / (_PIECES - 0.5))
    roots = np.sqrt(touches)
    meets = roots[:, :-1] * roots[:, 1:]
    last = roots[:, -1:]
    over = 2.0 * last * np.sqrt(growth) - touches[:, -1:]
    times = first[:, np.newaxis] * np.concatenate([np.ones_like(last), meets, over], axis=1)
    # Touching points a rounding apart must not end before they begin.
    times = np.maximum.accumulate(times, axis=1)
    risen = begun[:, np.newaxis] * 0.5 * (roots[:, :-1] + roots[:, 1:])
    mass = np.concatenate([begun[:, np.newaxis], risen, whole[:, np.newaxis]], axis=1)
    return times, np.minimum(mass, whole[:, np.newaxis])


def _highest(flux: float) -> float:
    # Infinite is no cap; asked for what must hold, so that not-a-number is refused.
    if not flux > 0.0:
        raise OutOfRange("highest_flux", "above 0")
    return float(flux)
