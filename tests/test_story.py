"""The story that the README tells is run as it stands, request for request, on a new installation.

A shell would do with each command what is done here; only `curl`, `id_of`, `date` and `verify` are
known, so that a command of another kind fails instead of going untested.
"""

import re
import shlex
from datetime import timedelta
from pathlib import Path
from urllib.parse import urlsplit

import pytest

from service.changes.demo import load_demo
from service.changes.shipped import ship
from service.clock import text_of
from tests.whole.installations import installation

pytestmark = pytest.mark.slow  # A whole service, with the demo estate.

README = (Path(__file__).resolve().parents[1] / "README.md").read_text(encoding="utf-8")
SECTION = "## Five minutes with it"
BASE = "http://127.0.0.1:8420/v1"
VERIFY = ".venv/bin/python -m service verify"
FLAGS = {"-s"}
STANDINGS = "`(in-order|attention|action|stop)`"


def told():
    """The section that tells the story."""
    return README.split(SECTION)[1].split("\n## ")[0]


def blocks():
    return re.findall(r"```sh\n(.*?)```", told(), re.DOTALL)


def commands():
    """Each command, with the lines that it goes on over joined."""
    for block in blocks():
        text = ""
        for line in block.splitlines():
            text = f"{text}{line}\n"
            if not goes_on(text):
                yield text.strip()
                text = ""
        assert not text


def goes_on(text):
    try:
        words = shlex.split(text, comments=True)
    except ValueError:
        return True
    return text.endswith("\\\n") or words[-1] == "|"


class Shell:
    """What a shell would do with the commands, on a service in this process."""

    def __init__(self, installed):
        self.installed = installed
        self.values = {}
        self.answers = []
        self.verified = False

    def run(self, command):
        if command.startswith("curl "):
            self.curl(command)
        elif command == VERIFY:
            self.verified = self.installed.verified().sound
        elif found := re.fullmatch(r"(\w+)=\$\(id_of '([^']+)'\)", command):
            self.values[found[1]] = self.first_id(found[2])
        elif found := re.fullmatch(r"(\w+)=\$\(date -u \+%Y-%m-%dT%H:%M:%SZ\); sleep 1", command):
            self.values[found[1]] = text_of(self.installed.clock.now().replace(microsecond=0))
            self.installed.pass_time(timedelta(seconds=1))
        elif command.startswith("KEY='rw_…'"):
            self.values["KEY"] = self.installed.key
        elif not command.startswith("id_of() {"):
            self.assign(command)

    def assign(self, command):
        for part in command.split("; "):
            assert re.match(r"[A-Z]=", part), command
            name, value = shlex.split(part)[0].split("=", 1)
            self.values[name] = self.filled(value)

    def filled(self, word):
        return re.sub(r"\$(\w+)", lambda name: self.values[name[1]], word)

    def first_id(self, path):
        items = self.request("GET", f"{self.values['U']}/{path}").json()["items"]
        assert len(items) == 1, path
        return items[0]["id"]

    def curl(self, command):
        # What stands behind a bar or an arrow shows the answer; it asks for nothing.
        asked = re.split(r"\s+(?:\||>)\s+", command.replace("\\\n", " "))[0]
        words = iter([self.filled(word) for word in shlex.split(asked)[1:]])
        method, headers, body, url = None, {}, None, None
        for word in words:
            if word == "-X":
                method = next(words)
            elif word == "-H":
                name, value = next(words).split(": ", 1)
                headers[name] = value
            elif word == "-d":
                body = next(words)
            elif word not in FLAGS:
                assert url is None, command
                url = word
        method = method or ("GET" if body is None else "POST")
        self.answers.append((method, url, self.request(method, url, headers, body)))

    def request(self, method, url, headers=None, body=None):
        assert url.startswith(self.values["U"])
        target = urlsplit(url)
        answer = self.installed.client.request(
            method,
            f"{target.path}?{target.query}",
            headers=headers or {"Authorization": f"Bearer {self.values['KEY']}"},
            content=body,
        )
        assert answer.is_success, (method, url, body, answer.text)
        return answer

    def answered(self, part):
        """The answers to requests whose address holds a part, in order."""
        return [answer for _, url, answer in self.answers if part in url]

    def moved(self):
        """Standings that the writes moved, in order."""
        writes = [answer.json() for method, _, answer in self.answers if method != "GET"]
        return [
            (effect["tag"], effect["standing"]["before"], effect["standing"]["after"])
            for write in writes
            for effect in write["effects"]
            if effect["standing"]["before"] != effect["standing"]["after"]
        ]


@pytest.fixture(scope="module")
def story(tmp_path_factory, migrated_sqlite_file):
    """The whole story, run once."""
    file = tmp_path_factory.mktemp("story") / "story.sqlite"
    file.write_bytes(migrated_sqlite_file.read_bytes())
    with installation(f"sqlite:///{file}") as installed:
        installed.write(ship)
        installed.write(load_demo)
        installed.pass_time(timedelta(minutes=5))
        shell = Shell(installed)
        shell.before = installed.done("GET", "/rooms?limit=500&sort=tag")["items"]
        for command in commands():
            shell.run(command)
        yield shell


def test_every_block_of_the_story_is_run(story):
    assert len(blocks()) > 8
    assert story.values["U"] == BASE
    assert sum(command.startswith("curl ") for command in commands()) == len(story.answers) > 9


def test_the_summary_leads_to_the_worst_room(story):
    (summary,) = story.answered("/summary")
    assert "H-004" in summary.text
    first = story.answered("/status")[0].json()
    assert (first["tag"], first["standing"]) == ("H-004", "stop")


def test_each_finding_says_what_is_wrong_and_what_to_do(story):
    (found,) = story.answered("/findings")
    items = found.json()["items"]
    assert "critical" in {finding["severity"] for finding in items}
    assert all(finding["statement"] and finding["remedy"] for finding in items)


def test_the_course_is_a_picture(story):
    (curve,) = story.answered("format=svg")
    assert curve.headers["content-type"].startswith("image/svg+xml")
    assert curve.text.lstrip().startswith(("<svg", "<?xml"))


def test_the_standings_move_as_the_story_says(story):
    assert story.moved() == [
        ("H-004", "stop", "in-order"),
        ("H-004", "in-order", "stop"),
        ("H-005", "in-order", "stop"),
        ("H-005", "stop", "attention"),
        ("H-005", "attention", "in-order"),
    ]
    said = " ".join(told().split())
    assert re.findall(rf"{STANDINGS} (?:to|becomes) {STANDINGS}", said) == [
        ("stop", "in-order"), ("in-order", "stop"), ("stop", "attention"),
    ]  # fmt: skip


def test_what_was_put_back_has_the_findings_that_it_had(story):
    out, back = [answer.json() for answer in story.answered("/vessels/")]
    cleared, opened = (
        {
            finding["id"]
            for effect in written["effects"]
            if effect["tag"] == "H-004"
            for finding in effect["findings"][moved]
        }
        for written, moved in ((out, "cleared"), (back, "opened"))
    )
    assert cleared
    assert cleared == opened
    (before,) = [found.json()["items"] for found in story.answered("/findings?")]
    now = [story.installed.done("GET", f"/findings/{each['id']}") for each in before]
    assert [each["opened_at"] for each in now] == [each["opened_at"] for each in before]
    assert {each["state"] for each in now} == {"open"}


def test_the_moment_before_is_answered_as_it_was_then(story):
    first, asked_again = story.answered("/status")
    assert asked_again.content == first.content


def test_the_story_leaves_the_estate_as_it_was_and_proves_its_past(story):
    after = story.installed.done("GET", "/rooms?limit=500&sort=tag")["items"]
    moving = ("revision", "updated_at")
    assert [{**room, **dict.fromkeys(moving)} for room in after] == [
        {**room, **dict.fromkeys(moving)} for room in story.before
    ]
    assert story.verified
