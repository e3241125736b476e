import pytest

from service.store.live import insert_record
from tests.store.estate import AS_SERVICE, Estate, Shared


@pytest.fixture
def shared(store):
    """The shipped basis and fluid, stored."""
    shipped = Shared()
    store(*shipped.records)
    return shipped


@pytest.fixture
def estate(store, shared):
    """A site with one record of each kind, stored."""
    built = Estate(shared)
    store(*built.records)
    return built


@pytest.fixture
def other_estate(store, shared):
    """Another site with one record of each kind, stored."""
    built = Estate(shared)
    store(*built.records)
    return built


@pytest.fixture
def store(writer):
    """Store records in one transaction."""

    def insert(*records):
        def job(session):
            for record in records:
                insert_record(session, record)

        writer.run_now(job, AS_SERVICE)

    return insert


@pytest.fixture
def write(writer):
    """Run a function of a session in a transaction of its own."""
    return lambda job: writer.run_now(job, AS_SERVICE)
