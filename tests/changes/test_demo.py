"""The demo estate is what a visitor sees first: complete, plausible, invented, removable."""

import shutil
from collections import Counter
from contextlib import contextmanager
from datetime import timedelta
from functools import cache
from typing import get_args

import pytest

from service.__main__ import main
from service.api.schemas.controls import ControlKind
from service.api.schemas.openings import OpeningKind
from service.api.schemas.rooms import RoomKind
from service.api.schemas.vessels import VesselKind
from service.audit.assessment import STANDINGS
from service.audit.rules.registry import RULES
from service.audit.rules.rule import family
from service.changes.demo import load_demo
from service.changes.verify import verify
from service.clock import FixedClock, moment_of
from service.physics.fluids import FLUIDS
from service.store.engine import Database
from service.store.findings import list_findings
from service.store.live import list_records
from service.store.memory import StatusMemory
from service.store.states import room_states
from service.store.writer import Writer
from tests.changes.conftest import Line
from tests.conftest import MOMENT

ALL_AT_ONCE = 1000

# What published investigations name, in general terms, and the rule that has to find it. The
# rooms are invented; that each kind of event is in the estate is what is asked for.
TOLD_BY_INVESTIGATIONS = [
    ("H-004", "a dewar in a basement without a fan or a detector", "oxygen/largest-vessel"),
    ("H-016", "gas from a line left open into a pit", "oxygen/boil-off"),
    ("H-019", "a lone worker with the fan off and the detector silenced", "detectors/silenced"),
    ("H-021", "an automatic filling that does not stop", "oxygen/overfill"),
    ("H-021", "no high level of its own behind it", "vessels/fill-without-high-level"),
    ("M-002", "a relief device taken off", "vessels/relief-missing"),
    ("R-111", "an iced neck", "vessels/neck-sealed"),
    ("R-107", "a closed damper behind a running fan", "ventilation/flow-not-proved"),
    ("M-010", "dry ice where only oxygen is watched", "toxic/spill"),
    ("M-011", "a passenger in a lift with a dewar", "oxygen/largest-vessel"),
    ("M-016", "an alarm silenced for weeks", "detectors/silenced"),
    ("R-102", "argon in a workshop that nobody looked at", "oxygen/largest-vessel"),
    ("R-107", "fuel where the detector at the floor has failed", "flammable/largest-vessel"),
]


@contextmanager
def opened(file, moment):
    """A migrated file with shipped records, under a clock that stands still."""
    clock = FixedClock(moment)
    url = f"sqlite:///{file}"
    with Database(url) as database, Writer(database, clock, StatusMemory(1 << 20)) as writer:
        yield Line(writer, database, clock)


@pytest.fixture(scope="module")
def estate(tmp_path_factory, migrated_sqlite_file):
    """The estate, loaded once beside a site of somebody else; nothing here changes it."""
    file = tmp_path_factory.mktemp("demo") / "demo.sqlite"
    shutil.copy(migrated_sqlite_file, file)
    with opened(file, MOMENT) as line:
        line.a_site("OWN")
        line.run(load_demo)
        yield line


def listed(line, kind, **filters):
    """All records of a kind, of every site."""
    page = {"sort": "id", "descending": False, "after": None, "limit": ALL_AT_ONCE}
    return line.read(list_records, kind, filters, **page)


@cache
def demo_sites(line):
    return {site.id: site for site in listed(line, "site") if site.fields["demo"]}


def records(line, kind):
    """What stands in the demo sites, by tag."""
    found, sites = listed(line, kind), demo_sites(line)
    return {each.fields["tag"]: each.fields for each in found if each.site_id in sites}


def standings(line):
    """Where each room of the demo stands that is in service."""
    rooms = listed(line, "room", state="in-service")
    said = {each.room_id: each for each in line.read(room_states, [room.id for room in rooms])}
    assert not any(each.failed for each in said.values())
    return {room.fields["tag"]: said[room.id].standing for room in rooms}


def test_there_are_three_sites_and_all_say_that_they_are_invented(estate):
    sites = [site.fields for site in demo_sites(estate).values()]
    assert len(sites) == 3
    assert all("(invented)" in site["name"] for site in sites)
    assert any(site["elevation_m"] > 1600.0 for site in sites)
    assert len({site["basis"] for site in sites}) == 3


def test_one_site_is_judged_by_a_basis_of_its_own_and_has_a_mixture_of_its_own(estate):
    bases, fluids = records(estate, "basis"), records(estate, "fluid")
    used = {site.fields["basis"] for site in demo_sites(estate).values()}
    assert bases
    assert bases.keys() <= used
    assert all(basis["values"].keys() == basis["sources"].keys() for basis in bases.values())
    assert fluids
    assert fluids.keys() <= {each["fluid"] for each in records(estate, "vessel").values()}


def test_there_are_rooms_of_every_kind_above_and_below_the_ground(estate):
    rooms = records(estate, "room").values()
    assert len(rooms) >= 30
    assert {room["kind"] for room in rooms} == set(get_args(RoomKind))
    assert {room["below_ground"] for room in rooms} == {True, False}
    assert any(room["purge_flow_m3_h"] for room in rooms)
    assert any(room["unaccompanied"] for room in rooms if room["kind"] == "lift")


def test_there_are_vessels_of_every_kind_and_of_every_fluid(estate):
    vessels = records(estate, "vessel").values()
    assert len(vessels) >= 150
    assert {vessel["kind"] for vessel in vessels} == set(get_args(VesselKind))
    assert {vessel["fluid"] for vessel in vessels} >= FLUIDS.keys()
    assert any(vessel["room_id"] is None for vessel in vessels)
    assert any(vessel["manifold"] for vessel in vessels)
    filled = {(vessel["filling"] or {}).get("by") for vessel in vessels}
    assert filled >= {"automatic", "attended", "exchanged"}


def test_there_is_ventilation_of_every_sort(estate):
    units = records(estate, "ventilation-unit").values()
    assert {unit["arrangement"] for unit in units} == {"supply", "exhaust", "balanced"}
    assert any(unit["outdoor_air_fraction"] < 0.2 and len(unit["serves"]) > 2 for unit in units)
    assert any(unit["boost_flow_m3_h"] for unit in units)
    assert any(unit["outages"] for unit in units)
    assert any(unit["mixing_tested_on"] for unit in units)
    assert {unit["state"] for unit in units} >= {"running", "stopped"}
    assert {unit["standby_power"] for unit in units} == {True, False}
    assert {unit["flow_proved"] for unit in units} == {True, False}


def test_there_are_detectors_of_oxygen_and_of_the_gases_themselves(estate):
    detectors = records(estate, "detector").values()
    own = {"carbon-dioxide", "nitrous-oxide", "hydrogen", "methane"}
    assert {each["gas"] for each in detectors} == own | {"oxygen"}
    assert any(each["silenced_since"] for each in detectors)
    assert {each["state"] for each in detectors} >= {"in-service", "fault"}
    assert max(each["zeroed_at_kpa_abs"] for each in detectors) > 100.0
    assert min(each["zeroed_at_kpa_abs"] for each in detectors) < 85.0


def test_there_are_openings_and_controls_of_the_kinds_there_are(estate):
    openings, controls = records(estate, "opening"), records(estate, "control")
    assert {each["kind"] for each in openings.values()} <= set(get_args(OpeningKind))
    assert any(each["other_room_id"] is None for each in openings.values())
    assert any(each["normally_open"] for each in openings.values())
    assert {each["kind"] for each in controls.values()} == set(get_args(ControlKind))


def test_every_standing_occurs_and_most_rooms_are_well_kept(estate):
    counted = Counter(standings(estate).values())
    assert counted.keys() == set(STANDINGS)
    assert counted["in-order"] >= counted["attention"]
    assert counted["in-order"] + counted["attention"] > 2 * counted["action"]
    assert counted["in-order"] > 2 * counted["stop"]


def test_every_family_of_rules_finds_something(estate):
    findings = estate.read(list_findings, {}, limit=ALL_AT_ONCE)
    assert {finding["family"] for finding in findings} == {family(rule) for rule in RULES}
    assert {finding["severity"] for finding in findings} == {
        "critical", "major", "minor", "observation",
    }  # fmt: skip


@pytest.mark.parametrize(("tag", "rule"), [(tag, rule) for tag, _, rule in TOLD_BY_INVESTIGATIONS])
def test_what_investigations_tell_of_is_found(estate, tag, rule):
    (room,) = listed(estate, "room", tag=tag)
    found = estate.read(list_findings, {"room_id": room.id}, limit=ALL_AT_ONCE)
    assert rule in {finding["rule"] for finding in found if finding["severity"] != "observation"}
    assert standings(estate)[tag] in ("action", "stop")


@pytest.mark.slow
def test_what_was_loaded_follows_from_its_records(estate):
    assert verify(estate.database).sound


@pytest.mark.slow
def test_the_estate_does_not_grow_stale(estate, sqlite_url):
    later = MOMENT + timedelta(days=1111)
    with opened(sqlite_url.removeprefix("sqlite:///"), later) as line:
        line.run(load_demo)
        assert standings(line) == standings(estate)
        counted = [each["counted_at"] for each in records(line, "vessel").values()]
        assert all(later - moment_of(each) < timedelta(days=60) for each in counted if each)


@pytest.mark.slow
def test_the_command_loads_the_estate_and_takes_all_of_it_away_again(
    sqlite_url, monkeypatch, capsys
):
    file = sqlite_url.removeprefix("sqlite:///")
    with opened(file, MOMENT) as line:
        own = line.a_site("OWN").id
        line.a_vessel(line.a_room("OWN"))
    monkeypatch.setenv("RIMEWARD_DATABASE_URL", sqlite_url)
    assert main(["demo"]) == 0
    loaded = capsys.readouterr().out
    assert "of an invented estate loaded" in loaded
    assert main(["demo", "--remove"]) == 0
    removed = capsys.readouterr().out
    assert "records removed" in removed
    assert removed.split()[0] == loaded.split()[0]
    assert main(["demo", "--remove"]) == 0
    assert capsys.readouterr().out.startswith("0 ")
    with opened(file, MOMENT) as line:
        kept = [("site", 1), ("room", 1), ("vessel", 1), ("control", 0)]
        for kind, number in kept:
            assert [each.site_id for each in listed(line, kind)] == [own] * number
        assert [each.fields["tag"] for each in listed(line, "basis")] == ["baseline", "us", "uk-eu"]
        assert verify(line.database).sound
