import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from service.physics.errors import OutOfRange
from service.physics.roots import smallest_enough
from service.physics.ventilation import (
    course,
    exhaust_to_hold,
    fraction_after,
    fraction_from_oxygen,
    mean_fraction,
    outflow,
    oxygen_from_fraction,
    smallest_exhaust_to_hold_course,
    smallest_supply_to_hold_course,
    supply_to_hold,
    time_to_fraction,
)

ROOMS, SEGMENTS = 200, 5

flows = st.just(0.0) | st.floats(1e-6, 10.0)
lengths = st.just(0.0) | st.floats(1.0, 1e5)
segments = st.tuples(lengths, flows, flows, flows)
rooms = st.tuples(st.floats(5.0, 1e4), st.just(0.0) | st.floats(1e-6, 1.0))


def random_rooms(seed, rows=ROOMS, columns=SEGMENTS):
    """Rooms of every kind: with and without release, supply, exhaust, and with padding."""
    generator = np.random.default_rng(seed)

    def flow(most, present):
        sizes = generator.uniform(0.0, most, (rows, columns))
        return np.where(generator.uniform(size=(rows, columns)) < present, sizes, 0.0)

    inputs = {
        "durations": flow(900.0, 0.85),
        "release": flow(0.2, 0.6),
        "supply": flow(0.4, 0.5),
        "exhaust": flow(0.4, 0.5),
        "volume": generator.uniform(20.0, 400.0, rows),
        "start": generator.uniform(0.0, 0.3, rows),
    }
    # From argon, all of which counts, to liquid air enriched to half oxygen.
    inputs["dilution"] = inputs["release"] * generator.uniform(-1.4, 1.0, (rows, 1))
    return inputs


def of_row(inputs, row):
    return {name: values[row : row + 1] for name, values in inputs.items()}


def one(steps, volume=100.0, start=0.0):
    durations, release, supply, exhaust = np.array(steps).T[:, np.newaxis]
    return {
        "durations": durations,
        "release": release,
        "supply": supply,
        "exhaust": exhaust,
        "volume": volume,
        "start": start,
    }


D9 = [(300.0, 0.10), (600.0, 0.03), (900.0, 0.0)]


@pytest.mark.parametrize(
    ("supply", "exhaust", "oxygen"),
    [(0.2, 0.0, [0.168059, 0.178623, 0.204396]), (0.0, 0.2, [0.162238, 0.173305, 0.203517])],
    ids=["D-9", "D-10"],
)
def test_a_release_in_steps_leaves_the_oxygen_of_the_balance(supply, exhaust, oxygen):
    """Methods D6: closed."""
    run = course(**one([(time, release, supply, exhaust) for time, release in D9]))
    assert_allclose(oxygen_from_fraction(run.ends[0, 1:]), oxygen, atol=1e-6)
    assert run.at == 300.0
    assert run.highest == run.ends[0, 1]
    assert run.last == run.ends[0, 3]


@pytest.mark.slow
def test_two_hundred_random_rooms_agree_with_an_ode_solver():
    """Outside: scipy 1.17.1, DOP853, rtol 1e-11, segment by segment."""
    inputs = random_rooms(1)
    run = course(**inputs)
    solved = np.empty((ROOMS, SEGMENTS + 1))
    solved[:, 0] = inputs["start"]
    with np.errstate(all="ignore"):
        for row, segment in np.ndindex(ROOMS, SEGMENTS):
            duration, release, supply, exhaust, gas = (
                inputs[name][row, segment]
                for name in ("durations", "release", "supply", "exhaust", "dilution")
            )
            leaving = max(supply + release, exhaust)
            balance = {
                "fun": lambda _, g, gas=gas, w=leaving, v=inputs["volume"][row]: (gas - w * g) / v,
                "y0": [solved[row, segment]],
                "t_span": (0.0, duration),
            }
            if duration == 0.0:
                solved[row, segment + 1] = solved[row, segment]
            else:
                end = solve_ivp(**balance, method="DOP853", rtol=1e-11, atol=1e-13)
                solved[row, segment + 1] = end.y[0, -1]
    assert_allclose(run.ends, solved, rtol=1e-6, atol=1e-9)
    assert_allclose(run.times[:, 1:], np.cumsum(inputs["durations"], axis=1), rtol=1e-15)


def test_every_row_is_solved_as_it_would_be_alone():
    inputs = random_rooms(2)
    together = course(**inputs)
    for row in range(0, ROOMS, 20):
        alone = course(**of_row(inputs, row))
        assert np.array_equal(alone.ends[0], together.ends[row])
        assert np.array_equal(alone.at, together.at[row : row + 1])


def test_the_highest_fraction_lies_at_the_end_of_a_segment():
    """The curve between the ends, at 50 times in each segment, is never above."""
    inputs = random_rooms(3)
    run = course(**inputs)
    for segment in range(SEGMENTS):
        columns = ("release", "supply", "exhaust", "dilution")
        curve = fraction_after(
            np.linspace(0.0, 1.0, 50)[:, np.newaxis] * inputs["durations"][:, segment],
            **{name: inputs[name][:, segment] for name in columns},
            volume=inputs["volume"],
            start=run.ends[:, segment],
        )
        assert (curve <= run.highest + 1e-12).all()


def test_padding_of_no_duration_changes_nothing():
    inputs = random_rooms(4)
    plain = course(**inputs)
    padded = course(
        **{
            name: np.insert(values, [0, 2, SEGMENTS], 0.0 if name == "durations" else 0.07, axis=1)
            if np.ndim(values) == 2
            else values
            for name, values in inputs.items()
        }
    )
    kept = [0, 2, 3, 5, 6, 7]
    assert np.array_equal(padded.ends[:, kept], plain.ends)
    mark = np.full(ROOMS, 0.15)
    for answer in ("highest", "at", "last"):
        assert np.array_equal(getattr(padded, answer), getattr(plain, answer))
    for question in ("first_time_above", "back_below"):
        expected = getattr(plain, question)(mark)
        assert np.array_equal(getattr(padded, question)(mark), expected, equal_nan=True)


def test_a_course_without_segments_is_its_start():
    nothing = np.zeros((2, 0))
    run = course(nothing, release=nothing, supply=0.0, exhaust=0.0, volume=10.0, start=[0.1, 0.2])
    assert np.array_equal(run.highest, [0.1, 0.2])
    assert np.array_equal(run.at, [0.0, 0.0])
    assert np.array_equal(run.first_time_above(0.15), [np.nan, 0.0], equal_nan=True)
    assert np.array_equal(run.back_below(0.15), [0.0, np.nan], equal_nan=True)


@given(rooms, st.lists(segments, min_size=1, max_size=5), st.data())
def test_splitting_a_segment_changes_nothing(room, steps, data):
    volume, start = room
    where = data.draw(st.integers(0, len(steps) - 1))
    share = data.draw(st.floats(0.01, 0.99))
    duration, *air = steps[where]
    split = [(duration * share, *air), (duration * (1.0 - share), *air)]
    whole = course(**one(steps, volume, start))
    parts = course(**one(steps[:where] + split + steps[where + 1 :], volume, start))
    assert_allclose(parts.last, whole.last, rtol=1e-9, atol=1e-15)
    assert_allclose(parts.highest, whole.highest, rtol=1e-9, atol=1e-15)


@given(rooms, st.lists(segments, min_size=1, max_size=5))
def test_gas_is_neither_made_nor_lost_on_the_way(room, steps):
    """Released = gone out + left."""
    volume, start = room
    inputs = one(steps, volume, start)
    run = course(**inputs)
    assert ((run.ends >= 0.0) & (run.ends <= 1.0)).all()
    durations, release, supply, exhaust = (
        inputs[name] for name in ("durations", "release", "supply", "exhaust")
    )
    air = {"release": release, "supply": supply, "exhaust": exhaust}
    mean = mean_fraction(durations, **air, volume=volume, start=run.ends[:, :-1])
    gone = np.sum(outflow(**air) * durations * mean)
    released = np.sum(release * durations)
    left = (run.last - start) * volume
    assert_allclose(left + gone, released, rtol=1e-9, atol=1e-9 * (released + start * volume))


@given(rooms, st.lists(segments, min_size=1, max_size=4), flows)
def test_more_air_never_makes_a_course_worse_nor_more_gas_better(room, steps, more):
    volume, start = room
    inputs = one(steps, volume, start)
    plain = course(**inputs).ends
    for fan in ("supply", "exhaust"):
        assert (course(**{**inputs, fan: inputs[fan] + more}).ends <= plain * (1 + 1e-9)).all()
    gassed = course(**{**inputs, "release": inputs["release"] + more}).ends
    assert (gassed >= plain * (1 - 1e-9)).all()


def test_the_first_time_above_a_mark_is_that_of_the_balance():
    """D-4, closed: 169.897 s; in a later segment it counts from the start of the run."""
    mark = fraction_from_oxygen(0.195)
    steady = one([(600.0, 0.05, 0.2, 0.0)])
    assert_allclose(course(**steady).first_time_above(mark), 169.897, atol=0.01)
    later = one([(60.0, 0.0, 0.2, 0.0), (600.0, 0.05, 0.2, 0.0)])
    assert_allclose(course(**later).first_time_above(mark), 229.897, atol=0.01)


def test_the_room_is_back_below_a_mark_when_the_purge_says():
    """D-6, closed: from 10 % to 19.5 % in 1010.89 s."""
    mark = fraction_from_oxygen(0.195)
    purge = one([(5000.0, 0.0, 0.2, 0.0)], start=fraction_from_oxygen([0.10]))
    assert_allclose(course(**purge).back_below(mark), 1010.89, atol=0.05)
    assert course(**purge).first_time_above(mark) == 0.0


def test_a_mark_is_crossed_for_good_only_after_the_last_time_above_it():
    rise, fall = (0.1, 0.2, 0.0), (0.0, 0.2, 0.0)
    twice = one([(300.0, *rise), (9e3, *fall), (250.0, *rise), (9e3, *fall)])
    run = course(**twice)
    assert run.ends[0, 2] < 0.1 < run.ends[0, 1]
    assert run.first_time_above(0.1) < 300.0
    assert run.back_below(0.1) > 9550.0
    assert run.at == 300.0


def test_times_of_marks_agree_with_a_search_on_the_curve():
    """Outside: scipy 1.17.1, brentq on the solved curve."""
    inputs = random_rooms(6)
    inputs["dilution"] = inputs["release"]
    run = course(**inputs)
    mark = 0.5 * (run.ends[:, 0] + run.highest) + 1e-6
    first, back = run.first_time_above(mark), run.back_below(mark)
    crossed = 0
    for row in range(ROOMS):
        above = np.flatnonzero(run.ends[row] > mark[row])
        if above.size == 0:
            assert np.isnan(first[row])
            assert back[row] == 0.0
            continue

        def excess(time, row=row):
            segment = np.searchsorted(run.times[row], time, side="right") - 1
            segment = min(segment, SEGMENTS - 1)
            air = {name: inputs[name][row, segment] for name in ("release", "supply", "exhaust")}
            now = fraction_after(
                time - run.times[row, segment],
                **air,
                volume=inputs["volume"][row],
                start=run.ends[row, segment],
            )
            return float(now - mark[row])

        begin, end = above[0] - 1, above[-1] + 1
        found = brentq(excess, *run.times[row, begin : begin + 2], xtol=1e-9)
        assert_allclose(first[row], found, atol=1e-5)
        if end <= SEGMENTS:
            found = brentq(excess, *run.times[row, end - 1 : end + 1], xtol=1e-9)
            assert_allclose(back[row], found, atol=1e-5)
            crossed += 1
        else:
            assert np.isnan(back[row])
    assert crossed > 20


def test_marks_may_differ_from_row_to_row():
    run = course([[600.0]] * 3, release=0.05, supply=0.2, exhaust=0.0, volume=100.0)
    times = run.first_time_above([0.05, 0.1, 0.5])
    expected = time_to_fraction(
        [0.05, 0.1, 0.5], release=0.05, supply=0.2, exhaust=0.0, volume=100.0, direction="rising"
    )
    assert_allclose(times, expected, rtol=1e-12)
    assert np.isnan(times[2])
    assert np.array_equal(run.back_below([0.05, 0.1, 0.5]), [np.nan, np.nan, 0.0], equal_nan=True)


def test_a_mark_at_the_very_end_of_a_segment_is_reached():
    run = course([[600.0, 600.0]], release=[[0.1, 0.0]], supply=0.0, exhaust=0.2, volume=100.0)
    assert_allclose(run.first_time_above(run.highest), 600.0, rtol=1e-9)
    assert run.back_below(run.highest) == 0.0


def test_of_several_equal_heights_the_earliest_is_the_time():
    run = course([[1e6, 1e6, 1e6]], release=0.05, supply=0.2, exhaust=0.0, volume=100.0)
    assert run.at == 1e6
    still = course([[10.0, 10.0]], release=0.0, supply=0.2, exhaust=0.0, volume=100.0)
    assert still.at == 0.0


def hold_inputs(seed, rows=300):
    inputs = random_rooms(seed, rows=rows)
    inputs["start"] = np.zeros(rows)
    del inputs["dilution"]
    return inputs


FANS = [
    (smallest_supply_to_hold_course, "supply", "exhaust"),
    (smallest_exhaust_to_hold_course, "exhaust", "supply"),
]


@pytest.mark.slow
@pytest.mark.parametrize(("hold", "fan", "other"), FANS)
def test_the_smallest_flow_is_the_root_of_the_highest_fraction(hold, fan, other):
    """Outside: scipy 1.17.1, brentq on the highest fraction of each room."""
    inputs = hold_inputs(7)
    del inputs[fan]
    limits = np.random.default_rng(8).uniform(0.02, 0.3, 300)
    flows = hold(limits, **inputs)
    held = course(**{**inputs, fan: flows[:, np.newaxis]})
    assert (held.highest <= limits * (1 + 1e-12)).all()
    needed = 0
    for row in range(300):

        def excess(flow, row=row):
            run = course(**{**of_row(inputs, row), fan: flow})
            return float(run.highest[0] - limits[row])

        if excess(0.0) <= 0.0:
            assert flows[row] == 0.0
        else:
            found = brentq(excess, 0.0, 1e3, xtol=1e-14, rtol=1e-12)
            assert_allclose(flows[row], found, rtol=1e-9)
            needed += 1
    assert 50 < needed < 290


@pytest.mark.parametrize(
    ("hold", "steady"),
    [
        (smallest_supply_to_hold_course, supply_to_hold),
        (smallest_exhaust_to_hold_course, exhaust_to_hold),
    ],
)
def test_a_release_without_end_needs_what_a_steady_one_does(hold, steady):
    release = np.array([0.001, 0.05, 3.0])
    flows = hold(0.1, durations=np.full((3, 1), 1e9), release=release[:, np.newaxis], volume=50.0)
    assert_allclose(flows, steady(0.1, release=release), rtol=1e-9)


@pytest.mark.parametrize(("hold", "fan", "other"), FANS)
def test_a_short_release_needs_less_and_a_harmless_one_nothing(hold, fan, other):
    # Without air the mark is reached after V/R ln(1/0.9) = 210.72 s, closed.
    times = [[1e9], [600.0], [210.8], [210.7]]
    flows = hold(0.1, durations=times, release=0.05, volume=100.0)
    assert flows[0] > flows[1] > flows[2] > flows[3] == 0.0
    if fan == "exhaust":
        assert flows[2] > 0.05  # A smaller one than the release does nothing.
    assert hold(0.1, durations=[[1e9]], release=0.0, volume=100.0) == 0.0
    assert hold(0.1, durations=np.zeros((1, 0)), release=np.zeros((1, 0)), volume=10.0) == 0.0


@pytest.mark.parametrize(("hold", "fan", "other"), FANS)
def test_the_other_fan_counts_where_it_suffices(hold, fan, other):
    needed = hold(0.1, durations=[[1e9]], release=0.05, volume=100.0)
    assert needed > 0.0
    assert hold(0.1, durations=[[1e9]], release=0.05, volume=100.0, **{other: 0.51}) == 0.0


@pytest.mark.parametrize(("hold", "fan", "other"), FANS)
def test_no_flow_holds_what_is_above_its_limit_from_the_start(hold, fan, other):
    flows = hold(0.1, durations=[[60.0]] * 3, release=0.05, volume=100.0, start=[0.0, 0.1, 0.11])
    assert np.isnan(flows).tolist() == [False, False, True]
    held = course([[60.0]], release=0.05, volume=100.0, start=0.1, **{fan: flows[1], other: 0.0})
    assert held.highest <= 0.1 * (1 + 1e-12)


@pytest.mark.parametrize(("hold", "fan", "other"), FANS)
def test_gas_that_counts_for_less_needs_less(hold, fan, other):
    inputs = {"durations": [[1e9]], "release": 0.05, "volume": 100.0}
    assert hold(0.1, **inputs, dilution=0.025) < hold(0.1, **inputs)
    assert hold(0.1, **inputs, dilution=-0.05) == 0.0


def test_a_root_is_found_on_flats_and_steps_of_any_size():
    """Outside: the roots are known, x = root for each."""
    roots = np.array([1e-12, 1e-3, 0.5, 0.999, 1.0])

    def excess(rows, x):
        far = np.clip(roots[rows] - x, -1e-3, 1e-3)
        return np.where(np.abs(far) < 1e-3, far, np.sign(far) * 1e-3)

    assert_allclose(smallest_enough(excess, np.ones(5)), roots, rtol=1e-10)
    assert smallest_enough(excess, np.empty(0)).shape == (0,)


def test_a_function_that_jumps_at_zero_is_found_out():
    with pytest.raises(ArithmeticError, match="jumps at zero"):
        smallest_enough(lambda rows, x: np.where(x > 0.0, -1.0, 1.0), np.ones(1))


def test_what_is_not_a_number_is_not_enough():
    found = smallest_enough(lambda rows, x: np.where(x < 0.5, np.nan, -1.0), np.ones(1))
    assert found >= 0.5


@pytest.mark.parametrize("wrong", [-0.1, np.nan, np.inf])
@pytest.mark.parametrize("named", ["durations", "release", "supply", "exhaust", "volume"])
def test_a_course_refuses_what_is_none(named, wrong):
    inputs = random_rooms(9, rows=3)
    del inputs["dilution"]
    inputs[named] = inputs[named].copy()
    inputs[named].flat[-1] = wrong
    with pytest.raises(OutOfRange, match=f"^{named} must be"):
        course(**inputs)
    for hold, fan, _ in FANS:
        if named != fan:
            others = {name: values for name, values in inputs.items() if name != fan}
            with pytest.raises(OutOfRange, match=f"^{named} must be"):
                hold(0.1, **others)


def test_a_course_refuses_starts_marks_and_shapes_that_fit_nothing():
    inputs = random_rooms(10, rows=3)
    with pytest.raises(OutOfRange, match=r"^start must be finite"):
        course(**{**inputs, "start": np.nan})
    with pytest.raises(OutOfRange, match=r"^durations must be of shape"):
        course(**{**inputs, "durations": [60.0]})
    with pytest.raises(OutOfRange, match=r"^volume must be one number, or one for each row"):
        course(**{**inputs, "volume": [1.0, 2.0]})
    with pytest.raises(OutOfRange, match=r"^mark must be finite"):
        course(**inputs).first_time_above(np.nan)
    with pytest.raises(OutOfRange, match=r"^mark must be finite"):
        course(**inputs).back_below([0.1, 0.1, np.nan])
    for hold, fan, _ in FANS:
        others = {name: values for name, values in inputs.items() if name != fan}
        with pytest.raises(OutOfRange, match=r"^limit must be above 0"):
            hold(0.0, **others)
