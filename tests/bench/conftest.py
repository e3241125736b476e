"""What the measurements share: real servers as processes of their own, on loopback."""

import os
import shutil
import socket
import subprocess
import sys
import time
from contextlib import contextmanager

import pytest

from tests.databases import TEMPLATE, cluster

KEY = "rw_benchkey_" + "k" * 43
ROOT = __file__.rsplit("/tests/", 1)[0]


@contextmanager
def process(arguments, port, environment=None):
    """Run a server until the block ends, from when it takes connections."""
    running = subprocess.Popen(
        [sys.executable, *arguments],
        cwd=ROOT,
        env={**os.environ, **(environment or {})},
        stdout=subprocess.DEVNULL,
    )
    try:
        _wait_for(port, running)
        yield running
    finally:
        running.terminate()
        running.wait(20)


def free_port():
    with socket.socket() as sought:
        sought.bind(("127.0.0.1", 0))
        return sought.getsockname()[1]


def _wait_for(port, running, seconds=30):
    ends = time.monotonic() + seconds
    while time.monotonic() < ends:
        if running.poll() is not None:
            raise RuntimeError("The server ended before it served.")
        try:
            socket.create_connection(("127.0.0.1", port), timeout=1).close()
        except OSError:
            time.sleep(0.05)
        else:
            return
    raise RuntimeError("The server takes no connections.")


@contextmanager
def served(database_url):
    """Run the service on a database; give its port."""
    port = free_port()
    environment = {
        "RIMEWARD_DATABASE_URL": database_url,
        "RIMEWARD_ADMIN_KEY": KEY,
        "RIMEWARD_DEMO": "0",
        "RIMEWARD_LOG_LEVEL": "warning",
    }
    with process(["-m", "service", "serve", "--port", str(port)], port, environment):
        yield port


@pytest.fixture(params=["sqlite", pytest.param("postgresql", marks=pytest.mark.postgresql)])
def durable_url(request, tmp_path, migrated_sqlite_file):
    """The address of a database that loses nothing in a power cut, and its kind."""
    if request.param == "sqlite":
        file = tmp_path / "rimeward.sqlite"
        shutil.copy(migrated_sqlite_file, file)
        yield request.param, f"sqlite:///{file}"
        return
    with cluster(flags=()) as running, running.copy_of(TEMPLATE) as url:
        yield request.param, url


@pytest.fixture
def report(capsys):
    """Print a line past the capture of the runner."""

    def say(line):
        with capsys.disabled():
            sys.stdout.write(f"\n{line}")
            sys.stdout.flush()

    return say
