"""Rooms that exchange air: their balance, and their course through steady segments (methods L)."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from service.physics.arrays import Floats, Integers, non_negative, positive, quotient
from service.physics.constants import GRAVITY
from service.physics.course import Course
from service.physics.errors import OutOfRange
from service.physics.relaxation import SMALLEST

# Steps that each doubling of time is cut into, and how often the step with the peak is halved:
# a peak is then placed to a part in thirty thousand of its time, and its height to 1e-9.
_STEPS = 8
_STEP_BITS = 3
_HALVINGS = 12
# Terms of the power series of a step: 0.5^16 / 16! is below one unit in the last place.
_TERMS = 15
# Turnovers of a straight line: what lies between two steps of a course.
_STRAIGHT = 0.125

DISCHARGE_OF_DOOR = 0.6  # [1]


def door_exchange(
    width: ArrayLike,
    height: ArrayLike,
    *,
    temperature_difference: ArrayLike,
    temperature: ArrayLike,
) -> Floats:
    r"""Air that passes an open doorway each way because one side is warmer.

    Parameters
    ----------
    width, height : array_like, shape (...)
        Of the opening; above zero. [m]
    temperature_difference : array_like, shape (...)
        Between the two sides; zero or more. [K]
    temperature : array_like, shape (...)
        Mean of the two; above zero. [K]

    Returns
    -------
    ndarray, shape (...)
        Flow one way, and the same the other. [m3/s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: Q = \frac{C_d}{3} W H^{3/2} \sqrt{g \, \Delta T / T}, \qquad C_d = 0.6

    By [brown-solvason]_, with the difference of density taken as that of temperature.

    Examples
    --------
    >>> door_exchange(0.9, 2.1, temperature_difference=2.0, temperature=293.15).round(4)
    np.float64(0.1417)
    """
    share = non_negative("temperature_difference", temperature_difference) / positive(
        "temperature", temperature
    )
    free = positive("width", width) * positive("height", height) ** 1.5
    flow: Floats = DISCHARGE_OF_DOOR / 3.0 * free * np.sqrt(GRAVITY * share)
    return flow


def outflow_of_balance(
    passed: ArrayLike, supply: ArrayLike, exhaust: ArrayLike, release: ArrayLike
) -> Floats:
    r"""Air that leaves each room, by the balance of volume.

    Parameters
    ----------
    passed : array_like, shape (..., rooms, rooms)
        Air that passes into the room of the row from the room of the column. [m3/s]
    supply, exhaust : array_like, shape (..., rooms)
        Outdoor air blown in, and air drawn out. [m3/s]
    release : array_like, shape (..., rooms)
        Gas let go. [m3/s]

    Returns
    -------
    ndarray, shape (..., rooms)
        All that leaves, whether to other rooms or outdoors. [m3/s]

    Raises
    ------
    OutOfRange
        A flow is negative or not a number.

    Notes
    -----
    .. math:: W_i = \max\Bigl(S_i + R_i + \sum_j Q_{ij},\; E_i + \sum_j Q_{ji}\Bigr)

    What is drawn out beyond what comes in is made up by outdoor air, and what comes in beyond what
    is drawn out leaves: the balance of [laboratory-odh]_ for one room, with the air of the others.

    Examples
    --------
    >>> outflow_of_balance([[0.0, 0.01], [0.03, 0.0]], [0.05, 0.02], [0.0, 0.0], [0.01, 0.0])
    array([0.07, 0.05])
    """
    flows = non_negative("passed", passed)
    comes_in = non_negative("supply", supply) + non_negative("release", release)
    comes_in = comes_in + flows.sum(axis=-1)
    goes_out = non_negative("exhaust", exhaust) + flows.sum(axis=-2)
    leaves: Floats = np.maximum(comes_in, goes_out)
    return leaves


def returned_air(recirculated: ArrayLike, to_return: ArrayLike) -> Floats:
    r"""Air that rooms send one another through a unit that mixes their return.

    Parameters
    ----------
    recirculated : array_like, shape (..., rooms)
        Recirculated air that the unit blows into each room. [m3/s]
    to_return : array_like, shape (..., rooms)
        Air of each room that goes to the unit. [m3/s]

    Returns
    -------
    ndarray, shape (..., rooms, rooms)
        Air that comes into the room of the row from the room of the column; of its own too. [m3/s]

    Raises
    ------
    OutOfRange
        A flow is negative or not a number.

    Notes
    -----
    .. math:: Q_{ij} = q_i \frac{w_j}{\sum_k w_k}

    What is blown in holds each room's air by its share of the return, so that a release in one room
    shows up in all: [laboratory-odh]_ for the balance.

    Examples
    --------
    >>> returned_air([0.08, 0.08], [0.11, 0.10]).round(4)
    array([[0.0419, 0.0381],
           [0.0419, 0.0381]])
    """
    sent = non_negative("to_return", to_return)
    share = quotient(sent, sent.sum(axis=-1, keepdims=True), where_zero=0.0)
    blown = non_negative("recirculated", recirculated)
    return blown[..., :, np.newaxis] * share[..., np.newaxis, :]


@dataclass(frozen=True, slots=True)
class NetworkCourse:
    """Level of released gas in the rooms of many networks over time.

    Attributes
    ----------
    times : ndarray, shape (networks, rooms, points)
        From the start on, never falling; a point of each room stands at its peak. [s]
    levels : ndarray, shape (networks, rooms, points)
        Exact at those times. [1]
    turnovers : ndarray, shape (networks, rooms, points - 1)
        Of the room between one point and the next. [1]
    left : ndarray, shape (networks,)
        Gas that has left the network by the end. [m3]
    """

    times: Floats
    levels: Floats
    turnovers: Floats
    left: Floats

    def of_rooms(self, network: Integers, room: Integers) -> Course:
        """The course of some rooms alone, exact at the points.

        Between two points the level moves as in a room whose inflow is steady, or as a straight
        line where the room turns over quickly there.

        Parameters
        ----------
        network, room : ndarray of int, shape (rows,)
            Which room of which network.

        Returns
        -------
        Course
            One row each.
        """
        times, ends = self.times[network, room], self.levels[network, room]
        lengths = np.diff(times, axis=1)
        turnovers = np.clip(self.turnovers[network, room], 0.0, _STRAIGHT)
        turnovers = np.where(lengths > 0.0, np.maximum(turnovers, _STRAIGHT * 1e-3), 0.0)
        way = np.diff(ends, axis=1)
        reached = quotient(way, -np.expm1(-turnovers), where_zero=0.0)
        return Course(
            times=times,
            ends=ends,
            steady=ends[:, :-1] + reached,
            rates=quotient(turnovers, lengths, where_zero=0.0),
        )


def network_course(
    durations: ArrayLike,
    *,
    volume: ArrayLike,
    passed: ArrayLike,
    outflow: ArrayLike,
    release: ArrayLike,
    start: ArrayLike,
) -> NetworkCourse:
    r"""Follow the rooms of networks through segments of steady flows.

    Parameters
    ----------
    durations : array_like, shape (networks, segments)
        Length of each segment; zero or more. [s]
    volume : array_like, shape (networks, rooms)
        Net volume of each room; above zero. [m3]
    passed : array_like, shape (networks, segments, rooms, rooms)
        Air that passes into the room of the row from the room of the column; on the diagonal what
        comes back to a room through a unit. [m3/s]
    outflow : array_like, shape (networks, segments, rooms)
        All air that leaves a room; at least what of it passes into others. [m3/s]
    release : array_like, shape (networks, segments, rooms)
        Gas let go, by the level that it makes. [m3/s]
    start : array_like, shape (networks, rooms)
        Level at the start; zero or more. [1]

    Returns
    -------
    NetworkCourse
        Exact at its points; nothing is lost: what was there and what was let go is in the rooms or
        has left.

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number, or more passes on than leaves a room.

    Notes
    -----
    .. math::
        V_i \frac{dG_i}{dt} = R_i + \sum_j Q_{ij} G_j - W_i G_i, \qquad
        \begin{pmatrix} G \\ 1 \end{pmatrix}(t) = e^{M t} \begin{pmatrix} G \\ 1 \end{pmatrix}(0)

    Linear in each segment, so that the exponential of one matrix carries the state over it, as in
    [moler-van-loan]_. It is taken by uniformisation, :math:`e^{Mt} = e^{-\lambda t} e^{(M + \lambda
    I) t}`: all terms are positive, no figure is lost, and no fraction can leave its bounds.

    Examples
    --------
    >>> run = network_course(
    ...     [[600.0]],
    ...     volume=[[60.0, 40.0]],
    ...     passed=[[[[0.0, 0.01], [0.03, 0.0]]]],
    ...     outflow=[[[0.07, 0.05]]],
    ...     release=[[[0.01, 0.0]]],
    ...     start=[[0.0, 0.0]],
    ... )
    >>> (0.2095 * (1.0 - run.levels[0, :, -1])).round(6)
    array([0.194341, 0.206539])
    """
    lengths = non_negative("durations", durations)
    rooms = positive("volume", volume)
    flows, leaves = non_negative("passed", passed), non_negative("outflow", outflow)
    gas, levels = non_negative("release", release), non_negative("start", start)
    beyond = leaves - flows.sum(axis=-2)
    # A rounding of the sum is no gas from nowhere.
    if not bool(np.all(beyond >= -1e-9 * leaves)):
        raise OutOfRange("outflow", "at least what passes from a room into others")
    return _followed(lengths, rooms, flows, leaves, np.maximum(beyond, 0.0), gas, levels)


def _followed(
    lengths: Floats,
    volume: Floats,
    flows: Floats,
    leaves: Floats,
    beyond: Floats,
    gas: Floats,
    start: Floats,
) -> NetworkCourse:
    networks, segments = lengths.shape
    rooms = volume.shape[1]
    whole = volume.sum(axis=1)
    # The gas that has left, by the volume of all rooms, and a constant one stand behind the rooms.
    state = np.concatenate([start, np.zeros((networks, 1)), np.ones((networks, 1))], axis=1)
    matrices = np.zeros((networks, segments, rooms + 2, rooms + 2))
    matrices[:, :, :rooms, :rooms] = flows / volume[:, np.newaxis, :, np.newaxis]
    turnover = leaves / volume[:, np.newaxis, :]
    diagonal = np.arange(rooms)
    matrices[:, :, diagonal, diagonal] -= turnover
    matrices[:, :, :rooms, -1] = gas / volume[:, np.newaxis, :]
    matrices[:, :, rooms, :rooms] = beyond / whole[:, np.newaxis, np.newaxis]
    times = [np.zeros((networks, rooms, 1))]
    levels = [start[:, :, np.newaxis]]
    widths = []
    begun = np.zeros(networks)
    for segment in range(segments):
        run = _segment(matrices[:, segment], lengths[:, segment], state)
        times.append(begun[:, np.newaxis, np.newaxis] + run.times)
        levels.append(run.levels)
        state, begun = run.last, begun + lengths[:, segment]
        width = run.times.shape[2]
        widths.append(np.broadcast_to(turnover[:, segment, :, np.newaxis], (*start.shape, width)))
    all_times = np.concatenate(times, axis=2)
    between = np.concatenate(widths, axis=2) if widths else np.zeros((networks, rooms, 0))
    return NetworkCourse(
        times=all_times,
        levels=np.concatenate(levels, axis=2),
        turnovers=between * np.diff(all_times, axis=2),
        left=state[:, rooms] * whole,
    )


@dataclass(frozen=True, slots=True)
class _Run:
    """One segment, behind its start: by network and room, with the peak of each in its place."""

    times: Floats
    levels: Floats
    last: Floats  # the whole state at the end


def _segment(matrix: Floats, length: Floats, start: Floats) -> _Run:
    """Points at a steady number of steps to each doubling of time, and one at the peak."""
    fastest = -np.diagonal(matrix, axis1=1, axis2=2).min(axis=1, initial=0.0)
    turnovers = float((fastest * length).max(initial=0.0))
    doublings = int(np.ceil(np.log2(max(turnovers, 1.0))))
    # exponentials[k] carries the state over a share 2^-k of the segment.
    exponentials = _exponentials(matrix, length, doublings + _STEP_BITS + _HALVINGS)
    states, shares, levels = [start], [0.0], []
    for octave in range(doublings, -1, -1):
        level = octave + _STEP_BITS + (0 if octave == doublings else 1)
        for _ in range(_STEPS):
            states.append(_carried(exponentials[level], states[-1]))
            shares.append(shares[-1] + 2.0**-level)
            levels.append(level)
    path = np.stack(states, axis=2)  # (networks, rooms + 2, points)
    rooms = matrix.shape[1] - 2
    place, height = _peaks(matrix, exponentials, path, np.array(shares), np.array(levels))
    everywhere = np.broadcast_to(np.array(shares[1:]), (*path[:, :rooms, 1:].shape,))
    joined = np.concatenate([everywhere, place[:, :, np.newaxis]], axis=2)
    order = np.argsort(joined, axis=2, kind="stable")
    heights = np.concatenate([path[:, :rooms, 1:], height[:, :, np.newaxis]], axis=2)
    return _Run(
        times=np.take_along_axis(joined, order, axis=2) * length[:, np.newaxis, np.newaxis],
        levels=np.take_along_axis(heights, order, axis=2),
        last=states[-1],
    )


def _carried(exponential: Floats, state: Floats) -> Floats:
    return _without_traces(np.matmul(exponential, state[..., np.newaxis])[..., 0])


def _without_traces(values: Floats) -> Floats:
    """Values with what is no molecule in any room as none, so that no product underflows."""
    return np.where(values < SMALLEST, 0.0, values)


def _exponentials(matrix: Floats, length: Floats, most: int) -> list[Floats]:
    """Exponentials over the shares 1, 1/2, 1/4, … of each segment.

    By series where a step is short enough, the others by squaring: each squaring doubles what
    rounding has done, so that there are no more of them than there must be.
    """
    fastest = -np.diagonal(matrix, axis1=1, axis2=2).min(axis=1, initial=0.0)
    turnovers = float((fastest * length).max(initial=0.0))
    squared = int(np.ceil(np.log2(max(2.0 * turnovers, 1.0))))
    found = [
        _by_series(matrix, length * 2.0**-share, fastest) for share in range(most, squared - 1, -1)
    ]
    for _ in range(squared):
        found.append(_without_traces(np.matmul(found[-1], found[-1])))
        found[-1][:, -1, -1] = 1.0
    return found[::-1]


def _by_series(matrix: Floats, step: Floats, fastest: Floats) -> Floats:
    """Exponential over a step in which no room turns over more than half."""
    one = np.eye(matrix.shape[1])
    turned = (fastest * step)[:, np.newaxis, np.newaxis]
    positive_part = matrix * step[:, np.newaxis, np.newaxis] + turned * one
    total = np.broadcast_to(one, matrix.shape)
    for term in range(_TERMS, 0, -1):
        total = one + np.matmul(positive_part, total) / term
    carried = _without_traces(np.exp(-turned) * total)
    carried[:, -1, -1] = 1.0
    return carried


def _peaks(
    matrix: Floats, exponentials: list[Floats], path: Floats, shares: Floats, levels: Integers
) -> tuple[Floats, Floats]:
    """Share of the segment at which each room is highest, and its level there.

    The highest point and the way the level moves there say in which step the peak lies; that step
    is halved until its place is known.
    """
    networks, rooms = path.shape[0], matrix.shape[1] - 2
    network, room = np.divmod(np.arange(networks * rooms), max(rooms, 1))
    highest = np.argmax(path[:, :rooms], axis=2).reshape(-1)
    last = path.shape[2] - 1
    rows = matrix[network, room]
    slope = np.einsum("rs,rs->r", rows, path[network, :, highest])
    begin = np.clip(np.where(slope > 0.0, highest, highest - 1), 0, max(last - 1, 0))
    inside = ((slope > 0.0) & (highest < last)) | ((slope < 0.0) & (highest > 0))
    state, place = path[network, :, begin], shares[begin]
    level = levels[begin]
    table = np.stack(exponentials)
    for _ in range(_HALVINGS):
        level = np.minimum(level + 1, len(exponentials) - 1)
        middle = _carried(table[level, network], state)
        rises = np.einsum("rs,rs->r", rows, middle) > 0.0
        state = np.where(rises[:, np.newaxis], middle, state)
        place = np.where(rises, place + 2.0**-level, place)
    found = state[np.arange(state.shape[0]), room]
    at_point = path[network, room, highest]
    better = inside & (found > at_point)
    place = np.where(better, place, shares[highest])
    # A point at the very start would stand before what comes before it.
    height = np.where(better, found, at_point)
    return place.reshape(networks, rooms), height.reshape(networks, rooms)
