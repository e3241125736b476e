"""Rules on administrative measures: asked for where it is grave, and never a safeguard."""

from dataclasses import replace
from datetime import timedelta

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.audit.columns import CONTROL_KINDS
from service.audit.rules.controls import WANTED
from tests.audit.builders import (
    NOW,
    OXYGEN,
    a_control,
    a_detector,
    a_room,
    a_unit,
    a_vessel,
    assessed,
    judged,
    severity,
    some_ice,
    the_controls,
)
from tests.audit.rule_rooms import evaporating, still

SECOND = timedelta(seconds=1)


def grave(*controls, **fields):
    """A room of 50 m3 that 10.17 L of nitrogen bring to 18 % (methods C1)."""
    return a_room(50, **{"vessels": (still(20),), "controls": controls, **fields})


def missing(room):
    found = judged(room, "controls/missing")
    return () if found is None else tuple(found.evidence["missing"])


def test_a_grave_room_is_asked_for_each_that_is_not_there():
    assert missing(grave()) == WANTED
    assert missing(grave(*the_controls("rescue", "access"))) == ("rescue", "access")
    assert missing(grave(*the_controls())) == ()


def test_what_is_missing_is_named_and_counted():
    found = judged(grave(*the_controls("lone-working", "access")), "controls/missing")
    assert found.measure == 2
    assert found.worse_is == "higher"
    assert "lone working, access" in found.statement
    assert "would be major without safeguards" in found.statement


def test_a_room_that_safeguards_hold_is_asked_all_the_same():
    guarded = grave(detectors=(a_detector(),), units=(a_unit(1200),))
    assert severity(guarded, "oxygen/largest-vessel") == "observation"
    assert missing(guarded) == WANTED


def test_air_that_is_beyond_its_first_mark_by_itself_is_grave():
    """It is at least major whatever the safeguards (judging 4)."""
    assert missing(evaporating(47.8)) == ()
    assert missing(evaporating(48.2)) == WANTED


def test_vessels_that_would_all_have_to_fail_together_make_no_room_grave():
    several = tuple(still(4, tag=f"V-{place}") for place in range(4))
    assert severity(grave(vessels=several), "oxygen/all-vessels") == "observation"
    assert missing(grave(vessels=several)) == ()


@pytest.mark.parametrize(
    ("vessel", "moved"),
    [
        (still(20, mobile=True), True),
        (still(20, mobile=None), True),
        (still(20, mobile=False), False),
        (still(20, kind="tank", mobile=None), False),
        (still(20, kind="tank", mobile=True), True),
    ],
)
def test_a_route_is_asked_for_where_vessels_are_moved(vessel, moved):
    assert ("delivery-route" in missing(grave(vessels=(vessel,)))) is moved


def test_a_measure_of_a_vessel_is_none_of_the_room():
    vessel = still(20)
    own = a_control("signage", vessel_id=vessel.record.id)
    assert "signage" in missing(grave(own, vessels=(vessel,)))
    assert "signage" not in missing(grave(a_control("signage"), vessels=(vessel,)))


def test_one_that_is_overdue_is_there_and_says_so_itself():
    room = grave(*the_controls("signage"), a_control("signage", check_due=NOW))
    assert missing(room) == ()
    found = judged(room, "controls/overdue")
    assert found.subject.tag == "C-signage"
    assert found.severity == "observation"


def test_a_check_falls_due_at_its_moment_and_not_before():
    due = NOW + timedelta(hours=3)
    room = a_room(controls=(a_control(check_due=due),))
    assert assessed(room)[0].turns_at == due
    assert judged(room, "controls/overdue", at=due - SECOND) is None
    assert judged(room, "controls/overdue", at=due) is not None
    assert assessed(room, at=due)[0].turns_at is None


@pytest.mark.parametrize(("checked", "overdue"), [(True, False), (False, True)])
def test_one_without_an_interval_is_overdue_only_if_nobody_ever_checked_it(checked, overdue):
    room = a_room(controls=(a_control(check_due=None, checked=checked),))
    assert (judged(room, "controls/overdue") is not None) is overdue


CONTROLS = st.lists(
    st.builds(
        lambda kind, due, checked, of_vessel: a_control(
            kind,
            check_due=due,
            checked=checked,
            vessel_id="vessel-V-20-nitrogen" if of_vessel else None,
        ),
        st.sampled_from(CONTROL_KINDS),
        st.sampled_from((None, NOW - SECOND, NOW + SECOND)),
        st.booleans(),
        st.booleans(),
    ),
    max_size=4,
)
GRAVE = (
    grave(vessels=(a_vessel(20), some_ice(5))),
    grave(vessels=(a_vessel(20, OXYGEN),), detectors=(a_detector(),), units=(a_unit(1200),)),
    evaporating(200),
)


@pytest.mark.slow
@given(room=st.sampled_from(GRAVE), controls=CONTROLS)
def test_no_measure_is_a_safeguard_and_none_makes_a_room_worse(room, controls):
    """Whatever is recorded, the cases and every other rule say the same (judging 8)."""
    tagged = [
        replace(each, record=replace(each.record, id=f"control-{place}", tag=f"C-{place}"))
        for place, each in enumerate(controls)
    ]
    before, after = assessed(room, replace(room, controls=tuple(tagged)))
    assert after.cases == before.cases
    assert after.ventilation == before.ventilation
    assert [each for each in after.judgements if each.family != "controls"] == [
        each for each in before.judgements if each.family != "controls"
    ]
    assert set(missing(replace(room, controls=tuple(tagged)))) <= set(missing(room))
