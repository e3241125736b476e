"""The scripts that start and check a checkout, run on a stand-in for it with a tiny package."""

import base64
import hashlib
import os
import shutil
import subprocess
import sys
import tempfile
import zipfile
from pathlib import Path

import pytest

CHECKOUT = Path(__file__).parent.parent.parent
SCRIPTS = [*sorted(CHECKOUT.glob("deploy/*.sh")), CHECKOUT / ".ci" / "run"]
PROGRAMS = ("sh", "basename", "cat", "date", "dirname", "ls", "mkdir", "rm")
NOBODY = 65534  # Common practice of Linux distributions, no source.
TELLS_ITS_ARGUMENTS = "import sys, tiny\nprint('served', tiny.__name__, sys.argv[1:])\n"


def test_the_scripts_pass_shellcheck():
    assert {path.name for path in SCRIPTS} >= {"start.sh", "test.sh", "environment.sh", "run"}
    run = subprocess.run(
        ["shellcheck", *SCRIPTS],
        cwd=CHECKOUT,
        env={**os.environ, "PATH": f"{Path(sys.executable).parent}:{os.environ['PATH']}"},
        capture_output=True,
        text=True,
        timeout=60,
    )
    assert run.stdout == ""
    assert run.returncode == 0


@pytest.fixture
def place():
    """Make a folder that other users may enter, unlike the temporary folders of pytest."""
    folder = Path(tempfile.mkdtemp(prefix="with spaces ")).resolve()
    folder.chmod(0o755)
    yield folder
    shutil.rmtree(folder)


@pytest.fixture
def checkout(place):
    """Stand in for the checkout: the scripts, a package `service`, locks of one tiny wheel."""
    checkout = place / "a checkout"
    shutil.copytree(CHECKOUT / "deploy", checkout / "deploy")
    (checkout / "service").mkdir()
    (checkout / "service" / "__main__.py").write_text(TELLS_ITS_ARGUMENTS)
    digest = hashlib.sha256(tiny_wheel(place).read_bytes()).hexdigest()
    (checkout / "deploy" / "requirements.lock").write_text(f"tiny==1.0 --hash=sha256:{digest}\n")
    return checkout


def tiny_wheel(folder):
    """Write a wheel of one empty module by the binary distribution format of Python packages."""
    files = {
        "tiny.py": "",
        "tiny-1.0.dist-info/METADATA": "Metadata-Version: 2.1\nName: tiny\nVersion: 1.0\n",
        "tiny-1.0.dist-info/WHEEL": (
            "Wheel-Version: 1.0\nRoot-Is-Purelib: true\nTag: py3-none-any\n"
        ),
    }
    rows = [f"{name},{recorded(text)},{len(text)}" for name, text in files.items()]
    rows.append("tiny-1.0.dist-info/RECORD,,")
    wheel = folder / "tiny-1.0-py3-none-any.whl"
    with zipfile.ZipFile(wheel, "w") as archive:
        for name, text in files.items():
            archive.writestr(name, text)
        archive.writestr("tiny-1.0.dist-info/RECORD", "\n".join(rows) + "\n")
    return wheel


def recorded(text):
    digest = hashlib.sha256(text.encode()).digest()
    return "sha256=" + base64.urlsafe_b64encode(digest).decode().rstrip("=")


@pytest.fixture
def programs(place):
    """Put only the programs that the scripts may use on a path, and what a test adds."""
    folder = place / "bin"
    folder.mkdir()
    for name in PROGRAMS:
        (folder / name).symlink_to(shutil.which(name))

    def adding(**scripts):
        for name, text in scripts.items():
            script = folder / name.replace("_", ".")
            script.write_text(f"#!/bin/sh\n{text}\n")
            script.chmod(0o755)
        return folder

    return adding


def start(checkout, path, *arguments, user=None, **environ):
    place = checkout.parent
    elsewhere = place / "elsewhere"
    elsewhere.mkdir(exist_ok=True)
    return subprocess.run(
        ["/bin/sh", checkout / "deploy" / "start.sh", *arguments],
        cwd=elsewhere,
        env={
            "PATH": str(path),
            "HOME": str(place / "home"),
            "PIP_NO_INDEX": "1",
            "PIP_FIND_LINKS": place.as_uri(),
            "UV_OFFLINE": "1",
            "UV_FIND_LINKS": place.as_uri(),
            **environ,
        },
        user=user,
        capture_output=True,
        text=True,
        timeout=120,
    )


def sentence(run):
    """Return the last sentence of a start that had to fail, without the name of the script."""
    assert run.returncode == 1
    assert "Traceback" not in run.stderr
    last = run.stderr.splitlines()[-1]
    assert last.startswith("start.sh: ")
    return last.removeprefix("start.sh: ")


# Answers the three questions of the scripts as an interpreter of that kind would.
OLD_PYTHON = 'case "$2" in *python_version*) echo 3.9.2;; *) exit 1;; esac'
PYTHON_WITHOUT_VENV = 'case "$2" in *ensurepip*) exit 1;; *%d.%d*) echo 3.12;; esac'


def test_an_old_python_is_named_with_what_is_needed(checkout, programs):
    said = sentence(start(checkout, programs(python3=OLD_PYTHON)))
    assert said == (
        "Python 3.11 or newer is needed, and python3 is 3.9.2 here: install a newer one beside it."
    )


def test_no_python_at_all_is_said(checkout, programs):
    assert "there is no python3 here" in sentence(start(checkout, programs()))


def test_a_newer_python_is_found_beside_an_old_one(checkout, programs):
    path = programs(python3=OLD_PYTHON, python3_12=PYTHON_WITHOUT_VENV)
    assert sentence(start(checkout, path)).startswith("Python 3.12 lacks its venv module")


def test_a_python_without_venv_is_told_the_package_to_install(checkout, programs):
    said = sentence(start(checkout, programs(python3=PYTHON_WITHOUT_VENV)))
    assert "on Debian or Ubuntu install the package python3.12-venv" in said


def test_a_read_only_checkout_puts_the_environment_into_the_state_folder(checkout, programs):
    state = checkout.parent / "state"
    state.mkdir()
    state.chmod(0o777)
    checkout.chmod(0o555)
    user = NOBODY if os.geteuid() == 0 else None  # Root may write everywhere.
    path = programs(python3=PYTHON_WITHOUT_VENV)
    run = start(checkout, path, user=user, XDG_STATE_HOME=str(state))
    assert f"Making the environment in {state}/rimeward/venv;" in run.stderr
    assert (state / "rimeward" / "venv").is_dir()
    assert not (checkout / ".venv").exists()
    checkout.chmod(0o755)


def test_no_place_to_write_is_said_with_the_remedy(checkout, programs):
    (checkout / ".venv").write_text("A file in the way.")
    (checkout.parent / "home").write_text("Another.")
    said = sentence(start(checkout, programs(python3=PYTHON_WITHOUT_VENV)))
    assert said.startswith("Neither ")
    assert said.endswith("set XDG_STATE_HOME to a folder that can.")


def test_a_folder_that_is_no_environment_is_left_alone(checkout, programs):
    (checkout / ".venv").mkdir()
    (checkout / ".venv" / "diary.txt").write_text("Dear diary")
    said = sentence(start(checkout, programs(python3=PYTHON_WITHOUT_VENV)))
    assert "something else than an environment" in said
    assert (checkout / ".venv" / "diary.txt").read_text() == "Dear diary"


def test_a_given_environment_is_used_as_it_stands(checkout, programs):
    (checkout / "service" / "__main__.py").write_text(
        "import os, sys\nprint(sys.argv[1:], sys.prefix, 'RIMEWARD_VENV' in os.environ)\n"
    )
    stray = checkout.parent / "elsewhere" / "service.py"
    stray.parent.mkdir()
    stray.write_text("print('The wrong module ran.')\n")
    run = start(checkout, programs(), "--port", "a b", RIMEWARD_VENV=sys.prefix)
    assert run.stdout == f"['serve', '--port', 'a b'] {sys.prefix} False\n"
    assert run.returncode == 0


def test_a_given_environment_without_python_is_refused(checkout, programs):
    run = start(checkout, programs(), RIMEWARD_VENV=str(checkout))
    assert "holds no bin/python of 3.11 or newer" in sentence(run)


def path_with(programs, *installers):
    path = programs(python3=f'exec {str(Path(sys.executable).resolve())!r} "$@"')
    for name in installers:
        found = shutil.which(name, path=f"{Path(sys.executable).parent}:{os.environ['PATH']}")
        if found is None:
            pytest.skip(f"{name} is not installed")
        (path / name).symlink_to(found)
    return path


@pytest.mark.slow
@pytest.mark.parametrize("installers", [(), ("uv",)], ids=["pip", "uv"])
def test_the_first_start_makes_the_environment_and_the_second_needs_no_installer(
    checkout, programs, installers
):
    path = path_with(programs, *installers)
    first = start(checkout, path, "--port", "0")
    assert "Making the environment in" in first.stderr
    assert first.stdout == "served tiny ['serve', '--port', '0']\n"
    for name in ("python3", *installers):
        (path / name).unlink()
    second = start(checkout, path)
    assert (second.stdout, second.stderr) == ("served tiny ['serve']\n", "")


@pytest.mark.slow
def test_a_changed_lock_is_installed_and_a_wrong_hash_is_refused(checkout, programs):
    path = path_with(programs)
    assert start(checkout, path).returncode == 0
    lock = checkout / "deploy" / "requirements.lock"
    lock.write_text(f"{lock.read_text()}# Renewed.\n")
    again = start(checkout, path)
    assert "Making the environment in" in again.stderr
    assert again.returncode == 0
    (installed,) = (checkout / ".venv").glob("lib/python*/site-packages/tiny-1.0.dist-info")
    shutil.rmtree(installed)
    lock.write_text(f"tiny==1.0 --hash=sha256:{'0' * 64}\n")
    refused = start(checkout, path)
    assert sentence(refused).startswith("The locked packages could not be installed.")
    assert refused.stdout == ""
    assert sentence(start(checkout, path)).startswith("The locked packages")


@pytest.fixture
def checks(checkout, programs):
    """Run test.sh with stand-ins for the tools; those named in `broken` fail."""
    venv = checkout.parent / "venv"
    (venv / "bin").mkdir(parents=True)
    (checkout / ".ci").mkdir()
    (checkout / ".ci" / "run").touch()
    for tool in ("ruff", "mypy", "lint-imports", "codespell", "shellcheck", "python"):
        script = venv / "bin" / tool
        script.write_text(
            f'#!/bin/sh\n[ "$1" = -c ] && exec {sys.executable!r} "$@"\n'
            f'echo "ran {tool} $*"\ncase "$BROKEN" in *{tool}*) exit 1;; esac\n'
        )
        script.chmod(0o755)

    def running(*arguments, broken=""):
        return subprocess.run(
            ["/bin/sh", checkout / "deploy" / "test.sh", *arguments],
            env={"PATH": str(programs()), "RIMEWARD_VENV": str(venv), "BROKEN": broken},
            capture_output=True,
            text=True,
            timeout=60,
        )

    return running


def test_every_check_runs_and_its_success_is_summed_up(checks):
    run = checks("tests/api", "-k", "a poll")
    assert run.returncode == 0
    ran = [line for line in run.stdout.splitlines() if line.startswith("ran ")]
    assert ran[:6] == [
        "ran ruff check .",
        "ran ruff format --check .",
        "ran mypy ",
        "ran lint-imports ",
        "ran codespell ",
        "ran shellcheck deploy/environment.sh deploy/lock.sh deploy/start.sh deploy/test.sh"
        " .ci/run",
    ]
    assert ran[6].endswith("-m not long and not bench -r fEs tests/api -k a poll")
    assert run.stdout.splitlines()[-1].startswith("test.sh: every check passed in ")


def test_a_failed_check_stops_no_other_and_fails_the_whole(checks):
    run = checks(broken="mypy python")
    assert run.returncode == 1
    assert run.stdout.count("\nran ") == 7
    assert run.stdout.splitlines()[-1].endswith(" s: mypy, pytest")
