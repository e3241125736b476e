import os
import random
import signal
import subprocess
import sys
from pathlib import Path

import psycopg
import pytest

from service.errors import StorageFull
from service.store.engine import Database, is_full_disk
from service.store.heads import head_of
from service.store.history import ChangeEntry, append_change, chained, changes_of
from service.store.live import get_record, insert_record, list_records
from service.store.scope import EVERYTHING
from service.store.writer import Writer
from tests.store.estate import AS_SERVICE, a_record

ROOT = Path(__file__).parents[2]


def program(text):
    """Start a program that has the service at hand."""
    preamble = (
        "import sys, resource, signal\n"
        "from service.clock import SystemClock\n"
        "from service.store.engine import Database\n"
        "from service.store.memory import StatusMemory\n"
        "from service.store.writer import Writer\n"
        "from tests.store.estate import AS_SERVICE, a_record\n"
        "from tests.store.test_durability import append\n"
        "from service.store.live import insert_record\n"
        "from service.errors import StorageFull\n"
        "database = Database(sys.argv[1])\n"
        "writer = Writer(database, SystemClock(), StatusMemory(1000))\n"
        "def large(s): insert_record(s, a_record('basis', None, notes='x' * 300_000))\n"
        "def small(s): insert_record(s, a_record('basis', None))\n"
    )
    environment = {**os.environ, "PYTHONPATH": str(ROOT), "PYTHONWARNINGS": "default"}
    return lambda *arguments: subprocess.Popen(
        [sys.executable, "-c", preamble + text, *arguments],
        cwd=ROOT, env=environment, stdout=subprocess.PIPE, text=True,
    )  # fmt: skip


def append(session):
    head = session.lock_heads(["site"])["site"]
    append_change(session, ChangeEntry(
        site_id="site", position=head.position + 1, recorded_at=session.moment, stated_at=None,
        key_id=None, request_id=None, operation="change", reason=None, wants=False, entry=b"{}",
        chain_hash=chained(head.chain_hash, b"{}")))  # fmt: skip
    return head.position + 1


def bases(database):
    page = {"sort": "id", "descending": False, "after": None, "limit": 100}
    with database.reading() as connection:
        return list_records(EVERYTHING, connection, "basis", {}, **page)


def test_a_full_database_refuses_writes_keeps_reads_and_recovers(sqlite_url, clock, memory):
    first, second = a_record("basis", None), a_record("basis", None, notes="x" * 400_000)
    third = a_record("basis", None)
    with Database(sqlite_url) as database:

        def write(record):
            with Writer(database, clock, memory) as writer:
                writer.run_now(lambda s: insert_record(s, record), AS_SERVICE)

        def limit(pages):
            with database.writing() as connection:
                connection.exec_driver_sql(f"PRAGMA max_page_count = {pages}")

        write(first)
        limit(1)  # No less than it has, so: not one page more.
        with pytest.raises(StorageFull):
            write(second)
        assert bases(database) == [first]
        limit(1_000_000)
        write(second)
        write(third)
        assert len(bases(database)) == 3


@pytest.mark.slow
def test_a_full_disk_refuses_writes_keeps_reads_and_recovers(sqlite_url):
    """A limit on the size of files makes the system refuse to write, as a full disk does."""
    child = program(
        "signal.signal(signal.SIGXFSZ, signal.SIG_IGN)\n"
        "writer.run_now(small, AS_SERVICE)\n"
        "_, most = resource.getrlimit(resource.RLIMIT_FSIZE)\n"
        "resource.setrlimit(resource.RLIMIT_FSIZE, (150_000, most))\n"
        "try:\n"
        "    writer.run_now(large, AS_SERVICE)\n"
        "except StorageFull as error:\n"
        "    print(error.status)\n"
        "with database.reading() as connection:\n"
        "    print(connection.exec_driver_sql('SELECT count(*) FROM basis').scalar_one())\n"
        "resource.setrlimit(resource.RLIMIT_FSIZE, (most, most))\n"
        "writer.run_now(large, AS_SERVICE)\n"
        "writer.close()\n"
        "database.close()\n"
    )(sqlite_url)
    told, _ = child.communicate(timeout=60)
    assert (child.returncode, told.split()) == (0, ["507", "1"])
    with Database(sqlite_url) as database:
        assert len(bases(database)) == 2


def test_the_disk_of_postgresql_can_be_full_too():
    """Error code 53100, disk_full: PostgreSQL documentation, appendix A."""
    assert is_full_disk(psycopg.errors.lookup("53100")("no space left on device"))
    assert not is_full_disk(psycopg.errors.lookup("23505")("duplicate key"))
    assert not is_full_disk(None)


@pytest.mark.slow
def test_a_killed_writer_loses_no_write_that_was_acknowledged(database_url):
    """It is killed five times, at some moment between two acknowledgements or within a commit."""
    start = program("while True: print(writer.run_now(append, AS_SERVICE), flush=True)")
    seeded = random.Random(20270301)
    acknowledged = 0
    for _ in range(5):
        child = start(database_url)
        for _ in range(seeded.randint(3, 40)):
            position = int(child.stdout.readline())
            assert position == acknowledged + 1
            acknowledged = position
        child.send_signal(signal.SIGKILL)
        rest = child.stdout.read().split()
        child.stdout.close()
        child.wait(20)
        acknowledged = int(rest[-1]) if rest else acknowledged
        with Database(database_url) as database, database.reading() as connection:
            head = head_of(EVERYTHING, connection, "site")
            changes = changes_of(EVERYTHING, connection, "site", after=0, limit=10_000)
        # One more can be committed whose acknowledgement was cut off, on its way out.
        assert acknowledged <= head.position <= acknowledged + 1
        assert [change.position for change in changes] == list(range(1, head.position + 1))
        assert changes[-1].chain_hash == head.chain_hash
        acknowledged = head.position


def test_an_answered_write_is_there_for_a_reader_at_once(database, writer):
    record = a_record("basis", None)

    writer.run_now(lambda s: insert_record(s, record), AS_SERVICE)
    with database.reading() as connection:
        assert get_record(EVERYTHING, connection, "basis", record.id) == record
