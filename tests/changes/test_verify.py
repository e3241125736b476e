"""Whatever is altered in a database file is found, and where."""

import shutil
import sqlite3
import zlib

import pytest

from service.changes.verify import differences, verify
from service.store.heads import INSTALLATION
from service.store.history import version_of, versions_of
from service.store.records import body
from tests.changes.conftest import line_on

ADDED = {
    "lfl_pct", "pit", "door", "leakage_area_m2", "relief_opening_m2", "floor_rating_kpa",
    "zeroed_at_kpa_abs", "outages", "boost_flow_m3_h", "boost_trigger", "terminal_height",
    "tare_kg", "footprint_m2", "cold_area_m2", "working_pressure_kpa", "withdrawal_bore_mm",
    "neck_plug", "relief", "quench",
}  # fmt: skip


@pytest.fixture(scope="module")
def kept_file(migrated_sqlite_file, tmp_path_factory):
    """A file with a site that has some history."""
    file = tmp_path_factory.mktemp("kept") / "kept.sqlite"
    shutil.copy(migrated_sqlite_file, file)
    with line_on(file) as line:
        line.a_site()
        room = line.a_room(volume_m3=40.0)
        vessel = line.a_vessel(room)
        line.change(vessel, contents_l=12.0)
        line.change(vessel, contents_l=14.0)
        assert verify(line.database).sound
    return file


@pytest.fixture
def kept(kept_file, tmp_path):
    """A copy of it to alter."""
    with line_on(shutil.copy(kept_file, tmp_path / "kept.sqlite")) as line:
        yield line


def altered(line, *statements):
    """Alter the file as somebody would who has it: without the triggers."""
    file = line.database.url.removeprefix("sqlite:///")
    with sqlite3.connect(file) as connection:
        names = connection.execute("SELECT name FROM sqlite_master WHERE type = 'trigger'")
        for (name,) in names.fetchall():
            connection.execute(f'DROP TRIGGER "{name}"')
        for statement, *values in statements:
            assert connection.execute(statement, values).rowcount > 0, statement
    report = verify(line.database)
    return [fault.what for fault in report.faults]


def test_an_altered_entry_breaks_the_chain_there(kept):
    found = altered(kept, ("UPDATE change SET entry ="
                           " CAST(replace(CAST(entry AS TEXT), '12.0', '13.0') AS BLOB)"
                           " WHERE position = 4 AND site_id <> ?", INSTALLATION))  # fmt: skip
    assert any("its hash differs" in what for what in found)


def test_an_altered_reason_differs_from_its_entry(kept):
    found = altered(kept, ("UPDATE change SET reason = 'tidied' WHERE position = 3",))
    assert any("differs from its hashed entry" in what for what in found)


def test_a_removed_entry_is_missed(kept):
    found = altered(kept, ("DELETE FROM change WHERE position = 3",))
    assert any("missing" in what for what in found)


def test_a_cut_tail_is_missed_by_the_head(kept):
    found = altered(kept, ("DELETE FROM change WHERE position = 5",))
    assert any("the head does not stand on the last entry" in what for what in found)


def test_an_altered_version_is_found(kept):
    body = zlib.compress(b"{}")
    found = altered(kept, ("UPDATE record_version SET body = ? WHERE from_position = 4", body))
    assert any("record version" in what and "was altered" in what for what in found)


def test_a_version_that_no_entry_tells_of_is_found(kept):
    found = altered(
        kept,
        ("INSERT INTO record_version SELECT record_id, 99, kind, site_id, from_position, schema,"
         " body FROM record_version WHERE from_position = 4",),
    )  # fmt: skip
    assert any("was put in" in what for what in found)


def test_an_altered_live_record_is_found(kept):
    found = altered(kept, ("UPDATE vessel SET contents_l = 1.0",))
    assert [what for what in found if "live record vessel" in what]


def test_an_altered_assessment_is_found(kept):
    found = altered(
        kept,
        ("UPDATE assessment_version SET status ="
         " CAST(replace(CAST(status AS TEXT), 'stop', 'calm') AS BLOB)"
         " WHERE from_position = 5",),
    )  # fmt: skip
    assert any("assessment of room" in what and "was altered" in what for what in found)


def test_an_altered_finding_is_found(kept):
    found = altered(kept, ("UPDATE finding SET severity = 'observation'",))
    assert any("live finding" in what for what in found)


def test_a_record_that_an_assessment_rests_on_is_missed(kept):
    found = altered(kept, ("DELETE FROM record_version WHERE kind = 'vessel' AND revision = 1",))
    assert any("rests on, is not there" in what for what in found)


@pytest.fixture
def kept_before(sqlite_line, monkeypatch):
    """A site with some history, its bodies in the form that the first release wrote."""

    def first_form(record):
        return {name: value for name, value in body(record).items() if name not in ADDED}

    with monkeypatch.context() as earlier:
        earlier.setattr("service.changes.replace.body", first_form)
        earlier.setattr("service.store.history.body", first_form)
        earlier.setattr("service.store.history.SCHEMA", 1)
        sqlite_line.a_site()
        vessel = sqlite_line.a_vessel(sqlite_line.a_room(volume_m3=40.0))
        sqlite_line.change(vessel, contents_l=12.0)
    return sqlite_line, vessel


def test_bodies_of_the_first_form_are_sound_and_read_back_with_nothing_in_what_came_since(
    kept_before,
):
    line, vessel = kept_before
    (row,) = [row for row in line.read(versions_of, vessel.site_id, 3) if row.kind == "vessel"]
    assert (row.schema, b"neck_plug" in row.body) == (1, False)
    assert verify(line.database).sound
    assert line.read(version_of, "vessel", vessel.id, 1) == vessel
    line.change(vessel, neck_plug="vented")
    assert verify(line.database).sound
    newest = line.read(version_of, "vessel", vessel.id, 3)
    assert newest.fields["neck_plug"] == "vented"


@pytest.mark.parametrize(
    "statement", ["UPDATE vessel SET contents_l = 1.0", "UPDATE vessel SET tare_kg = 1.0"]
)
def test_a_live_record_altered_since_the_first_form_is_found(kept_before, statement):
    line, _ = kept_before
    found = altered(line, (statement,))
    assert [what for what in found if "live record vessel" in what]


def test_numbers_differ_only_beyond_the_tolerance():
    assert list(differences({"a": [1.0, 2]}, {"a": [1.0 + 1e-12, 2.0]})) == []
    assert list(differences({"a": [1.0]}, {"a": [1.0 + 1e-6]})) == ["/a/0 was 1.0, is 1.000001"]
    assert list(differences({"a": 1.0}, {"a": None})) == ["/a was 1.0, is None"]
    assert list(differences(True, 1)) == [" was True, is 1"]
