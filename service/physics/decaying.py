"""A release that dies away exponentially, R = R0 exp(-lambda t) (methods D7 and D8)."""

import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import Floats, fraction, non_negative, positive, quotient
from service.physics.constants import OXYGEN_IN_AIR
from service.physics.relaxation import LONGEST, kept_share
from service.physics.ventilation import fraction_from_oxygen, oxygen_from_fraction

# exp(-45) is below the last figure of a fraction: what lies so far back has no say.
_FORGOTTEN = 45.0
# Nodes in a panel over which no exponent moves by more than two: good to the last figure.
_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(12)
_PANEL = 2.0


def oxygen_with_decaying_source_closed_room(
    time: ArrayLike,
    *,
    initial_release: ArrayLike,
    decay_rate: ArrayLike,
    volume: ArrayLike,
    oxygen_before: ArrayLike = OXYGEN_IN_AIR,
) -> Floats:
    r"""Oxygen fraction of a room without ventilation while a release dies away.

    Parameters
    ----------
    time : array_like, shape (...)
        Time since the release began; zero or more. [s]
    initial_release : array_like, shape (...)
        Flow at the beginning, at room temperature and pressure; zero or more. [m3/s]
    decay_rate : array_like, shape (...)
        Rate lambda at which the flow dies away; above zero. [1/s]
    volume : array_like, shape (...)
        Net volume of the room; above zero. [m3]
    oxygen_before : array_like, shape (...), default 0.2095
        Oxygen fraction before the release. [1]

    Returns
    -------
    ndarray, shape (...)
        Oxygen fraction, broadcast over the inputs. [1]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: C = C_i \exp\left[-\frac{R_0}{\lambda V} (1 - e^{-\lambda t})\right]

    By [laboratory-odh]_. The end is that of all the gas mixed at once, `oxygen_after_mixing`.

    Examples
    --------
    >>> oxygen_with_decaying_source_closed_room(
    ...     [0.0, 1e6], initial_release=0.15, decay_rate=0.005, volume=100.0
    ... ).round(5)
    array([0.2095, 0.1552])
    """
    released = _released_volumes(
        non_negative("time", time),
        non_negative("initial_release", initial_release) / positive("volume", volume),
        positive("decay_rate", decay_rate),
    )
    return fraction("oxygen_before", oxygen_before) * _decayed(released)


def oxygen_with_decaying_source_exhaust(
    time: ArrayLike,
    *,
    initial_release: ArrayLike,
    decay_rate: ArrayLike,
    exhaust: ArrayLike,
    volume: ArrayLike,
    oxygen_before: ArrayLike = OXYGEN_IN_AIR,
) -> Floats:
    r"""Oxygen fraction of a room with exhaust while a release dies away.

    Parameters
    ----------
    time : array_like, shape (...)
        Time since the release began; zero or more. [s]
    initial_release : array_like, shape (...)
        Flow at the beginning, at room temperature and pressure; zero or more. [m3/s]
    decay_rate : array_like, shape (...)
        Rate lambda at which the flow dies away; above zero. [1/s]
    exhaust : array_like, shape (...)
        Mixture drawn out; zero or more. [m3/s]
    volume : array_like, shape (...)
        Net volume of the room; above zero. [m3]
    oxygen_before : array_like, shape (...), default 0.2095
        Oxygen fraction before the release. [1]

    Returns
    -------
    ndarray, shape (...)
        Oxygen fraction, broadcast over the inputs. [1]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: C = C_0 \left[1 - \frac{R_0}{V} \frac{e^{-\lambda t} - e^{-k t}}{k - \lambda}\right],
        \quad k = Q / V

    from clean air and while Q is at least R. As long as the release is more than the exhaust the
    closed room holds, and this form begins anew from what that left; a deficit at its start decays
    with k beside it. By [laboratory-odh]_, rearranged so that k = lambda is no special case.

    Examples
    --------
    >>> oxygen_with_decaying_source_exhaust(
    ...     [0.0, 300.0], initial_release=0.15, decay_rate=0.005, exhaust=0.2, volume=100.0
    ... ).round(6)
    array([0.2095  , 0.175385])
    """
    elapsed = non_negative("time", time)
    flow, decay, drawn, room = _checked(initial_release, decay_rate, exhaust, volume, "exhaust")
    overtaken, deficit = _overtaken(elapsed, flow, decay, drawn, room, oxygen_before)
    after = np.clip(elapsed - overtaken, 0.0, None)
    turnover = drawn / room
    added = np.minimum(flow, drawn) / room * _pulse(after, turnover, decay)
    return oxygen_from_fraction(added + deficit * _decayed(turnover * after))


def time_of_lowest_oxygen_with_decaying_source_exhaust(
    *,
    initial_release: ArrayLike,
    decay_rate: ArrayLike,
    exhaust: ArrayLike,
    volume: ArrayLike,
) -> Floats:
    r"""Time at which a release that dies away leaves least oxygen in a room with exhaust.

    Parameters
    ----------
    initial_release : array_like, shape (...)
        Flow at the beginning, at room temperature and pressure; above zero. [m3/s]
    decay_rate : array_like, shape (...)
        Rate lambda at which the flow dies away; above zero. [1/s]
    exhaust : array_like, shape (...)
        Mixture drawn out; above zero. [m3/s]
    volume : array_like, shape (...)
        Net volume of the room, clean at the beginning; above zero. [m3]

    Returns
    -------
    ndarray, shape (...)
        Time since the release began, broadcast over the inputs. [s]

    Raises
    ------
    OutOfRange
        An input is zero, negative or not a number.

    Notes
    -----
    .. math:: t^* = t_1 + \frac{1 - G_1}{\lambda} \frac{\ln(1 + z)}{z},
        \quad z = \frac{(k - \lambda)(1 - G_1)}{\lambda}

    with :math:`t_1 = \ln(R_0/Q)/\lambda` and the fraction :math:`G_1` left by then where the
    release is more than the exhaust, else both zero: :math:`\ln(k/\lambda)/(k-\lambda)`. From the
    zero of the derivative of [laboratory-odh]_'s closed form.

    Examples
    --------
    >>> time_of_lowest_oxygen_with_decaying_source_exhaust(
    ...     initial_release=[0.15], decay_rate=0.005, exhaust=0.2, volume=100.0
    ... ).round(2)
    array([305.43])
    """
    flow, decay, drawn, room = _checked(
        positive("initial_release", initial_release),
        decay_rate,
        positive("exhaust", exhaust),
        volume,
        "exhaust",
    )
    overtaken, deficit = _overtaken(None, flow, decay, drawn, room, OXYGEN_IN_AIR)
    clean = 1.0 - deficit
    skew = (drawn / room - decay) * clean / decay
    return overtaken + clean / decay * quotient(np.log1p(skew), skew, where_zero=1.0)


def oxygen_with_decaying_source_supply(
    time: ArrayLike,
    *,
    initial_release: ArrayLike,
    decay_rate: ArrayLike,
    supply: ArrayLike,
    volume: ArrayLike,
    oxygen_before: ArrayLike = OXYGEN_IN_AIR,
) -> Floats:
    r"""Oxygen fraction of a room with supply while a release dies away.

    Parameters
    ----------
    time : array_like, shape (...)
        Time since the release began; zero or more. [s]
    initial_release : array_like, shape (...)
        Flow at the beginning, at room temperature and pressure; zero or more. [m3/s]
    decay_rate : array_like, shape (...)
        Rate lambda at which the flow dies away; above zero. [1/s]
    supply : array_like, shape (...)
        Outdoor air blown in; zero or more. [m3/s]
    volume : array_like, shape (...)
        Net volume of the room; above zero. [m3]
    oxygen_before : array_like, shape (...), default 0.2095
        Oxygen fraction before the release. [1]

    Returns
    -------
    ndarray, shape (...)
        Oxygen fraction, broadcast over the inputs. [1]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: G = G_i e^{-\Phi(t)} + \int_0^t \frac{R(s)}{V} e^{\Phi(s) - \Phi(t)} ds, \quad
        \Phi(t) = \frac{Q t}{V} + \frac{R_0}{\lambda V} (1 - e^{-\lambda t})

    The balance of [laboratory-odh]_, which has no elementary solution: Gauss-Legendre quadrature in
    steps so short that it is exact to double precision.

    Examples
    --------
    >>> oxygen_with_decaying_source_supply(
    ...     [0.0, 300.0], initial_release=0.15, decay_rate=0.005, supply=0.2, volume=100.0
    ... ).round(6)
    array([0.2095  , 0.178729])
    """
    flow, decay, blown, room = _checked(initial_release, decay_rate, supply, volume, "supply")
    elapsed, flow, decay, turnover, before = np.broadcast_arrays(
        non_negative("time", time), flow / room, decay, blown / room, _deficit(oxygen_before)
    )
    # After the release has died away the room is purged; long before that it is forgotten.
    end = np.minimum(elapsed, _FORGOTTEN / decay)
    memory = quotient(_FORGOTTEN, turnover, where_zero=np.inf)
    begin = np.clip(end - memory, 0.0, None)
    swiftest = np.maximum(turnover + flow * np.exp(-np.minimum(decay * begin, LONGEST)), decay)
    panels = int(np.ceil(np.max((end - begin) * swiftest, initial=0.0) / _PANEL))
    deficit = np.where(begin > 0.0, 0.0, before)
    for panel in range(panels):
        left = begin + (end - begin) * (panel / panels)
        right = begin + (end - begin) * ((panel + 1) / panels)
        deficit = _after_panel(deficit, left, right, flow, decay, turnover)
    return oxygen_from_fraction(deficit * _decayed(turnover * (elapsed - end)))


def _after_panel(
    deficit: Floats, left: Floats, right: Floats, flow: Floats, decay: Floats, turnover: Floats
) -> Floats:
    def left_share(since: Floats) -> Floats:
        """Share of what was in the room then that is still there at the right end."""
        before_right = _released_volumes(right - since, flow, decay)
        return _decayed(turnover * (right - since) + before_right * _decayed(decay * since))

    half = (right - left) / 2.0
    # The nodes come before the rooms, so that a panel is one sweep over arrays.
    beside = (-1,) + (1,) * deficit.ndim
    moments = left + half * (1.0 + _NODES.reshape(beside))
    arriving = flow * _decayed(decay * moments) * left_share(moments)
    gained: Floats = half * np.sum(_WEIGHTS.reshape(beside) * arriving, axis=0)
    return deficit * left_share(left) + gained


def _checked(
    initial_release: ArrayLike,
    decay_rate: ArrayLike,
    air: ArrayLike,
    volume: ArrayLike,
    name: str,
) -> tuple[Floats, Floats, Floats, Floats]:
    return (
        non_negative("initial_release", initial_release),
        positive("decay_rate", decay_rate),
        non_negative(name, air),
        positive("volume", volume),
    )


def _deficit(oxygen_before: ArrayLike) -> Floats:
    return fraction_from_oxygen(fraction("oxygen_before", oxygen_before))


def _overtaken(
    elapsed: Floats | None,
    flow: Floats,
    decay: Floats,
    drawn: Floats,
    room: Floats,
    oxygen_before: ArrayLike,
) -> tuple[Floats, Floats]:
    """When the exhaust overtakes the release, and the fraction left at that time or by now."""
    ratio = quotient(flow, drawn, where_zero=np.inf)
    moment = np.log(np.maximum(ratio, 1.0)) / decay
    until = moment if elapsed is None else np.minimum(elapsed, moment)
    released = _released_volumes(until, flow / room, decay)
    clean = (1.0 - _deficit(oxygen_before)) * _decayed(released)
    return moment, 1.0 - clean


def _released_volumes(time: Floats, flow: Floats, decay: Floats) -> Floats:
    """Gas released by a time, in volumes of the room, for a flow in volumes of the room."""
    return -flow / decay * np.expm1(-np.minimum(decay * time, LONGEST))


def _decayed(exponent: Floats) -> Floats:
    result: Floats = np.exp(-np.minimum(exponent, LONGEST))
    return result


def _pulse(time: Floats, turnover: Floats, decay: Floats) -> Floats:
    """The difference of the two decays over that of their rates; time itself where those meet."""
    shape = kept_share(np.abs(turnover - decay) * time)
    return time * shape * _decayed(np.minimum(turnover, decay) * time)
