import asyncio
import logging
import threading
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from datetime import timedelta

import pytest
import sqlalchemy as sa

from service.errors import Busy, HeldByAnother
from service.store.engine import Database
from service.store.heads import head_of, heads_of
from service.store.history import ChangeEntry, append_change, chained, changes_of
from service.store.live import get_record, insert_record, revise_record
from service.store.memory import Published, StoredStatus
from service.store.scope import EVERYTHING
from service.store.writer import Writer
from tests.store.estate import AS_SERVICE, a_record


def step(session, site_id, wants=False, entry=b"{}"):
    """Append a change to a site."""
    head = session.lock_heads([site_id])[site_id]
    append_change(session, entry_after(session, head, wants=wants, entry=entry))


def entry_after(session, head, *, wants=False, entry=b"{}", **changes):
    return ChangeEntry(**{
        "site_id": head.site_id, "position": head.position + 1, "recorded_at": session.moment,
        "stated_at": None, "key_id": session.key_id, "request_id": None, "operation": "change",
        "reason": None, "wants": wants, "entry": entry,
        "chain_hash": chained(head.chain_hash, entry),
    } | changes)  # fmt: skip


def rename(record_id, number):
    """Read, add to the name, write: what loses updates when it is done wrongly."""

    def job(session):
        session.lock_heads(["site"])
        record = get_record(EVERYTHING, session.connection, "room", record_id)
        fields = {**record.fields, "name": f"{record.fields['name'] or ''}{number},"}
        new = replace(record, revision=record.revision + 1, fields=fields)
        assert revise_record(session, new, record.revision)
        step(session, "site")

    return job


def test_four_writers_at_once_lose_no_update(database, writer, estate):
    rounds, writers = 15, 4
    room = estate.room.id

    def work(number):
        for _ in range(rounds):
            writer.run_now(rename(room, number), AS_SERVICE)

    with ThreadPoolExecutor(writers) as pool:
        list(pool.map(work, range(writers)))
    with database.reading() as connection:
        record = get_record(EVERYTHING, connection, "room", room)
        head = head_of(EVERYTHING, connection, "site")
        changes = changes_of(EVERYTHING, connection, "site", after=0, limit=1000)
    names = record.fields["name"].split(",")[:-1]
    assert sorted(names) == sorted(str(number) for number in range(writers) for _ in range(rounds))
    assert record.revision == 1 + rounds * writers
    assert [change.position for change in changes] == list(range(1, head.position + 1))


def test_compare_and_set_without_a_lock_writes_once(database, writer, estate):
    """Four writers hold the same revision; one wins on either database."""
    start = threading.Barrier(4, timeout=20)
    second = replace(estate.room, revision=2)

    def work(_):
        start.wait()
        return writer.run_now(lambda s: revise_record(s, second, 1), AS_SERVICE)

    with ThreadPoolExecutor(4) as pool:
        assert sorted(pool.map(work, range(4))) == [False, False, False, True]


def test_positions_are_serial_gapless_and_chained_under_concurrency(database, writer):
    sites = ("a", "b")

    def work(number):
        def job(session):
            # The other way round in every other job: the order of locking is not the caller's.
            for site in sites if number % 2 else reversed(sites):
                session.lock_heads(sites)
                step(session, site, entry=str(number).encode())

        writer.run_now(job, AS_SERVICE)

    with ThreadPoolExecutor(4) as pool:
        list(pool.map(work, range(24)))
    with database.reading() as connection:
        heads = heads_of(EVERYTHING, connection)
        for head in heads:
            changes = changes_of(EVERYTHING, connection, head.site_id, after=0, limit=100)
            assert [change.position for change in changes] == list(range(1, 25))
            moments = [change.recorded_at for change in changes]
            assert moments == sorted(set(moments))
            previous = "0" * 64
            for change in changes:
                previous = chained(previous, change.entry)
                assert change.chain_hash == previous
            assert (head.position, head.chain_hash) == (24, previous)
            assert head.recorded_at == moments[-1]
    assert [head.site_id for head in heads] == ["a", "b"]


def test_recorded_at_does_not_go_back_when_the_clock_does(database, writer, clock):
    writer.run_now(lambda s: step(s, "site"), AS_SERVICE)
    clock.advance(timedelta(hours=-1))
    writer.run_now(lambda s: step(s, "site"), AS_SERVICE)
    clock.advance(timedelta(hours=2))
    writer.run_now(lambda s: step(s, "site"), AS_SERVICE)
    with database.reading() as connection:
        changes = changes_of(EVERYTHING, connection, "site", after=0, limit=10)
    first, second, third = (change.recorded_at for change in changes)
    assert second - first == timedelta(microseconds=1)
    assert third == clock.now()


def test_an_entry_that_is_not_the_next_is_refused(write):
    def job(session):
        head = session.lock_heads(["site"])["site"]
        for changes in (
            {"position": 2},
            {"recorded_at": head.recorded_at},
            {"chain_hash": "0" * 64},
            {"site_id": "unlocked"},
        ):
            with pytest.raises(ValueError, match=r"next|chained|locked"):
                append_change(session, entry_after(session, head, **changes))

    write(job)


def test_a_job_that_raises_leaves_nothing_behind_and_tells_nobody(database, writer, memory):
    def job(session):
        insert_record(session, a_record("basis", None, id="basis"))
        step(session, "site")
        session.publish(Published((status("room"),)))
        raise LookupError("halfway")

    with pytest.raises(LookupError, match="halfway"):
        writer.run_now(job, AS_SERVICE)
    with database.reading() as connection:
        assert get_record(EVERYTHING, connection, "basis", "basis") is None
        assert heads_of(EVERYTHING, connection) == []
    assert memory.get("room") is None
    assert memory.known_position("site") == 0


def status(room_id, position=1):
    return StoredStatus(room_id, "site", position, b"{}", None, "1", failed=False)


def test_memory_knows_before_the_caller_is_answered(writer, memory):
    def job(session):
        session.publish(Published((status("room"),)))
        step(session, "site", wants=True)
        return "done"

    async def ask():
        assert await writer.run(job, AS_SERVICE) == "done"
        assert memory.get("room") == status("room")
        head = memory.head("site")
        assert (head.position, head.wanted_position) == (1, 1)
        assert await memory.wait_for("site", 1, 0)

    asyncio.run(ask())


def test_memory_does_not_know_before_the_commit(writer, memory):
    def job(session):
        session.publish(Published((status("room"),)))
        step(session, "site")
        return memory.get("room"), memory.known_position("site")

    assert writer.run_now(job, AS_SERVICE) == (None, 0)


def test_a_cancelled_caller_does_not_abort_the_job_halfway(database, writer):
    begun, go_on = threading.Event(), threading.Event()

    def job(session):
        step(session, "site")
        begun.set()
        assert go_on.wait(20)
        step(session, "site")

    async def ask():
        task = asyncio.create_task(writer.run(job, AS_SERVICE))
        await asyncio.to_thread(begun.wait, 20)
        task.cancel()
        with pytest.raises(asyncio.CancelledError):
            await task
        go_on.set()

    asyncio.run(ask())
    writer.close()
    with database.reading() as connection:
        assert head_of(EVERYTHING, connection, "site").position == 2


def test_the_failure_of_a_job_whose_caller_is_gone_is_logged(writer, caplog):
    begun, go_on = threading.Event(), threading.Event()

    def job(session):
        begun.set()
        assert go_on.wait(20)
        raise LookupError("unseen")

    async def ask():
        task = asyncio.create_task(writer.run(job, AS_SERVICE))
        await asyncio.to_thread(begun.wait, 20)
        task.cancel()
        with pytest.raises(asyncio.CancelledError):
            await task
        go_on.set()

    with caplog.at_level(logging.ERROR):
        asyncio.run(ask())
        writer.close()
    assert "LookupError: unseen" in caplog.text


def test_a_full_queue_is_busy_and_recovers(database, clock, memory):
    begun, go_on = threading.Semaphore(0), threading.Event()

    def block(_):
        begun.release()
        return go_on.wait(20)

    async def ask(writer):
        tasks = []
        for _ in range(database.writers):
            tasks.append(asyncio.create_task(writer.run(block, AS_SERVICE)))
            assert await asyncio.to_thread(begun.acquire, timeout=20)
        tasks += [asyncio.create_task(writer.run(lambda _: True, AS_SERVICE)) for _ in range(2)]
        await asyncio.sleep(0)
        assert writer.waiting == 2
        with pytest.raises(Busy) as refused:
            await writer.run(lambda _: True, AS_SERVICE)
        assert refused.value.headers["Retry-After"]
        go_on.set()
        assert all(await asyncio.gather(*tasks))
        assert await writer.run(lambda _: "again", AS_SERVICE) == "again"

    with Writer(database, clock, memory, queue_bound=2) as writer:
        asyncio.run(ask(writer))


def test_a_closed_writer_finishes_what_waits_and_takes_no_more(database, clock, memory):
    writer = Writer(database, clock, memory)

    async def ask():
        tasks = [asyncio.create_task(writer.run(lambda s: step(s, "site"), AS_SERVICE))
                 for _ in range(5)]  # fmt: skip
        await asyncio.sleep(0)
        await asyncio.to_thread(writer.close)
        await asyncio.gather(*tasks)

    asyncio.run(ask())
    with pytest.raises(Busy):
        writer.run_now(lambda _: None, AS_SERVICE)
    with database.reading() as connection:
        assert head_of(EVERYTHING, connection, "site").position == 5


def test_a_job_does_not_wait_for_another(writer):
    with pytest.raises(RuntimeError, match="wait for ever"):
        writer.run_now(lambda _: writer.run_now(lambda _: None, AS_SERVICE), AS_SERVICE)


def test_a_reader_sees_one_state_and_cannot_write(database, writer, estate):
    room = estate.room.id
    with database.reading() as connection:
        before = get_record(EVERYTHING, connection, "room", room)
        writer.run_now(rename(room, 1), AS_SERVICE)
        assert get_record(EVERYTHING, connection, "room", room) == before
        with pytest.raises(sa.exc.DBAPIError, match=r"(?i:read-?only)"):
            connection.exec_driver_sql("DELETE FROM room")


def test_a_second_writer_of_a_file_is_refused_until_the_first_is_gone(sqlite_url):
    with Database(sqlite_url) as first:
        with first.writing():
            pass
        with Database(sqlite_url) as second:
            with second.reading() as connection:
                assert heads_of(EVERYTHING, connection) == []
            with pytest.raises(HeldByAnother, match="Another process writes"), second.writing():
                pass
    with Database(sqlite_url) as third, third.writing():
        pass


@pytest.mark.parametrize("url", ["sqlite://", "sqlite:///:memory:", "mysql://x/y"])
def test_what_is_no_file_and_no_postgresql_is_refused(url):
    with pytest.raises(ValueError, match=r"must be a file|not supported"):
        Database(url)


@pytest.mark.postgresql
@pytest.mark.parametrize("state", ["40001", "40P01"])
def test_a_job_is_run_anew_after_a_serialisation_failure(postgresql_writer, state):
    runs = []

    def job(session):
        runs.append(session.moment)
        step(session, "site")
        if len(runs) < 3:
            raise_in(session, state)
        return len(runs)

    assert postgresql_writer.run_now(job, AS_SERVICE) == 3
    runs.clear()
    with pytest.raises(sa.exc.DBAPIError):
        postgresql_writer.run_now(lambda s: raise_in(s, state, runs), AS_SERVICE)
    assert len(runs) == 3


@pytest.mark.postgresql
def test_a_job_is_run_anew_after_a_lost_connection(postgresql_writer):
    runs = []

    def job(session):
        runs.append(1)
        step(session, "site")
        if len(runs) == 1:
            session.connection.exec_driver_sql("SELECT pg_terminate_backend(pg_backend_pid())")
        return session.heads["site"].position

    assert postgresql_writer.run_now(job, AS_SERVICE) == 1
    assert len(runs) == 2


@pytest.mark.postgresql
def test_a_read_is_repeated_on_a_new_connection(postgresql_database):
    runs = []

    def query(connection):
        runs.append(1)
        if len(runs) == 1:
            connection.exec_driver_sql("SELECT pg_terminate_backend(pg_backend_pid())")
        return heads_of(EVERYTHING, connection)

    assert postgresql_database.read(query) == []
    assert len(runs) == 2


def raise_in(session, state, runs=None):
    if runs is not None:
        runs.append(1)
    session.connection.exec_driver_sql(
        f"DO $$ BEGIN RAISE EXCEPTION 'made' USING ERRCODE = '{state}'; END $$"
    )


@pytest.fixture
def postgresql_database(postgresql_cluster):
    with postgresql_cluster.migrated() as url, Database(url) as opened:
        yield opened


@pytest.fixture
def postgresql_writer(postgresql_database, clock, memory):
    with Writer(postgresql_database, clock, memory) as running:
        yield running
