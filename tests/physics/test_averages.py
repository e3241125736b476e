import numpy as np
import pytest
from numpy.testing import assert_allclose

from service.physics.averages import fraction_at, highest_mean
from service.physics.course import Course
from service.physics.errors import OutOfRange
from service.physics.ventilation import course, mean_fraction

ROOMS, SEGMENTS = 60, 5


def random_course(seed):
    generator = np.random.default_rng(seed)

    def flow(most, present):
        sizes = generator.uniform(0.0, most, (ROOMS, SEGMENTS))
        return np.where(generator.uniform(size=(ROOMS, SEGMENTS)) < present, sizes, 0.0)

    return course(
        flow(1500.0, 0.85),
        release=flow(0.1, 0.6),
        supply=flow(0.4, 0.5),
        exhaust=flow(0.4, 0.5),
        volume=generator.uniform(20.0, 200.0, ROOMS),
        start=generator.uniform(0.0, 0.3, ROOMS),
    )


def test_the_fraction_at_the_ends_of_segments_is_that_of_the_course():
    run = random_course(1)
    assert_allclose(fraction_at(run, run.times), run.ends, rtol=1e-12, atol=1e-15)
    later = fraction_at(run, run.times[:, -1:] + [1.0, 1e6])
    assert_allclose(later, np.repeat(run.ends[:, -1:], 2, axis=1), rtol=1e-12, atol=1e-15)


@pytest.mark.parametrize("window", [60.0, 900.0, 2500.0])
def test_the_highest_mean_is_that_of_a_fine_search(window):
    """Outside: trapezoids on 40 001 samples of each curve, every window of that grid."""
    run = random_course(2)
    found = highest_mean(run, window)
    for row in range(ROOMS):
        alone = type(run)(*(getattr(run, name)[row : row + 1] for name in run.__slots__))
        end = max(run.times[row, -1], window)
        times = np.linspace(0.0, end, 40_001)
        curve = fraction_at(alone, times[np.newaxis])[0]
        step = times[1]
        integral = np.concatenate([[0.0], np.cumsum((curve[1:] + curve[:-1]) * step / 2.0)])
        begins = np.append(times[times <= end - window], end - window)
        windows = np.interp(np.minimum(begins + window, end), times, integral) - np.interp(
            begins, times, integral
        )
        assert_allclose(found[row], windows.max() / window, rtol=1e-5, atol=1e-9)


def test_dry_ice_in_a_store_has_the_means_of_its_balance():
    """E-2, closed: 783 and 5947 ppm from the start; the highest 15 min are the last."""
    air = {"release": 75.510e-6, "supply": 0.0, "exhaust": 40.0 / 3600.0, "volume": 40.0}
    first = course([[900.0]], **air)
    assert_allclose(highest_mean(first, 900.0), 783e-6, rtol=5e-3)
    day = course([[8 * 3600.0]], **air)
    assert_allclose(highest_mean(day, 8 * 3600.0), 5947e-6, rtol=5e-3)
    last = mean_fraction(900.0, **air, start=fraction_at(day, [[27_900.0]])[0, 0])
    assert_allclose(highest_mean(day, 900.0), last, rtol=1e-9)


def test_a_peak_is_straddled_where_both_ends_of_the_window_are_equal():
    run = course([[600.0, 3000.0]], release=[[0.1, 0.0]], supply=0.2, exhaust=0.0, volume=100.0)
    begins = np.linspace(0.0, 600.0, 600_001)
    behind, ahead = fraction_at(run, [begins])[0], fraction_at(run, [begins + 900.0])[0]
    best = begins[np.argmin(np.abs(ahead - behind))]
    air = {"supply": 0.2, "exhaust": 0.0, "volume": 100.0}
    early = mean_fraction(600.0 - best, release=0.1, **air, start=fraction_at(run, [[best]])[0, 0])
    late = mean_fraction(300.0 + best, release=0.0, **air, start=run.ends[0, 1])
    expected = (early * (600.0 - best) + late * (300.0 + best)) / 900.0
    assert_allclose(highest_mean(run, 900.0), expected, rtol=1e-10)


def test_a_mean_is_never_above_the_highest_and_falls_with_the_window():
    run = random_course(3)
    means = [highest_mean(run, window) for window in (1.0, 60.0, 900.0)]
    assert (means[0] <= run.highest * (1 + 1e-12)).all()
    assert (means[1] <= means[0] * (1 + 1e-12)).all()
    assert_allclose(highest_mean(run, 1e-3), run.highest, rtol=1e-3)


def test_a_run_shorter_than_the_window_stays_at_its_last_fraction():
    run = course([[100.0]], release=0.0, supply=0.0, exhaust=0.0, volume=10.0, start=0.2)
    assert_allclose(highest_mean(run, 900.0), 0.2, rtol=1e-12)
    nothing = np.zeros((2, 0))
    still = course(nothing, release=nothing, supply=0.0, exhaust=0.0, volume=10.0, start=[0.1, 0.2])
    assert np.array_equal(highest_mean(still, 900.0), [0.1, 0.2])
    assert np.array_equal(fraction_at(still, [[5.0], [5.0]]), [[0.1], [0.2]])


def test_windows_may_differ_from_row_to_row():
    run = random_course(4)
    windows = np.linspace(10.0, 2000.0, ROOMS)
    together = highest_mean(run, windows)
    assert together.shape == (ROOMS,)
    for row in (0, 30, 59):
        assert_allclose(together[row], highest_mean(run, windows[row])[row], rtol=1e-12)


@pytest.mark.parametrize("wrong", [0.0, -1.0, np.nan])
def test_means_refuse_what_is_none(wrong):
    run = random_course(5)
    with pytest.raises(OutOfRange, match=r"^window must be above 0"):
        highest_mean(run, wrong)
    with pytest.raises(OutOfRange, match=r"^times must be 0 or more"):
        fraction_at(run, np.full((ROOMS, 1), wrong if wrong != 0.0 else -0.1))
    with pytest.raises(OutOfRange, match=r"^times must be of shape"):
        fraction_at(run, [0.0, 1.0])


def test_a_course_of_hundreds_of_segments_has_the_mean_of_the_same_in_few():
    """Steps of no length change nothing, whichever way the segment of a time is sought."""
    run = course(
        [[300.0, 900.0, 4000.0]], release=[[0.2, 0.02, 0.0]], supply=0.1, exhaust=0.0, volume=90.0
    )
    many = Course(
        times=np.pad(run.times, ((0, 0), (0, 200)), mode="edge"),
        ends=np.pad(run.ends, ((0, 0), (0, 200)), mode="edge"),
        steady=np.pad(run.steady, ((0, 0), (0, 200)), mode="edge"),
        rates=np.pad(run.rates, ((0, 0), (0, 200))),
    )
    for window in (60.0, 900.0, 28_800.0):
        assert_allclose(highest_mean(many, window), highest_mean(run, window), rtol=1e-12)
