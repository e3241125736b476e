"""Databases for tests: SQLite files and a PostgreSQL cluster of our own, migrated once, copied."""

import os
import pwd
import shutil
import signal
import subprocess
import tempfile
import time
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path

import psycopg
import pytest

from service.store.migrate import upgrade

# A test loses nothing that matters when the machine goes down.
FAST = ("fsync=off", "synchronous_commit=off", "full_page_writes=off")
TEMPLATE = "migrated"


# What a database holds beyond rows: a test that leaves more, or less, has changed the tables.
SHAPE = """
    SELECT (SELECT count(*) FROM pg_class WHERE relnamespace = 'public'::regnamespace),
           (SELECT count(*) FROM pg_proc WHERE pronamespace = 'public'::regnamespace),
           (SELECT count(*) FROM pg_trigger),
           (SELECT max(version_num) FROM alembic_version)
"""
# Without triggers and foreign keys, so that what is append-only goes too.
EMPTY = """
    SET session_replication_role = replica;
    SET lock_timeout = '2s';
    DO $$ DECLARE name text; BEGIN
        FOR name IN SELECT tablename FROM pg_tables
            WHERE schemaname = 'public' AND tablename <> 'alembic_version'
        LOOP EXECUTE format('DELETE FROM %I', name); END LOOP;
    END $$
"""


class Cluster:
    """A running PostgreSQL server, reached by a socket in its own folder."""

    def __init__(self, folder):
        self.folder = folder
        self.made = 0
        self.clean = []
        self.shape = None

    def url(self, name):
        return f"postgresql://rimeward@/{name}?host={self.folder}"

    def run(self, statement):
        with psycopg.connect(self.url("postgres"), autocommit=True) as connection:
            connection.execute(statement)

    @contextmanager
    def migrated(self) -> Iterator[str]:
        """Give the address of a migrated database without rows, for a block.

        Copying one costs many times what emptying one does, so it is copied only where none is
        left that a test has given back in order.
        """
        url = self.clean.pop() if self.clean else self.url(self._copy(TEMPLATE))
        yield url
        if self._emptied(url):
            self.clean.append(url)

    def _emptied(self, url):
        with psycopg.connect(url, autocommit=True) as connection:
            try:
                connection.execute(EMPTY)
                shape = connection.execute(SHAPE).fetchone()
            except psycopg.Error:
                return False
        self.shape = self.shape or self._shape_of_template()
        return shape == self.shape

    def _shape_of_template(self):
        with psycopg.connect(self.url(TEMPLATE)) as connection:
            return connection.execute(SHAPE).fetchone()

    def _copy(self, template):
        self.made += 1
        name = f"copy_{self.made}"
        self.run(f"CREATE DATABASE {name} TEMPLATE {template} STRATEGY FILE_COPY")
        return name

    @contextmanager
    def copy_of(self, template) -> Iterator[str]:
        """Give the address of a database that is a copy of another, for a block."""
        name = self._copy(template)
        try:
            yield self.url(name)
        finally:
            self.run(f"DROP DATABASE {name} WITH (FORCE)")


@contextmanager
def cluster(flags: Sequence[str] = FAST) -> Iterator[Cluster]:
    """Start a PostgreSQL server for a block, with a migrated template in it."""
    programs = server_programs()
    if programs is None:
        message = "The server programs of PostgreSQL (initdb, postgres) are not on this machine."
        if os.environ.get("CI"):
            pytest.fail(message)
        pytest.skip(message)
    # A socket's path is bounded to 107 bytes, and a folder of pytest's can be longer.
    folder = Path(tempfile.mkdtemp(prefix="rimeward-pg-"))
    user = _own(folder)
    data = folder / "data"
    as_user = {"user": user, "cwd": folder, "stdin": subprocess.DEVNULL}
    try:
        subprocess.run(
            [programs / "initdb", "--no-sync", "-D", data, "-U", "rimeward", "-A", "trust",
             "--encoding=UTF8", "--locale=C"],
            check=True, stdout=subprocess.DEVNULL, timeout=60, **as_user,
        )  # fmt: skip
        settings = [f"-c{setting}" for setting in flags]
        with (folder / "log").open("w") as log:
            server = subprocess.Popen(
                [programs / "postgres", "-D", data, "-clisten_addresses=",
                 f"-cunix_socket_directories={folder}", "-cmax_connections=60", *settings],
                stdout=log, stderr=log, **as_user,
            )  # fmt: skip
        try:
            running = Cluster(folder)
            _wait_for(running, server)
            running.run(f"CREATE DATABASE {TEMPLATE}")
            upgrade(running.url(TEMPLATE))
            yield running
        finally:
            # Immediate shutdown: what it holds is thrown away.
            server.send_signal(signal.SIGQUIT)
            server.wait(30)
    finally:
        shutil.rmtree(folder, ignore_errors=True)


def server_programs() -> Path | None:
    """Return the folder with the server programs of PostgreSQL, if they are there."""
    candidates = sorted(Path("/usr/lib/postgresql").glob("*/bin"), reverse=True)
    config = shutil.which("pg_config")
    if config is not None:
        named = subprocess.run([config, "--bindir"], check=True, capture_output=True, text=True)
        candidates.insert(0, Path(named.stdout.strip()))
    for folder in candidates:
        if (folder / "initdb").exists() and (folder / "postgres").exists():
            return folder
    return None


def _own(folder) -> str | None:
    """Hand a folder to another user where we are root, as which the server refuses to run."""
    if os.geteuid() != 0:
        return None
    users = {entry.pw_name for entry in pwd.getpwall()}
    user = "postgres" if "postgres" in users else "nobody"
    shutil.chown(folder, user)
    return user


def _wait_for(running, server, seconds=30):
    end = time.monotonic() + seconds
    while True:
        try:
            running.run("SELECT 1")
        except psycopg.OperationalError:
            if server.poll() is not None or time.monotonic() > end:
                raise RuntimeError((running.folder / "log").read_text()) from None
            time.sleep(0.02)
        else:
            return
