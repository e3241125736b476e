"""The locks pin what pyproject.toml asks for, and betray nothing of where they were made."""

import re
import tomllib
from pathlib import Path

import pytest
from packaging.requirements import Requirement
from packaging.utils import canonicalize_name

CHECKOUT = Path(__file__).parent.parent.parent
PROJECT = tomllib.loads((CHECKOUT / "pyproject.toml").read_text("utf-8"))["project"]
EXTRAS = PROJECT["optional-dependencies"]
RUNTIME = [*PROJECT["dependencies"], *EXTRAS["pg"]]
LOCKS = {"requirements.lock": RUNTIME, "requirements-test.lock": [*RUNTIME, *EXTRAS["test"]]}


def pins(lock):
    """Read a lock into its requirements, by name, and the number of hashes of each."""
    text = (CHECKOUT / "deploy" / lock).read_text("utf-8").replace("\\\n", " ")
    rows = [line.split("--hash=") for line in text.splitlines() if line]
    found: dict[str, list[Requirement]] = {}
    for requirement, *hashes in rows:
        assert hashes, f"{requirement} has no hash"
        assert all(re.fullmatch(r"sha256:[0-9a-f]{64}", each.strip()) for each in hashes)
        pin = Requirement(requirement)
        found.setdefault(canonicalize_name(pin.name), []).append(pin)
    return found


def release(pin):
    (specifier,) = pin.specifier
    assert specifier.operator == "=="
    return specifier.version


@pytest.mark.parametrize("lock", LOCKS)
def test_every_dependency_is_pinned_to_a_release_that_it_allows(lock):
    found = pins(lock)
    for text in LOCKS[lock]:
        wanted = Requirement(text)
        chosen = found[canonicalize_name(wanted.name)]
        assert [p for p in chosen if not wanted.specifier.contains(release(p))] == []


@pytest.mark.parametrize("lock", LOCKS)
def test_a_lock_names_no_host_and_no_path(lock):
    text = (CHECKOUT / "deploy" / lock).read_text("utf-8")
    line = re.compile(
        r"[a-z0-9.-]+==[0-9a-z.]+( ; [a-z_<>=!' .0-9()]+)? \\|    --hash=\S+( \\)?", re.I
    )
    assert [each for each in text.splitlines() if line.fullmatch(each) is None] == []


def test_the_tests_run_on_the_releases_that_are_served():
    served, tested = pins("requirements.lock"), pins("requirements-test.lock")
    assert served
    assert {name: tested.get(name) for name in served} == served
