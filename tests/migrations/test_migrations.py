import re
import shutil
import sqlite3
from contextlib import closing
from dataclasses import replace
from pathlib import Path

import pytest
import sqlalchemy as sa

from service.clock import SystemClock
from service.errors import HeldByAnother, NewerDatabase
from service.store import migrate
from service.store.engine import Database
from service.store.live import get_record, insert_record
from service.store.memory import StatusMemory
from service.store.migrate import downgrade, schema_state, upgrade
from service.store.rows import row_of
from service.store.scope import EVERYTHING
from service.store.tables.registry import METADATA, TABLES
from service.store.writer import Writer
from tests.store.estate import AS_SERVICE, Estate, Shared

REVISIONS = ("first_records", "complete_the_room", "add_supply_lines")
NEWEST = REVISIONS[-1]


def tables_in(url):
    """Return all that says what the tables are, as each database itself tells it."""
    with Database(url) as database, database.reading() as connection:
        if database.dialect == "sqlite":
            found = connection.exec_driver_sql(
                "SELECT type, name, sql FROM sqlite_schema WHERE sql IS NOT NULL AND type IN"
                " ('table', 'index') AND tbl_name <> 'alembic_version'"
            )
            return {(kind, name): parts_of(sql) for kind, name, sql in found}
        inspector = sa.inspect(connection)
        names = set(inspector.get_table_names()) - {"alembic_version"}
        columns = {
            (name, column["name"]): (
                str(column["type"]), column["nullable"], column["default"],
                getattr(column["type"], "collation", None),
            )
            for name in names for column in inspector.get_columns(name)
        }  # fmt: skip
        constraints = connection.exec_driver_sql(
            "SELECT conrelid::regclass::text, conname, pg_get_constraintdef(oid)"
            " FROM pg_constraint WHERE connamespace = 'public'::regnamespace"
        )
        indexes = connection.exec_driver_sql(
            "SELECT tablename, indexname, indexdef FROM pg_indexes WHERE schemaname = 'public'"
        )
        rows = [row for row in (*constraints, *indexes) if row[0] != "alembic_version"]
        return columns | {(table, name): text for table, name, text in rows}


def parts_of(sql):
    """Split a statement into its lines, whose order means nothing in a table.

    SQLite puts the name of a table that was copied in quotes, and a column that was added later
    behind the last line.
    """
    sql = sql.replace(", filling_line_id TEXT", ",\nfilling_line_id TEXT")
    sql = re.sub(r'^CREATE TABLE "(\w+)"', r"CREATE TABLE \1", sql)
    return sorted(line.strip().rstrip(",") for line in re.sub(r"\s*\n\s*", "\n", sql).split("\n"))


@pytest.mark.slow
def test_migrating_makes_the_tables_that_the_code_describes(empty_database_url):
    """Reflected, with the text of every CHECK, which Alembic does not compare."""
    url = empty_database_url
    with Database(url) as database, database.writing() as connection:
        METADATA.create_all(connection)
    described = tables_in(url)
    with Database(url) as database, database.writing() as connection:
        METADATA.drop_all(connection)
    upgrade(url)
    migrated = tables_in(url)
    assert described.keys() == migrated.keys()
    for name, text in described.items():
        assert migrated[name] == text, name
    assert "capacity_l IS NULL" in str(migrated)


def stored(url):
    """Store a site with a record of each kind and return it."""
    shared = Shared()
    estate = Estate(shared)
    with Database(url) as database, writer_of(database) as writer:
        for record in (*shared.records, *estate.records):
            writer.run_now(lambda s, record=record: insert_record(s, record), AS_SERVICE)
    return estate


def writer_of(database):
    return Writer(database, SystemClock(), StatusMemory(1000))


@pytest.mark.slow
def test_a_database_goes_up_down_and_up_with_data_in_it(empty_database_url):
    url = empty_database_url
    assert schema_state(url) == "empty"
    upgrade(url)
    assert schema_state(url) == "current"
    before = tables_in(url)
    estate = stored(url)
    upgrade(url)
    with Database(url) as database:
        assert database.schema_state() == "current"
        with database.reading() as connection:
            found = get_record(EVERYTHING, connection, "vessel", estate.vessel.id)
            assert found == estate.vessel
    downgrade(url, "base")
    assert schema_state(url) == "empty"
    assert tables_in(url) == {}
    upgrade(url)
    assert tables_in(url) == before
    stored(url)


def in_first_form(url):
    """Store a site in the tables of the first revision, by their own columns; return it."""
    shared = Shared()
    estate = Estate(shared)
    with Database(url) as database, database.writing() as connection:
        for record in (*shared.records, *estate.records):
            name = TABLES[record.kind].name
            if not sa.inspect(connection).has_table(name):
                continue
            columns = {column["name"] for column in sa.inspect(connection).get_columns(name)}
            kept = [column for column in TABLES[record.kind].columns if column.name in columns]
            table = sa.Table(name, sa.MetaData(), *(sa.Column(c.name, c.type) for c in kept))
            row = {c.name: row_of(record)[c.name] for c in kept}
            connection.execute(sa.insert(table).values(row))
    return estate


@pytest.mark.slow
def test_records_of_the_first_revision_come_through_with_nothing_in_what_is_new(
    empty_database_url,
):
    url = empty_database_url
    upgrade(url, REVISIONS[0])
    estate = in_first_form(url)
    upgrade(url)
    new = {"boost_flow_m3_h", "boost_trigger", "outages"}
    with Database(url) as database, database.reading() as connection:
        for record in estate.records:
            found = get_record(EVERYTHING, connection, record.kind, record.id)
            if record.kind in ("opening", "control", "supply-line"):
                assert found is None
            else:
                unknown = dict.fromkeys(new & record.fields.keys())
                assert found == replace(record, fields={**record.fields, **unknown})


@pytest.mark.slow
def test_each_revision_goes_down_and_up_again_with_data_in_it(empty_database_url):
    url = empty_database_url
    upgrade(url)
    newest, watched = tables_in(url), triggers_in(url)
    estate = stored(url)
    for revision in reversed(REVISIONS[:-1]):
        downgrade(url, revision)
        assert schema_state(url) == "older"
        upgrade(url)
        assert (tables_in(url), triggers_in(url)) == (newest, watched)
        with Database(url) as database, database.reading() as connection:
            found = get_record(EVERYTHING, connection, "vessel", estate.vessel.id)
            assert found == estate.vessel


def test_a_revision_leaves_the_triggers_that_it_found(empty_database_url):
    """SQLite drops those of a table that it copies."""
    url = empty_database_url
    upgrade(url, REVISIONS[0])
    found = triggers_in(url)
    assert len(found) > 10
    upgrade(url)
    assert found.items() <= triggers_in(url).items()


def triggers_in(url):
    with Database(url) as database, database.reading() as connection:
        if database.dialect == "sqlite":
            query = "SELECT name, sql FROM sqlite_schema WHERE type = 'trigger'"
        else:
            query = "SELECT tgname, pg_get_triggerdef(oid) FROM pg_trigger WHERE NOT tgisinternal"
        return dict(connection.exec_driver_sql(query).all())


def test_a_downgrade_leaves_no_function_behind(postgresql_cluster):
    with postgresql_cluster.copy_of("migrated") as url:
        downgrade(url, "base")
        with Database(url) as database, database.reading() as connection:
            left = connection.exec_driver_sql(
                "SELECT proname FROM pg_proc WHERE pronamespace = 'public'::regnamespace"
            )
            assert left.all() == []


def at_revision(url, revision):
    with Database(url) as database, database.writing() as connection:
        connection.execute(sa.text("UPDATE alembic_version SET version_num = :r"), {"r": revision})


def test_a_database_of_a_newer_release_is_refused(database_url):
    at_revision(database_url, "not_known_here")
    assert schema_state(database_url) == "newer"
    with pytest.raises(NewerDatabase, match="newer release"):
        upgrade(database_url)
    with pytest.raises(NewerDatabase):
        downgrade(database_url, "base")


def test_a_file_that_another_writes_is_not_migrated(sqlite_url):
    with (
        Database(sqlite_url) as database,
        database.writing(),
        pytest.raises(HeldByAnother),
    ):
        upgrade(sqlite_url)


def test_an_sqlite_file_that_holds_something_is_copied_before(sqlite_url, monkeypatch, tmp_path):
    """With one more migration, made for this test."""
    estate = stored(sqlite_url)
    tree = tmp_path / "tree"
    add_migration(tree, monkeypatch, 'op.add_column("room", sa.Column("colour", sa.Text()))')
    assert schema_state(sqlite_url) == "older"
    upgrade(sqlite_url)
    assert schema_state(sqlite_url) == "current"
    (copy,) = tmp_path.glob(f"rimeward.sqlite.before-migration-from-{NEWEST}")
    with closing(sqlite3.connect(copy)) as kept, closing(sqlite3.connect(sqlite_url[10:])) as now:
        query = "SELECT id FROM vessel"
        assert kept.execute(query).fetchall() == [(estate.vessel.id,)]
        assert now.execute(query).fetchall() == [(estate.vessel.id,)]
        assert "colour" not in str(kept.execute("PRAGMA table_info(room)").fetchall())
        assert "colour" in str(now.execute("PRAGMA table_info(room)").fetchall())


@pytest.mark.parametrize("statement", [
    "op.execute(\"UPDATE vessel SET room_id = 'none'\")", "raise LookupError('halfway')",
])  # fmt: skip
def test_a_migration_that_fails_leaves_the_database_as_it_was(
    sqlite_url, monkeypatch, tmp_path, statement
):
    """Foreign keys are off while SQLite copies tables, and looked at before the commit."""
    stored(sqlite_url)
    before = tables_in(sqlite_url)
    added = 'op.add_column("room", sa.Column("colour", sa.Text()))'
    add_migration(tmp_path / "tree", monkeypatch, f"{added}; {statement}")
    with pytest.raises((RuntimeError, LookupError), match=r"refer|halfway"):
        upgrade(sqlite_url)
    assert tables_in(sqlite_url) == before
    assert schema_state(sqlite_url) == "older"


def add_migration(tree, monkeypatch, statement):
    shutil.copytree(Path(__file__).parents[2] / "migrations", tree)
    (tree / "versions" / "one_more.py").write_text(
        "import sqlalchemy as sa\nfrom alembic import op\n"
        f'revision, down_revision = "one_more", "{NEWEST}"\n'
        f"def upgrade():\n    {statement}\n"
    )
    monkeypatch.setattr(migrate, "_folder", lambda: tree)
    migrate._scripts.cache_clear()
    monkeypatch.setattr(migrate, "_scripts", migrate._scripts.__wrapped__)


def test_migrations_import_nothing_of_the_service():
    for file in (Path(__file__).parents[2] / "migrations").rglob("*.py"):
        assert not re.search(r"^\s*(from|import) service", file.read_text(), re.MULTILINE), file
