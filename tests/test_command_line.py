"""The entry of the command line."""

import subprocess
import sys
from argparse import ArgumentParser, Namespace
from pathlib import Path
from types import SimpleNamespace

import pytest

from service.__main__ import main
from service.cli import arguments as command_line
from service.cli.arguments import COMMANDS, Command
from service.errors import RimewardError
from service.settings import Settings, SettingsError

CHECKOUT = Path(__file__).parent.parent
HEAVY = {"alembic", "fastapi", "numpy", "pydantic", "sqlalchemy", "starlette", "uvicorn"}


@pytest.fixture
def give(monkeypatch):
    """Put a command `probe` in place of the real ones; it runs the given function."""
    monkeypatch.setattr(
        command_line, "COMMANDS", (Command("probe", "service.cli.probe", "try it"),)
    )

    def giving(run):
        def add_arguments(parser: ArgumentParser):
            parser.add_argument("--times", type=int, default=1)

        module = SimpleNamespace(add_arguments=add_arguments, run=run)
        monkeypatch.setitem(sys.modules, "service.cli.probe", module)

    return giving


def raising(error):
    def run(arguments: Namespace, settings: Settings) -> int:
        raise error

    return run


def test_a_command_gets_its_arguments_and_the_settings(give, monkeypatch):
    monkeypatch.setenv("RIMEWARD_PORT", "9000")
    seen = []
    give(lambda arguments, settings: seen.append((arguments.times, settings.port)) or 7)
    assert main(["probe", "--times", "3"]) == 7
    assert seen == [(3, 9000)]


@pytest.mark.parametrize("kind", [RimewardError, SettingsError])
def test_an_error_that_the_caller_can_mend_is_one_sentence(give, capsys, kind):
    give(raising(kind("The port is taken.")))
    assert main(["probe"]) == 1
    said = capsys.readouterr()
    assert said.err == "rimeward: The port is taken.\n"
    assert said.out == ""


def test_a_bad_setting_stops_a_command_before_it_runs(give, capsys, monkeypatch):
    monkeypatch.setenv("RIMEWARD_PORT", "many")
    give(raising(AssertionError("The command ran.")))
    assert main(["probe"]) == 1
    assert "RIMEWARD_PORT must be a whole number" in capsys.readouterr().err


def test_a_fault_of_our_own_is_not_dressed_up_as_a_sentence(give):
    give(raising(ZeroDivisionError("ours")))
    with pytest.raises(ZeroDivisionError, match="ours"):
        main(["probe"])


def test_an_interrupt_ends_quietly(give, capsys):
    give(raising(KeyboardInterrupt()))
    assert main(["probe"]) == 130
    assert capsys.readouterr().err == ""


@pytest.mark.parametrize("argv", [[], ["prob"], ["probe", "--time", "3"], ["probe", "extra"]])
def test_a_command_line_that_means_nothing_leaves_with_two(give, capsys, argv):
    give(raising(AssertionError("The command ran.")))
    with pytest.raises(SystemExit) as left:
        main(argv)
    assert left.value.code == 2
    assert "usage: rimeward" in capsys.readouterr().err


def loaded_by(code):
    """Run a piece of Python afresh and return the top names of what it imported."""
    ending = "import sys; print(*{name.partition('.')[0] for name in sys.modules})"
    run = subprocess.run(
        [sys.executable, "-c", f"{code}\n{ending}"],
        cwd=CHECKOUT,
        capture_output=True,
        text=True,
        check=True,
        timeout=30,
    )
    return run.stdout, set(run.stdout.splitlines()[-1].split())


def test_help_lists_every_command_and_imports_nothing_heavy():
    said, loaded = loaded_by(
        "from service.__main__ import main\n"
        "try:\n    main(['--help'])\nexcept SystemExit as left:\n    assert left.code == 0"
    )
    assert [c.name for c in COMMANDS if f"    {c.name} " not in said] == []
    assert "argparse" in loaded
    assert loaded & HEAVY == set()


@pytest.mark.parametrize("command", COMMANDS, ids=lambda command: command.name)
def test_help_of_a_command_imports_nothing_heavy(command):
    said, loaded = loaded_by(
        "from service.__main__ import main\n"
        f"try:\n    main([{command.name!r}, '--help'])\n"
        "except SystemExit as left:\n    assert left.code == 0"
    )
    assert f"usage: rimeward {command.name}" in said
    assert loaded & HEAVY == set()


@pytest.mark.parametrize("command", COMMANDS, ids=lambda command: command.name)
def test_every_command_has_a_module_that_runs_it(command):
    module = command.load()
    parser = ArgumentParser()
    module.add_arguments(parser)
    assert callable(module.run)
