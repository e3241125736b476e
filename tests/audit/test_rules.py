"""Every rule has two rooms: one just inside what it asks for, and one just outside."""

import json
import re
from dataclasses import replace

import pytest

from service.audit.assessment import SEVERITIES
from service.audit.rules.registry import RULES
from service.audit.rules.rule import Subject
from service.physics.sources import METHODS
from tests.audit.builders import (
    a_basis,
    a_fluid,
    a_room,
    assessed,
    judged,
)
from tests.audit.rule_rooms import PAIRS, a_room_with_nothing_to_say, evaporating, still

# A rule that is for several gases has a pair for each.
KEYED = {(pair.rule, pair.gas) for pair in PAIRS}
SLUGS = {pair.rule for pair in PAIRS}


def test_every_rule_has_a_room_on_either_side_and_a_name_of_its_own():
    slugs = [(rule.slug, rule.gas) for rule in RULES]
    assert len(slugs) == len(set(slugs))
    # Those on gas from other rooms have pairs of rooms, in the tests of neighbours.
    slugs = [(rule.slug, rule.gas) for rule in RULES if rule.subject is not Subject.INCOMING]
    assert {slug for slug, _ in slugs} == SLUGS
    several = {slug for slug, _ in slugs if [each for each, _ in slugs].count(slug) > 1}
    assert {key for key in slugs if key[0] in several} <= KEYED


@pytest.mark.parametrize("rule", RULES, ids=lambda rule: f"{rule.slug}-{rule.gas}")
def test_every_rule_goes_by_a_method_that_is_listed(rule):
    assert rule.method in METHODS


@pytest.mark.parametrize("pair", PAIRS, ids=lambda pair: pair.name)
def test_a_rule_is_broken_just_outside_and_not_just_inside(pair):
    assert judged(pair.inside, pair.rule, gas=pair.gas) is None
    found = judged(pair.outside, pair.rule, gas=pair.gas)
    assert found.severity == pair.severity
    assert found.family == pair.rule.split("/")[0]


@pytest.mark.parametrize("pair", PAIRS, ids=lambda pair: pair.name)
def test_a_judgement_says_what_is_wrong_what_helps_and_where_it_comes_from(pair):
    found = judged(pair.outside, pair.rule, gas=pair.gas)
    assert found.statement.endswith(".")
    assert found.remedy.endswith(".")
    assert not {"nan", "inf", "None"} & set(re.findall(r"\w+", f"{found.statement} {found.remedy}"))
    assert found.severity in SEVERITIES
    assert found.worse_is in ("lower", "higher")
    assert found.method
    assert found.source
    assert found.evidence
    json.dumps(found.evidence, allow_nan=False)


def test_a_room_in_order_breaks_no_rule():
    assert assessed(a_room_with_nothing_to_say())[0].judgements == ()


def test_a_finding_on_cases_is_about_the_room_and_names_the_other_cases():
    room = a_room(
        50,
        vessels=(
            still(20),
            still(20, fluid=a_fluid("argon", molar_mass=0.039948, condensed_density=1395.4)),
        ),
    )
    found = judged(room, "oxygen/largest-vessel")
    assert found.subject == room.record
    assert found.gas == "oxygen"
    assert [vessel["tag"] for vessel in found.evidence["records"]] == ["V-20-argon"]
    others = [(case["airflow"], case["records"][0]["tag"]) for case in found.evidence["cases"]]
    assert others == [
        ("as-measured", "V-20-nitrogen"),
        ("design", "V-20-argon"),
        ("lost", "V-20-argon"),
        ("design", "V-20-nitrogen"),
        ("lost", "V-20-nitrogen"),
    ]


class TestRemedies:
    """Quantified, and never more air for what is let go at once."""

    def test_the_amount_that_may_stay_is_the_amount_that_just_holds(self):
        """Methods C-5: 5.001 L in 50 m3; by the ideal gas 4.9998 L."""
        remedy = judged(a_room(50, vessels=(still(20),)), "oxygen/largest-vessel").remedy
        assert "most 4.99 L of nitrogen" in remedy
        assert "air" not in remedy

    def test_with_the_loss_of_filling_it_is_less(self):
        """4.9998 L / 1.1 = 4.545 L."""
        room = a_room(50, vessels=(still(20, filled_by="attended"),))
        assert "most 4.54 L of nitrogen" in judged(room, "oxygen/largest-vessel").remedy

    def test_by_mixing_it_is_more(self):
        """ln(20.95/19.5) x 50 m3 / 0.69218 m3/L = 5.181 L."""
        room = a_room(50, vessels=(still(20),), basis=a_basis(instant_mixing="mixing"))
        assert "most 5.18 L of nitrogen" in judged(room, "oxygen/largest-vessel").remedy

    def test_air_is_asked_for_in_figures(self):
        """Exhaust 14.448 R, three times for mixing: 48.2 L/d is 1.390 m3/h, 60.26 m3/h moved."""
        remedy = judged(evaporating(48.2), "oxygen/boil-off").remedy
        assert "60.3 m3/h in all" in remedy

    def test_nobody_rides_with_a_dewar(self):
        room = a_room(8, kind="lift", vessels=(still(25),))
        assert "Let nobody ride" in judged(room, "oxygen/largest-vessel").remedy


@pytest.mark.slow
def test_a_room_is_told_the_same_whichever_rooms_stand_beside_it():
    """What is said of one is looked up in the tables of all."""
    rooms = [
        replace(pair.outside, record=replace(pair.outside.record, id=f"room-{place}"))
        for place, pair in enumerate(PAIRS)
    ]
    together = assessed(*rooms)
    for room, found in zip(rooms, together, strict=True):
        assert found.judgements == assessed(room)[0].judgements
