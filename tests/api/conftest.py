"""A whole service to ask, on a database of its own with two sites and a key of each role."""

import shutil
from datetime import timedelta

import pytest
from starlette.testclient import TestClient

from service.app import create_app
from service.clock import FixedClock
from service.settings import Settings
from tests.api.estate import Asker, Estate
from tests.conftest import MOMENT
from tests.databases import TEMPLATE

NEVER = timedelta(0)
BOTH = ["sqlite", pytest.param("postgresql", marks=pytest.mark.postgresql)]


def settings_for(url, **changed):
    """Settings under which nothing runs by itself."""
    return Settings(**{"database_url": url, "clock_every": NEVER, "sweep_every": NEVER} | changed)


def prepared(url):
    """Fill a migrated database with the estate; return it with its keys."""
    app = create_app(settings_for(url), clock=FixedClock(MOMENT))
    with TestClient(app) as client:
        return Estate(Asker.with_new_keys(client, app))


@pytest.fixture(scope="session")
def estate_on_sqlite(migrated_sqlite_file, tmp_path_factory):
    """An SQLite file with the estate, and what is in it."""
    file = tmp_path_factory.mktemp("estate") / "estate.sqlite"
    shutil.copy(migrated_sqlite_file, file)
    return file, prepared(f"sqlite:///{file}")


@pytest.fixture(scope="session")
def estate_on_postgresql(postgresql_cluster):
    """The name of a PostgreSQL database with the estate, and what is in it."""
    with postgresql_cluster.copy_of(TEMPLATE) as url:
        made = prepared(url)
        yield url.partition("@/")[2].partition("?")[0], made


@pytest.fixture
def estate_in_a_file(estate_on_sqlite, tmp_path):
    """A copy of the estate on SQLite, where one database is enough."""
    file, made = estate_on_sqlite
    shutil.copy(file, tmp_path / "copy.sqlite")
    return f"sqlite:///{tmp_path / 'copy.sqlite'}", made


@pytest.fixture
def postgresql_estate(estate_on_postgresql, postgresql_cluster):
    """A copy of the estate on PostgreSQL, where several processes are needed."""
    name, made = estate_on_postgresql
    with postgresql_cluster.copy_of(name) as url:
        yield url, made


@pytest.fixture(params=BOTH)
def copied_estate(request):
    """A copy of the estate on each kind of database: its address, and what is in it."""
    name = "estate_in_a_file" if request.param == "sqlite" else "postgresql_estate"
    return request.getfixturevalue(name)


@pytest.fixture
def started(clock):
    """Give a started service for an address and settings; it is stopped at the end."""
    running = []

    def starting(url, keys, **changed):
        app = create_app(settings_for(url, **changed), clock=clock)
        client = TestClient(app, raise_server_exceptions=False)
        client.__enter__()
        running.append(client)
        return Asker(client, app, keys, clock)

    yield starting
    for client in running:
        client.__exit__(None, None, None)


@pytest.fixture
def serve(copied_estate, started):
    """Give a started service on each kind of database, for some settings."""

    def serving(**changed):
        url, made = copied_estate
        return started(url, made.ask.keys, **changed)

    return serving


@pytest.fixture
def ask(serve):
    """A started service on each kind of database."""
    return serve()


@pytest.fixture
def estate(copied_estate):
    """What is in the database: two sites with a room, a unit, a vessel and a detector each."""
    return copied_estate[1]


@pytest.fixture
def ask_one(estate_in_a_file, started):
    """A started service on SQLite, where one database is enough."""
    url, made = estate_in_a_file
    return started(url, made.ask.keys)


@pytest.fixture
def estate_of_one(estate_in_a_file):
    """What is in the database of ``ask_one``."""
    return estate_in_a_file[1]
