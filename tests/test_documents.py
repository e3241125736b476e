"""What the documents claim is what the code has."""

import re
from pathlib import Path

import pytest

from service.audit.rules.registry import RULES
from service.cli.arguments import COMMANDS
from service.physics.sources import METHODS

ROOT = Path(__file__).resolve().parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")
GUIDE = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
CHANGELOG = (ROOT / "CHANGELOG.md").read_text(encoding="utf-8")
TOP_LEVEL = {
    "README.md", "DEVELOPERS.md", "CHANGELOG.md", "LICENSE", "pyproject.toml",
    "service", "migrations", "tests", "fixtures", "deploy",
}  # fmt: skip


@pytest.mark.parametrize("slug", METHODS)
def test_every_method_stands_in_the_guide(slug):
    assert f"| `{slug}` |" in GUIDE


# A slug may stand for several gases, and ids of tests may not stand twice.
@pytest.mark.parametrize("slug", sorted({rule.slug for rule in RULES}))
def test_every_rule_stands_in_the_changelog(slug):
    assert f"`{slug}`" in CHANGELOG


@pytest.mark.parametrize("command", COMMANDS, ids=lambda command: command.name)
def test_every_command_stands_in_the_readme(command):
    assert f"`rimeward {command.name}" in README


def test_the_readme_names_no_command_that_is_not_there():
    named = set(re.findall(r"`rimeward ([a-z]+)", README))
    assert named == {command.name for command in COMMANDS}


def test_the_readme_opens_with_the_job_in_one_paragraph():
    title, job, *_ = README.split("\n\n")
    assert title == "# Rimeward"
    assert job.startswith("Rimeward is a REST service for")


def test_the_top_level_holds_nothing_else():
    found = {path.name for path in ROOT.iterdir() if not path.name.startswith(".")}
    assert found <= TOP_LEVEL
