"""The commands, run as a person or a script runs them."""

import json
import os
import re
import signal
import socket
import stat
import subprocess
import sys
import time
from contextlib import contextmanager
from pathlib import Path

import httpx2
import pytest

from service.__main__ import main
from service.changes.keys import key_secret
from service.store.engine import Database
from service.store.migrate import schema_state

CHECKOUT = Path(__file__).parents[2]


@pytest.fixture
def environment(tmp_path, monkeypatch):
    """Settings for a database of its own, for this process and for children."""
    for name in [name for name in os.environ if name.startswith("RIMEWARD_")]:
        monkeypatch.delenv(name)
    monkeypatch.setenv("RIMEWARD_DATABASE_URL", f"sqlite:///{tmp_path / 'own.sqlite'}")
    return dict(os.environ)


@contextmanager
def serving(environment, *arguments):
    """Run the server until the block ends; give its address and what it has printed so far."""
    process = subprocess.Popen(
        [sys.executable, "-m", "service", "serve", "--port", "0", *arguments],
        cwd=CHECKOUT, env=environment | {"PYTHONUNBUFFERED": "1"}, text=True,
        stdout=subprocess.PIPE, stderr=subprocess.PIPE,
    )  # fmt: skip
    try:
        printed = ""
        while "is it ready" not in printed:
            line = process.stdout.readline()
            if not line:
                raise AssertionError(printed + process.stderr.read())
            printed += line
        yield re.search(r"serves on (\S+)", printed)[1], printed, process
    finally:
        if process.poll() is None:
            process.send_signal(signal.SIGTERM)
        process.communicate(timeout=30)


def refused(environment, *arguments):
    run = subprocess.run(
        [sys.executable, "-m", "service", *arguments],
        cwd=CHECKOUT, env=environment, capture_output=True, text=True, timeout=60, check=False,
    )  # fmt: skip
    assert run.returncode == 1, run.stdout + run.stderr
    assert "Traceback" not in run.stderr
    return run.stderr


def test_migrate_makes_the_tables_and_says_so(environment, capsys):
    assert main(["migrate"]) == 0
    assert "of this release" in capsys.readouterr().out
    assert schema_state(os.environ["RIMEWARD_DATABASE_URL"]) == "current"
    assert main(["migrate"]) == 0


def test_a_key_is_made_listed_and_revoked(environment, capsys):
    main(["migrate"])
    capsys.readouterr()
    assert main(["key", "create", "--holder", "a board", "--role", "reader"]) == 0
    text = capsys.readouterr().out.splitlines()[-1]
    assert re.fullmatch(r"rw_[\w-]{8}_[\w-]{43}", text)
    main(["key", "list"])
    listed = capsys.readouterr().out
    assert "a board" in listed
    assert text not in listed
    assert main(["key", "revoke", text[3:11]]) == 0
    main(["key", "list"])
    assert "revoked" in capsys.readouterr().out


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["key", "create", "--holder", "x", "--role", "reader", "--site", "NOWHERE"], "no site"),
        (["key", "revoke", "nothing"], "no such key"),
    ],
)
def test_a_key_command_that_cannot_be_done_says_why(environment, capsys, arguments, said):
    main(["migrate"])
    assert main(arguments) == 1
    assert said in capsys.readouterr().err


def test_commands_on_a_database_without_tables_name_the_command_that_makes_them(
    environment, capsys
):
    assert main(["key", "list"]) == 1
    assert "rimeward migrate" in capsys.readouterr().err


@pytest.mark.slow
def test_the_description_is_printed_and_compared(environment, capsys, tmp_path):
    assert main(["openapi"]) == 0
    printed = capsys.readouterr().out
    assert json.loads(printed)["info"]["title"] == "Rimeward"
    same, other = tmp_path / "same.json", tmp_path / "other.json"
    same.write_text(printed)
    other.write_text(printed.replace("Rimeward", "Other"))
    assert main(["openapi", "--check", str(same)]) == 0
    assert main(["openapi", "--check", str(other)]) == 1
    assert main(["openapi", "--check", str(tmp_path / "none.json")]) == 1
    assert main(["openapi", "--check"]) == 0


@pytest.mark.slow
def test_a_first_start_makes_everything_and_a_second_one_nothing(environment, tmp_path):
    file = tmp_path / "own.sqlite.first-keys"
    with serving(environment) as (address, printed, process):
        assert str(file) in printed
        assert "demo estate" in printed
        assert stat.S_IMODE(file.stat().st_mode) == 0o600
        keys = dict(line.split(": ") for line in file.read_text().splitlines())
        assert keys.keys() == {"reader", "administrator"}
        assert all(key not in printed for key in keys.values())
        assert httpx2.get(f"{address}/readyz").status_code == 200
        headers = {"X-API-Key": keys["reader"]}
        rooms = httpx2.get(f"{address}/v1/rooms?total=true", headers=headers).json()
        assert rooms["total"] > 3
        for room in rooms["items"][:3]:
            path = f"{address}/v1/rooms/{room['id']}/status"
            assert httpx2.get(path, headers=headers).json()["room_id"] == room["id"]
        # The file is held: a second server, and a command that writes, say so.
        for command in (
            ["serve", "--port", "0"],
            ["key", "create", "--holder", "x", "--role", "reader"],
        ):
            assert "process" in refused(environment, *command)
        process.send_signal(signal.SIGTERM)
        assert process.wait(20) == 0
    file.unlink()
    with serving(environment) as (address, printed, _):
        assert "demo estate" not in printed
        assert not file.exists()
        total = httpx2.get(f"{address}/v1/rooms?total=true", headers=headers).json()["total"]
        assert total == rooms["total"]


@pytest.mark.slow
def test_the_administrators_key_can_come_from_the_environment(environment, tmp_path):
    secret = key_secret()
    given = environment | {"RIMEWARD_ADMIN_KEY": secret}
    with serving(given, "--no-demo") as (address, printed, _):
        assert secret not in printed
        assert not (tmp_path / "own.sqlite.first-keys").exists()
        headers = {"Authorization": f"Bearer {secret}"}
        assert httpx2.get(f"{address}/v1/sites", headers=headers).json()["items"] == []
        keys = httpx2.get(f"{address}/v1/keys", headers=headers).json()["items"]
        assert [key["role"] for key in keys] == ["administrator"]
    other = environment | {"RIMEWARD_ADMIN_KEY": key_secret()}
    with serving(other, "--no-demo") as (address, _, _):
        assert httpx2.get(f"{address}/v1/keys", headers=headers).status_code == 200
        wrong = {"Authorization": f"Bearer {other['RIMEWARD_ADMIN_KEY']}"}
        assert httpx2.get(f"{address}/v1/keys", headers=wrong).status_code == 401


@pytest.mark.slow
def test_a_start_that_cannot_be_is_refused_with_one_sentence(environment):
    with socket.create_server(("127.0.0.1", 0)) as taken:
        port = str(taken.getsockname()[1])
        assert f"Port {port}" in refused(environment, "serve", "--port", port)
    assert not Path(environment["RIMEWARD_DATABASE_URL"].removeprefix("sqlite:///")).exists()
    assert "in the clear" in refused(environment, "serve", "--host", "192.0.2.1", "--port", "0")
    main(["migrate"])
    with Database(environment["RIMEWARD_DATABASE_URL"]) as held:
        held.write_engine()
        began = time.monotonic()
        said = refused(environment, "serve", "--port", "0")
        assert said.splitlines()[-1].startswith("rimeward: Another process")
        assert time.monotonic() - began < 30
