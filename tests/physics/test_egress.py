"""Outside: the closed forms and roots of methods M; speeds are common practice, no source."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from service.physics.detector import alarm_time
from service.physics.egress import egress_margin, time_to_leave
from service.physics.errors import OutOfRange
from service.physics.ventilation import course, fraction_from_oxygen, time_to_fraction

WAY = {"react": 30.0, "distance": 15.0, "speed": 1.0}
times = st.floats(0.0, 1e6)


def test_people_have_the_margin_that_the_balance_leaves():
    """M-4, closed: 18 % after 487.0 s, the alarm of M-2 after 193.14 s, 15 m at 1 m/s: 248.9 s."""
    assert_allclose(egress_margin(487.0, 193.14, **WAY), 248.9, atol=0.1)


def test_the_margin_follows_from_the_room_and_its_detector():
    """M-4 from its inputs: the room of D-1, T90 30 s, a sample line of 10 s."""
    room = {"release": 0.05, "supply": 0.2, "exhaust": 0.0, "volume": 100.0}
    danger = time_to_fraction(fraction_from_oxygen(0.18), direction="rising", **room)
    alarm = alarm_time(
        course([[1000.0]], **room),
        rows=np.array([0]),
        level=fraction_from_oxygen([0.195]),
        t90=[30.0],
        delay=[10.0],
    )
    assert_allclose(danger, 487.0, atol=0.1)
    assert_allclose(egress_margin(danger, alarm, **WAY), 248.9, atol=0.1)


def test_a_way_out_is_walked_after_the_reaction():
    assert_allclose(time_to_leave(30.0, 15.0, [1.0, 0.5]), [45.0, 60.0])
    assert time_to_leave(0.0, 0.0, 1.0) == 0.0


def test_never_is_the_margin_of_a_room_that_is_never_dangerous():
    never = egress_margin([np.inf, np.inf], [10.0, np.inf], **WAY)
    assert never.tolist() == [np.inf, np.inf]


def test_without_an_alarm_nobody_is_out():
    assert egress_margin(487.0, np.inf, **WAY) == -np.inf


@given(danger=times, alarm=times, later=times, further=st.floats(0.0, 1e3))
def test_a_later_alarm_or_a_longer_way_never_leaves_more(danger, alarm, later, further):
    margin = egress_margin(danger, alarm, **WAY)
    assert egress_margin(danger, alarm + later, **WAY) <= margin
    assert egress_margin(danger, alarm, **{**WAY, "distance": 15.0 + further}) <= margin
    assert egress_margin(danger + later, alarm, **WAY) >= margin


def test_margins_broadcast():
    margins = egress_margin([[487.0], [np.inf]], [100.0, 200.0, np.inf], **WAY)
    assert margins.shape == (2, 3)
    assert time_to_leave(30.0, np.zeros((3, 1)), [1.0, 0.5]).shape == (3, 2)


@pytest.mark.parametrize("wrong", [-1.0, np.nan])
def test_egress_refuses_what_is_none(wrong):
    with pytest.raises(OutOfRange, match=r"^danger_time must be 0 or more, infinite for never"):
        egress_margin(wrong, 10.0, **WAY)
    with pytest.raises(OutOfRange, match=r"^alarm_time must be 0 or more, infinite for never"):
        egress_margin(10.0, wrong, **WAY)
    for named in ("react", "distance", "speed"):
        with pytest.raises(OutOfRange, match=f"^{named} must be"):
            time_to_leave(**{**WAY, named: wrong})


def test_who_does_not_walk_is_refused():
    with pytest.raises(OutOfRange, match=r"^speed must be above 0"):
        time_to_leave(30.0, 15.0, 0.0)
