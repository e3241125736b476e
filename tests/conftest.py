"""What all tests can ask for: databases of both kinds, a clock that stands still, a writer."""

import os
import shutil
import sys
from datetime import UTC, datetime
from pathlib import Path

import pytest
from hypothesis import settings

from service.clock import FixedClock
from service.store.engine import Database
from service.store.memory import StatusMemory
from service.store.migrate import upgrade
from service.store.writer import Writer
from tests.databases import cluster

MOMENT = datetime(2027, 3, 1, 8, tzinfo=UTC)

# No example is timed: a busy machine is no fault of the code. In CI the examples are the same in
# every run, so that a commit passes or fails for what it holds; elsewhere each run seeks new ones.
# `pytest` alone tries fewer of them, deploy/test.sh the usual hundred.
settings.register_profile("here", deadline=None)
settings.register_profile("ci", deadline=None, derandomize=True, print_blob=True)
settings.load_profile("ci" if os.environ.get("CI") else "here")
settings.register_profile("quick", max_examples=20)

MARKS_LEFT_OUT = ("slow", "long", "browser", "bench")


def keep_bytecode(folder):
    """Where Python is told to leave no bytecode beside the sources, keep it in a folder.

    Without any, each worker compiles everything anew, and each process that a test starts too:
    that is more work than most tests are.
    """
    if sys.dont_write_bytecode and sys.pycache_prefix is None:
        sys.dont_write_bytecode = False
        sys.pycache_prefix = os.environ["PYTHONPYCACHEPREFIX"] = str(folder)
        os.environ.pop("PYTHONDONTWRITEBYTECODE", None)


keep_bytecode(Path(__file__).parents[1] / ".pytest_cache" / "bytecode")


def is_left_out(mark, config):
    return f"not {mark}" in config.option.markexpr


def pytest_configure(config):
    if is_left_out("slow", config):
        settings.load_profile("quick")


def pytest_ignore_collect(collection_path, config):
    """Import no module of which every test is left out: the libraries that it needs take long."""
    if collection_path.suffix != ".py" or not collection_path.name.startswith("test_"):
        return None
    text = collection_path.read_text(encoding="utf-8")
    left_out = (mark for mark in MARKS_LEFT_OUT if is_left_out(mark, config))
    return any(f"\npytestmark = pytest.mark.{mark}" in text for mark in left_out) or None


# What crosses the whole service is run on SQLite while one works, and on both in deploy/test.sh.
QUICK_ON_BOTH: frozenset[str] = frozenset()


@pytest.hookimpl(tryfirst=True)
def pytest_collection_modifyitems(items):
    """Begin with the files that take long, so that no worker ends alone with one of them."""
    for item in items:
        on_postgresql = item.get_closest_marker("postgresql") is not None
        if on_postgresql and not QUICK_ON_BOTH.intersection(item.path.parts):
            item.add_marker(pytest.mark.slow)
    long_files = {item.path for item in items if item.get_closest_marker("slow")}
    items.sort(key=lambda item: item.path not in long_files)


@pytest.fixture(scope="session")
def postgresql_cluster():
    """A server of our own; one a worker, started by the first test that needs it."""
    with cluster() as running:
        yield running


@pytest.fixture(scope="session")
def migrated_sqlite_file(tmp_path_factory):
    """An SQLite file with all tables and nothing in them."""
    file = tmp_path_factory.mktemp("migrated") / "migrated.sqlite"
    upgrade(f"sqlite:///{file}")
    return file


@pytest.fixture(params=["sqlite", pytest.param("postgresql", marks=pytest.mark.postgresql)])
def database_url(request, tmp_path):
    """The address of a migrated database of its own, one of each kind."""
    if request.param == "sqlite":
        file = tmp_path / "rimeward.sqlite"
        shutil.copy(request.getfixturevalue("migrated_sqlite_file"), file)
        yield f"sqlite:///{file}"
    else:
        running = request.getfixturevalue("postgresql_cluster")
        with running.migrated() as url:
            yield url


@pytest.fixture(params=["sqlite", pytest.param("postgresql", marks=pytest.mark.postgresql)])
def empty_database_url(request, tmp_path):
    """The address of a database without tables, one of each kind."""
    if request.param == "sqlite":
        yield f"sqlite:///{tmp_path / 'empty.sqlite'}"
    else:
        running = request.getfixturevalue("postgresql_cluster")
        with running.copy_of("template0") as url:
            yield url


@pytest.fixture
def sqlite_url(tmp_path, migrated_sqlite_file):
    """The address of a migrated SQLite file of its own, where one database is enough."""
    file = tmp_path / "rimeward.sqlite"
    shutil.copy(migrated_sqlite_file, file)
    return f"sqlite:///{file}"


@pytest.fixture
def database(database_url):
    """An open database."""
    with Database(database_url) as opened:
        yield opened


@pytest.fixture
def clock():
    """A clock that stands still."""
    return FixedClock(MOMENT)


@pytest.fixture
def memory():
    """The memory of stored answers."""
    return StatusMemory(1_000_000)


@pytest.fixture
def writer(database, clock, memory):
    """The writer of the open database."""
    with Writer(database, clock, memory) as running:
        yield running
