"""Gas released into a ventilated, well-mixed room (methods D).

The state is the released-gas fraction G of V dG/dt = D - W G: D is the flow of released gas that
counts in the fraction, W all that leaves. Oxygen follows from it as C0 (1 - G).
"""

from collections.abc import Callable
from typing import Literal, TypeAlias

import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import (
    Floats,
    Integers,
    finite,
    fraction,
    non_negative,
    positive,
    quotient,
)
from service.physics.constants import OXYGEN_IN_AIR
from service.physics.course import Course, ends_of_segments
from service.physics.errors import OutOfRange
from service.physics.relaxation import gained_share, kept_share, relaxed, time_between
from service.physics.roots import smallest_enough

Direction: TypeAlias = Literal["rising", "falling"]

# A gas of pure oxygen counts as (1 - C0)/C0 times its flow, the most that any gas does.
_MOST_COUNTED = (1.0 - OXYGEN_IN_AIR) / OXYGEN_IN_AIR * (1.0 + 1e-9)


def oxygen_from_fraction(released: ArrayLike) -> Floats:
    r"""Oxygen fraction of a room with a released-gas fraction.

    Parameters
    ----------
    released : array_like, shape (...)
        Released-gas fraction; negative where gas richer in oxygen than air was released. [1]

    Returns
    -------
    ndarray, shape (...)
        Oxygen fraction by volume. [1]

    Raises
    ------
    OutOfRange
        The fraction is not finite.

    Notes
    -----
    .. math:: C = C_0 (1 - G)

    Exact for every case of [laboratory-odh]_, whose balance of oxygen is rearranged here.

    Examples
    --------
    >>> oxygen_from_fraction([0.0, 0.5])
    array([0.2095 , 0.10475])
    """
    return OXYGEN_IN_AIR * (1.0 - finite("released", released))


def fraction_from_oxygen(oxygen: ArrayLike) -> Floats:
    r"""Released-gas fraction of a room with an oxygen fraction.

    Parameters
    ----------
    oxygen : array_like, shape (...)
        Oxygen fraction by volume, 0 to 1. [1]

    Returns
    -------
    ndarray, shape (...)
        Released-gas fraction; negative where the room has more oxygen than air. [1]

    Raises
    ------
    OutOfRange
        The fraction is outside its range or not a number.

    Notes
    -----
    .. math:: G = 1 - C / C_0

    Exact for every case of [laboratory-odh]_, whose balance of oxygen is rearranged here.

    Examples
    --------
    >>> fraction_from_oxygen([0.2095, 0.10475])
    array([0. , 0.5])
    """
    return (OXYGEN_IN_AIR - fraction("oxygen", oxygen)) / OXYGEN_IN_AIR


def dilution_rate(release: ArrayLike, oxygen_in_gas: ArrayLike = 0.0) -> Floats:
    r"""Flow of gas without oxygen that would take oxygen from a room as a release does.

    Parameters
    ----------
    release : array_like, shape (...)
        Gas released, at room temperature and pressure; zero or more. [m3/s]
    oxygen_in_gas : array_like, shape (...), default 0
        Oxygen fraction of that gas itself. [1]

    Returns
    -------
    ndarray, shape (...)
        What `dilution` means throughout; negative for a gas richer in oxygen than air. [m3/s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: D = R (1 - y / C_0)

    From the balance of oxygen of [laboratory-odh]_, with the oxygen of the gas added.

    Examples
    --------
    >>> dilution_rate([0.1, 0.1], [0.0, 0.2095])
    array([0.1, 0. ])
    """
    return non_negative("release", release) * fraction_from_oxygen(
        fraction("oxygen_in_gas", oxygen_in_gas)
    )


def outflow(release: ArrayLike, supply: ArrayLike, exhaust: ArrayLike) -> Floats:
    r"""Flow of mixture that leaves a room, by its fans and by its leaks.

    Parameters
    ----------
    release : array_like, shape (...)
        Gas released, at room temperature and pressure; zero or more. [m3/s]
    supply : array_like, shape (...)
        Outdoor air blown in; zero or more. [m3/s]
    exhaust : array_like, shape (...)
        Mixture drawn out; zero or more. [m3/s]

    Returns
    -------
    ndarray, shape (...)
        Outflow, broadcast over the inputs. [m3/s]

    Raises
    ------
    OutOfRange
        An input is negative or not a number.

    Notes
    -----
    .. math:: W = \max(Q_s + R,\; Q_e)

    The volume balance of [laboratory-odh]_ for supply and exhaust at once: a surplus leaks out, and
    what an exhaust wants beyond it leaks in as outdoor air.

    Examples
    --------
    >>> outflow([0.05, 0.05], 0.1, [0.12, 0.2])
    array([0.15, 0.2 ])
    """
    pushed = non_negative("supply", supply) + non_negative("release", release)
    return np.maximum(pushed, non_negative("exhaust", exhaust))


def counted(release: ArrayLike, dilution: ArrayLike | None) -> Floats:
    r"""Check the part of a release that counts in the fraction, all of it unless said otherwise.

    Parameters
    ----------
    release : array_like, shape (...)
        Gas released, at room temperature and pressure; zero or more. [m3/s]
    dilution : array_like, shape (...), or None
        The part that counts, by `dilution_rate` or of one gas among several. [m3/s]

    Returns
    -------
    ndarray, shape (...)
        The part that counts. [m3/s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number; the part is more than any gas can count for.

    Notes
    -----
    The bound :math:`|D| \le R (1 - C_0) / C_0` is pure oxygen's, by the balance of
    [laboratory-odh]_.

    Examples
    --------
    >>> counted([0.1], None)
    array([0.1])
    """
    flow = non_negative("release", release)
    if dilution is None:
        return flow
    part = finite("dilution", dilution)
    if not bool(np.all(np.abs(part) <= flow * _MOST_COUNTED)):
        raise OutOfRange("dilution", "no more than the release can count for")
    return part


def steady_fraction(
    release: ArrayLike,
    supply: ArrayLike,
    exhaust: ArrayLike,
    *,
    dilution: ArrayLike | None = None,
    start: ArrayLike = 0.0,
) -> Floats:
    r"""Released-gas fraction that a room tends to under steady flows.

    Parameters
    ----------
    release : array_like, shape (...)
        Gas released, at room temperature and pressure; zero or more. [m3/s]
    supply : array_like, shape (...)
        Outdoor air blown in; zero or more. [m3/s]
    exhaust : array_like, shape (...)
        Mixture drawn out; zero or more. [m3/s]
    dilution : array_like, shape (...), default `release`
        The part of the release that counts, by `dilution_rate`. [m3/s]
    start : array_like, shape (...), default 0
        Released-gas fraction at the start, which stays where nothing flows. [1]

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
    .. math:: G_s = D / W

    The steady states of [laboratory-odh]_ in one form. An exhaust smaller than the release does
    nothing: the room fills with gas.

    Examples
    --------
    >>> steady_fraction(0.05, [0.2, 0.0, 0.0], [0.0, 0.2, 0.03])
    array([0.2 , 0.25, 1.  ])
    """
    part = counted(release, dilution)
    return quotient(part, outflow(release, supply, exhaust), where_zero=finite("start", start))


def fraction_after(
    duration: ArrayLike,
    *,
    release: ArrayLike,
    supply: ArrayLike,
    exhaust: ArrayLike,
    volume: ArrayLike,
    start: ArrayLike = 0.0,
    dilution: ArrayLike | None = None,
) -> Floats:
    r"""Released-gas fraction of a room after some time under steady flows.

    Parameters
    ----------
    duration : array_like, shape (...)
        Time since the start; zero or more. [s]
    release : array_like, shape (...)
        Gas released, at room temperature and pressure; zero or more. [m3/s]
    supply : array_like, shape (...)
        Outdoor air blown in; zero or more. [m3/s]
    exhaust : array_like, shape (...)
        Mixture drawn out; zero or more. [m3/s]
    volume : array_like, shape (...)
        Net volume of the room; above zero. [m3]
    start : array_like, shape (...), default 0
        Released-gas fraction at the start. [1]
    dilution : array_like, shape (...), default `release`
        The part of the release that counts, by `dilution_rate`. [m3/s]

    Returns
    -------
    ndarray, shape (...)
        Released-gas fraction, broadcast over the inputs; the start where nothing flows. [1]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: G = G_s + (G_0 - G_s) e^{-W t / V}

    The closed forms of [laboratory-odh]_ in one, solved by volume balance for supply and exhaust at
    once.

    Examples
    --------
    >>> fraction_after(
    ...     [0.0, 600.0], release=0.05, supply=0.2, exhaust=0.0, volume=100.0
    ... ).round(6)
    array([0.      , 0.155374])
    """
    before = finite("start", start)
    steady = steady_fraction(release, supply, exhaust, dilution=dilution, start=before)
    rate = outflow(release, supply, exhaust) / positive("volume", volume)
    return relaxed(before, steady, rate * non_negative("duration", duration))


def mean_fraction(
    duration: ArrayLike,
    *,
    release: ArrayLike,
    supply: ArrayLike,
    exhaust: ArrayLike,
    volume: ArrayLike,
    start: ArrayLike = 0.0,
    dilution: ArrayLike | None = None,
) -> Floats:
    r"""Released-gas fraction of a room as its mean over a time under steady flows.

    Parameters
    ----------
    duration : array_like, shape (...)
        Time since the start, over which the mean is taken; zero or more. [s]
    release : array_like, shape (...)
        Gas released, at room temperature and pressure; zero or more. [m3/s]
    supply : array_like, shape (...)
        Outdoor air blown in; zero or more. [m3/s]
    exhaust : array_like, shape (...)
        Mixture drawn out; zero or more. [m3/s]
    volume : array_like, shape (...)
        Net volume of the room; above zero. [m3]
    start : array_like, shape (...), default 0
        Released-gas fraction at the start. [1]
    dilution : array_like, shape (...), default `release`
        The part of the release that counts, by `dilution_rate`. [m3/s]

    Returns
    -------
    ndarray, shape (...)
        Mean fraction, broadcast over the inputs; the start for a duration of zero. [1]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: \bar G = G_s + (G_0 - G_s) \frac{1 - e^{-n}}{n}, \quad n = W t / V

    The integral of `fraction_after`, by [laboratory-odh]_.

    Examples
    --------
    >>> mean_fraction(
    ...     [0.0, 1000.0], release=0.0, supply=0.1, exhaust=0.0, volume=100.0, start=0.5
    ... ).round(5)
    array([0.5    , 0.31606])
    """
    before = finite("start", start)
    steady = steady_fraction(release, supply, exhaust, dilution=dilution, start=before)
    rate = outflow(release, supply, exhaust) / positive("volume", volume)
    turnovers = rate * non_negative("duration", duration)
    return before * kept_share(turnovers) + steady * gained_share(turnovers)


def time_to_fraction(
    target: ArrayLike,
    *,
    release: ArrayLike,
    supply: ArrayLike,
    exhaust: ArrayLike,
    volume: ArrayLike,
    direction: Direction,
    start: ArrayLike = 0.0,
    dilution: ArrayLike | None = None,
) -> Floats:
    r"""Time until a room reaches a released-gas fraction under steady flows.

    Parameters
    ----------
    target : array_like, shape (...)
        Released-gas fraction to reach. [1]
    release : array_like, shape (...)
        Gas released, at room temperature and pressure; zero or more. [m3/s]
    supply : array_like, shape (...)
        Outdoor air blown in; zero or more. [m3/s]
    exhaust : array_like, shape (...)
        Mixture drawn out; zero or more. [m3/s]
    volume : array_like, shape (...)
        Net volume of the room; above zero. [m3]
    direction : {"rising", "falling"}
        Whether the fraction is to be at or above the target, or at or below it.
    start : array_like, shape (...), default 0
        Released-gas fraction at the start. [1]
    dilution : array_like, shape (...), default `release`
        The part of the release that counts, by `dilution_rate`. [m3/s]

    Returns
    -------
    ndarray, shape (...)
        Time, broadcast over the inputs; 0 where the start is there already, not-a-number where the
        target is never reached. [s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: t = \frac{V}{W} \ln\frac{G_0 - G_s}{G_t - G_s}

    `fraction_after` solved for the time, by [laboratory-odh]_. A target equal to the steady
    state is never reached.

    Examples
    --------
    >>> time_to_fraction(
    ...     [0.1, 0.3], release=0.05, supply=0.2, exhaust=0.0, volume=100.0, direction="rising"
    ... ).round(2)
    array([277.26,    nan])
    """
    before, sought = finite("start", start), finite("target", target)
    steady = steady_fraction(release, supply, exhaust, dilution=dilution, start=before)
    rate = outflow(release, supply, exhaust) / positive("volume", volume)
    there = before >= sought if _rising(direction) else before <= sought
    return np.where(there, 0.0, time_between(before, sought, steady, rate))


def _rising(direction: Direction) -> bool:
    if direction not in ("rising", "falling"):
        raise OutOfRange("direction", "rising or falling")
    return direction == "rising"


def supply_to_hold(
    limit: ArrayLike,
    *,
    release: ArrayLike,
    exhaust: ArrayLike = 0.0,
    dilution: ArrayLike | None = None,
) -> Floats:
    r"""Smallest supply of outdoor air that holds a steady release at a released-gas fraction.

    Parameters
    ----------
    limit : array_like, shape (...)
        Released-gas fraction that must not be exceeded; above zero. [1]
    release : array_like, shape (...)
        Gas released, at room temperature and pressure; zero or more. [m3/s]
    exhaust : array_like, shape (...), default 0
        Mixture drawn out besides; zero or more. [m3/s]
    dilution : array_like, shape (...), default `release`
        The part of the release that counts, by `dilution_rate`. [m3/s]

    Returns
    -------
    ndarray, shape (...)
        Supply, broadcast over the inputs; 0 where the limit holds without. [m3/s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: Q_s = D / G_t - R

    The steady state of [laboratory-odh]_ solved for the fan.

    Examples
    --------
    >>> supply_to_hold([0.2], release=0.05).round(6)
    array([0.2])
    """
    needed = counted(release, dilution) / positive("limit", limit)
    drawn = non_negative("exhaust", exhaust)
    missing = np.clip(needed - non_negative("release", release), 0.0, None)
    return np.where(drawn >= needed, 0.0, missing)


def exhaust_to_hold(
    limit: ArrayLike,
    *,
    release: ArrayLike,
    supply: ArrayLike = 0.0,
    dilution: ArrayLike | None = None,
) -> Floats:
    r"""Smallest exhaust that holds a steady release at a released-gas fraction.

    Parameters
    ----------
    limit : array_like, shape (...)
        Released-gas fraction that must not be exceeded; above zero. [1]
    release : array_like, shape (...)
        Gas released, at room temperature and pressure; zero or more. [m3/s]
    supply : array_like, shape (...), default 0
        Outdoor air blown in besides; zero or more. [m3/s]
    dilution : array_like, shape (...), default `release`
        The part of the release that counts, by `dilution_rate`. [m3/s]

    Returns
    -------
    ndarray, shape (...)
        Exhaust, broadcast over the inputs; 0 where the limit holds without. [m3/s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: Q_e = D / G_t

    The steady state of [laboratory-odh]_ solved for the fan. It is the whole exhaust, not
    an addition to the supply: one smaller than supply and release together does nothing.

    Examples
    --------
    >>> exhaust_to_hold([0.25], release=0.05).round(6)
    array([0.2])
    """
    needed = counted(release, dilution) / positive("limit", limit)
    pushed = non_negative("supply", supply) + non_negative("release", release)
    return np.where(pushed >= needed, 0.0, needed)


def supply_to_hold_oxygen(
    oxygen: ArrayLike,
    *,
    release: ArrayLike,
    exhaust: ArrayLike = 0.0,
    dilution: ArrayLike | None = None,
) -> Floats:
    r"""Smallest supply of outdoor air that holds a steady release at an oxygen fraction.

    Parameters
    ----------
    oxygen : array_like, shape (...)
        Oxygen fraction that must be kept; below 0.2095. [1]
    release : array_like, shape (...)
        Gas released, at room temperature and pressure; zero or more. [m3/s]
    exhaust : array_like, shape (...), default 0
        Mixture drawn out besides; zero or more. [m3/s]
    dilution : array_like, shape (...), default `release`
        The part of the release that counts, by `dilution_rate`. [m3/s]

    Returns
    -------
    ndarray, shape (...)
        Supply, broadcast over the inputs; 0 where the mark holds without. [m3/s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: Q_s = R \, C_t / (C_0 - C_t)

    for a gas without oxygen, by [laboratory-odh]_.

    Examples
    --------
    >>> supply_to_hold_oxygen([0.195], release=0.05).round(5)
    array([0.67241])
    """
    limit = _limit_of_oxygen(oxygen)
    return supply_to_hold(limit, release=release, exhaust=exhaust, dilution=dilution)


def exhaust_to_hold_oxygen(
    oxygen: ArrayLike,
    *,
    release: ArrayLike,
    supply: ArrayLike = 0.0,
    dilution: ArrayLike | None = None,
) -> Floats:
    r"""Smallest exhaust that holds a steady release at an oxygen fraction.

    Parameters
    ----------
    oxygen : array_like, shape (...)
        Oxygen fraction that must be kept; below 0.2095. [1]
    release : array_like, shape (...)
        Gas released, at room temperature and pressure; zero or more. [m3/s]
    supply : array_like, shape (...), default 0
        Outdoor air blown in besides; zero or more. [m3/s]
    dilution : array_like, shape (...), default `release`
        The part of the release that counts, by `dilution_rate`. [m3/s]

    Returns
    -------
    ndarray, shape (...)
        Exhaust, broadcast over the inputs; 0 where the mark holds without. [m3/s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: Q_e = R \, C_0 / (C_0 - C_t)

    for a gas without oxygen, by [laboratory-odh]_.

    Examples
    --------
    >>> exhaust_to_hold_oxygen([0.195], release=0.05).round(5)
    array([0.72241])
    """
    limit = _limit_of_oxygen(oxygen)
    return exhaust_to_hold(limit, release=release, supply=supply, dilution=dilution)


def _limit_of_oxygen(oxygen: ArrayLike) -> Floats:
    limit = fraction_from_oxygen(oxygen)
    if not bool(np.all(limit > 0.0)):
        raise OutOfRange("oxygen", f"below {OXYGEN_IN_AIR:g}")
    return limit


def purge_time(
    start: ArrayLike, target: ArrayLike, *, volume: ArrayLike, flow: ArrayLike
) -> Floats:
    r"""Time that outdoor air needs to clear a room once the release has ended.

    Parameters
    ----------
    start : array_like, shape (...)
        Released-gas fraction at the start; zero or more. [1]
    target : array_like, shape (...)
        Released-gas fraction to come down to; above zero. [1]
    volume : array_like, shape (...)
        Net volume of the room; above zero. [m3]
    flow : array_like, shape (...)
        Outdoor air supplied or mixture exhausted; above zero. [m3/s]

    Returns
    -------
    ndarray, shape (...)
        Time, broadcast over the inputs; 0 where the start is at the target or below. [s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: t = \frac{V}{Q} \ln\frac{G_0}{G_t}

    By [laboratory-odh]_; in oxygen :math:`(V/Q) \ln[(C_0 - C_i)/(C_0 - C_t)]`.

    Examples
    --------
    >>> purge_time([0.5], 0.05, volume=100.0, flow=0.2).round(1)
    array([1151.3])
    """
    room = positive("volume", volume) / positive("flow", flow)
    return room * _air_changes(start, target)


def flow_to_restore(
    start: ArrayLike, target: ArrayLike, *, volume: ArrayLike, within: ArrayLike
) -> Floats:
    r"""Flow of outdoor air that clears a room within a time once the release has ended.

    Parameters
    ----------
    start : array_like, shape (...)
        Released-gas fraction at the start; zero or more. [1]
    target : array_like, shape (...)
        Released-gas fraction to come down to; above zero. [1]
    volume : array_like, shape (...)
        Net volume of the room; above zero. [m3]
    within : array_like, shape (...)
        Time allowed; above zero. [s]

    Returns
    -------
    ndarray, shape (...)
        Flow, broadcast over the inputs; 0 where the start is at the target or below. [m3/s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: Q = \frac{V}{t} \ln\frac{G_0}{G_t}

    `purge_time` solved for the flow, by [laboratory-odh]_.

    Examples
    --------
    >>> flow_to_restore([0.5], 0.05, volume=100.0, within=3600.0).round(5)
    array([0.06396])
    """
    room = positive("volume", volume) / positive("within", within)
    return room * _air_changes(start, target)


def _air_changes(start: ArrayLike, target: ArrayLike) -> Floats:
    ratio = non_negative("start", start) / positive("target", target)
    return np.log(np.maximum(ratio, 1.0))


def course(
    durations: ArrayLike,
    *,
    release: ArrayLike,
    supply: ArrayLike,
    exhaust: ArrayLike,
    volume: ArrayLike,
    start: ArrayLike = 0.0,
    dilution: ArrayLike | None = None,
) -> Course:
    r"""Solve many rooms at once, each through its own segments of steady flows.

    Parameters
    ----------
    durations : array_like, shape (rows, segments)
        Length of each segment; one of zero is padding and changes nothing. [s]
    release : array_like, shape (rows, segments)
        Gas released, at room temperature and pressure; zero or more. [m3/s]
    supply : array_like, shape (rows, segments)
        Outdoor air blown in; zero or more. [m3/s]
    exhaust : array_like, shape (rows, segments)
        Mixture drawn out; zero or more. [m3/s]
    volume : array_like, shape (rows,)
        Net volume of each room; above zero. [m3]
    start : array_like, shape (rows,), default 0
        Released-gas fraction at the start. [1]
    dilution : array_like, shape (rows, segments), default `release`
        The part of the release that counts, by `dilution_rate`. [m3/s]

    Returns
    -------
    Course
        Fractions, times and extremes, row by row.

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number, or durations have another shape.

    Notes
    -----
    .. math:: G_{i+1} = G_{s,i} + (G_i - G_{s,i}) e^{-W_i t_i / V}

    The exact stepping of [laboratory-odh]_. All other inputs broadcast to the durations.

    Examples
    --------
    >>> run = course([[300.0, 600.0]], release=[[0.1, 0.0]], supply=0.2, exhaust=0.0, volume=100.0)
    >>> run.ends.round(6)
    array([[0.      , 0.19781 , 0.059579]])
    >>> run.highest.round(6), run.at
    (array([0.19781]), array([300.]))
    """
    lengths = _durations(durations)
    rows, segments = lengths.shape
    before = _by_row("start", finite("start", start), lengths)
    room = _by_row("volume", positive("volume", volume), lengths)[:, np.newaxis]
    rates = _by_segment(outflow(release, supply, exhaust), lengths) / room
    turnovers = rates * lengths
    # Where nothing flows, the steady state of a segment is the fraction it finds; the rate of
    # zero keeps that, whatever number stands here.
    steady = _by_segment(steady_fraction(release, supply, exhaust, dilution=dilution), lengths)
    times = np.zeros((rows, segments + 1))
    np.cumsum(lengths, axis=1, out=times[:, 1:])
    return Course(times, ends_of_segments(before, steady, turnovers), steady, rates)


def _durations(durations: ArrayLike) -> Floats:
    lengths = non_negative("durations", durations)
    if lengths.ndim != 2:
        raise OutOfRange("durations", "of shape (rows, segments)")
    return lengths


def _by_segment(values: ArrayLike, lengths: Floats) -> Floats:
    return np.broadcast_to(np.asarray(values, dtype=np.float64), lengths.shape)


def _by_row(name: str, values: Floats, lengths: Floats) -> Floats:
    rows = lengths.shape[0]
    if values.shape not in ((), (1,), (rows,)):
        raise OutOfRange(name, "one number, or one for each row")
    return np.broadcast_to(values, (rows,))


def smallest_supply_to_hold_course(
    limit: ArrayLike,
    *,
    durations: ArrayLike,
    release: ArrayLike,
    volume: ArrayLike,
    exhaust: ArrayLike = 0.0,
    start: ArrayLike = 0.0,
    dilution: ArrayLike | None = None,
) -> Floats:
    r"""Smallest constant supply that keeps a whole course at or below a released-gas fraction.

    Parameters
    ----------
    limit : array_like, shape () or (rows,)
        Released-gas fraction that must not be exceeded; above zero. [1]
    durations : array_like, shape (rows, segments)
        Length of each segment; one of zero is padding and changes nothing. [s]
    release : array_like, shape (rows, segments)
        Gas released, at room temperature and pressure; zero or more. [m3/s]
    volume : array_like, shape (rows,)
        Net volume of each room; above zero. [m3]
    exhaust : array_like, shape (rows, segments), default 0
        Mixture drawn out besides; zero or more. [m3/s]
    start : array_like, shape (rows,), default 0
        Released-gas fraction at the start. [1]
    dilution : array_like, shape (rows, segments), default `release`
        The part of the release that counts, by `dilution_rate`. [m3/s]

    Returns
    -------
    ndarray, shape (rows,)
        Supply, to 1e-9 of itself from the side that holds; 0 where the course holds without,
        not-a-number where the start is above the limit and no flow can. [m3/s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    The root of the highest fraction of `course`, which never rises with the flow; bounded by
    `supply_to_hold` for the segment that needs most. See [laboratory-odh]_ and [chandrupatla]_.

    Examples
    --------
    >>> smallest_supply_to_hold_course(
    ...     0.1, durations=[[600.0], [1e7]], release=0.05, volume=100.0
    ... ).round(5)
    array([0.42024, 0.45   ])
    """
    lengths, part = _durations(durations), counted(release, dilution)
    pushed, drawn = _by_segment(release, lengths), _by_segment(exhaust, lengths)
    limits = _by_row("limit", positive("limit", limit), lengths)
    needed = supply_to_hold(limits[:, np.newaxis], release=pushed, exhaust=drawn, dilution=part)

    def leaving(rows: Integers, supply: Floats) -> Floats:
        return np.maximum(supply[:, np.newaxis] + pushed[rows], drawn[rows])

    return _smallest_to_hold(limits, lengths, part, volume, start, needed, leaving)


def smallest_exhaust_to_hold_course(
    limit: ArrayLike,
    *,
    durations: ArrayLike,
    release: ArrayLike,
    volume: ArrayLike,
    supply: ArrayLike = 0.0,
    start: ArrayLike = 0.0,
    dilution: ArrayLike | None = None,
) -> Floats:
    r"""Smallest constant exhaust that keeps a whole course at or below a released-gas fraction.

    Parameters
    ----------
    limit : array_like, shape () or (rows,)
        Released-gas fraction that must not be exceeded; above zero. [1]
    durations : array_like, shape (rows, segments)
        Length of each segment; one of zero is padding and changes nothing. [s]
    release : array_like, shape (rows, segments)
        Gas released, at room temperature and pressure; zero or more. [m3/s]
    volume : array_like, shape (rows,)
        Net volume of each room; above zero. [m3]
    supply : array_like, shape (rows, segments), default 0
        Outdoor air blown in besides; zero or more. [m3/s]
    start : array_like, shape (rows,), default 0
        Released-gas fraction at the start. [1]
    dilution : array_like, shape (rows, segments), default `release`
        The part of the release that counts, by `dilution_rate`. [m3/s]

    Returns
    -------
    ndarray, shape (rows,)
        Exhaust, to 1e-9 of itself from the side that holds; 0 where the course holds without,
        not-a-number where the start is above the limit and no flow can. [m3/s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    The root of the highest fraction of `course`, which never rises with the flow; bounded by
    `exhaust_to_hold` for the segment that needs most. It is the whole exhaust: one smaller than
    supply and release together does nothing. See [laboratory-odh]_ and [chandrupatla]_.

    Examples
    --------
    >>> smallest_exhaust_to_hold_course(
    ...     0.1, durations=[[600.0], [1e7], [100.0]], release=0.05, volume=100.0
    ... ).round(5)
    array([0.47024, 0.5    , 0.     ])
    """
    lengths, part = _durations(durations), counted(release, dilution)
    pushed = _by_segment(non_negative("release", release) + non_negative("supply", supply), lengths)
    limits = _by_row("limit", positive("limit", limit), lengths)
    needed = exhaust_to_hold(limits[:, np.newaxis], release=release, supply=supply, dilution=part)

    def leaving(rows: Integers, exhaust: Floats) -> Floats:
        return np.maximum(pushed[rows], exhaust[:, np.newaxis])

    return _smallest_to_hold(limits, lengths, part, volume, start, needed, leaving)


def _smallest_to_hold(
    limits: Floats,
    lengths: Floats,
    part: Floats,
    volume: ArrayLike,
    start: ArrayLike,
    needed: Floats,
    leaving: Callable[[Integers, Floats], Floats],
) -> Floats:
    """Smallest flow, given the outflow that rows have under a flow, and each segment's need."""
    before = _by_row("start", finite("start", start), lengths)
    inverse = lengths / _by_row("volume", positive("volume", volume), lengths)[:, np.newaxis]
    part = _by_segment(part, lengths)
    able = np.flatnonzero(before <= limits)

    def excess(chosen: Integers, flow: Floats) -> Floats:
        rows = able[chosen]
        out = leaving(rows, flow)
        steady = quotient(part[rows], out, where_zero=0.0)
        ends = ends_of_segments(before[rows], steady, out * inverse[rows])
        highest: Floats = ends.max(axis=1)
        return highest - limits[rows]

    # A hair above the need, so that rounding does not leave the bracket short of the root.
    most = np.where(lengths > 0.0, needed, 0.0).max(axis=1, initial=0.0) * (1.0 + 1e-12)
    flows = np.full(limits.shape, np.nan)
    flows[able] = smallest_enough(excess, most[able])
    return flows
