"""Rules on magnets: a quench pipe is believed only as far as its records go."""

import pytest

from tests.audit.accident_rooms import with_magnet
from tests.audit.builders import HELIUM, LATER, a_room, a_vessel, assessed, judged


def of_magnets(room, **when):
    return {
        each.rule.split("/")[1]: each.severity
        for each in assessed(room, **when)[0].judgements
        if each.rule.startswith("vessels/quench")
    }


def test_a_pipe_that_is_inspected_and_clear_says_nothing_until_it_is_due():
    room = with_magnet()
    assert of_magnets(room) == {}
    assert assessed(room)[0].turns_at == LATER
    assert of_magnets(room, at=LATER) == {"quench-pipe-inspection-overdue": "minor"}


@pytest.mark.parametrize(
    ("quench", "found"),
    [
        ({"outlet_clear": False}, {"quench-pipe-blocked": "major"}),
        ({"outlet_clear": None}, {"quench-outlet-unknown": "observation"}),
        ({"has_pipe": False}, {"quench-pipe-missing": "minor"}),
        ({"duration": None}, {"quench-duration-missing": "observation"}),
        (
            {"pipe_inspected": False, "pipe_inspection_due": None},
            {"quench-pipe-inspection-overdue": "minor"},
        ),
    ],
)
def test_each_thing_that_is_wrong_is_one_finding(quench, found):
    assert of_magnets(with_magnet(**quench)) == found


def test_a_magnet_without_a_quench_record_is_asked_for_one_and_nothing_else():
    room = a_room(9000, vessels=(a_vessel(100, HELIUM, kind="magnet"),))
    assert of_magnets(room) == {"quench-not-recorded": "observation"}
    assert judged(room, "vessels/quench-not-recorded").subject == room.vessels[0].record


def test_a_magnet_that_is_gone_is_not_asked():
    gone = a_vessel(100, HELIUM, kind="magnet", state="withdrawn")
    assert of_magnets(a_room(9000, vessels=(gone,))) == {}
