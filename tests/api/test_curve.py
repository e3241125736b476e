"""The course of a case over HTTP: as values, as a table, as a picture."""

import csv
import io
import shutil
import sqlite3
from datetime import timedelta
from xml.etree import ElementTree as Xml

import pytest
from starlette.testclient import TestClient

import service.changes.curve as asked
from service.api.schemas.curve import CurveRead
from service.app import create_app
from service.audit.assessment import METHOD_VERSION
from service.changes.cautions import CAUTIONS
from service.clock import FixedClock
from tests.api.conftest import settings_for
from tests.api.estate import Asker, a_detector, a_room, a_unit, a_vessel
from tests.conftest import MOMENT

SVG = "{http://www.w3.org/2000/svg}"
WAYS = {"release", "airflow", "hazard", "gas"}


@pytest.fixture(scope="module")
def file_with_mixed(estate_on_sqlite, tmp_path_factory):
    """A file with the estate and a room of two fluids more, guarded; what is in it.

    The tag of that room would be markup and a formula.
    """
    file, made = estate_on_sqlite
    copy = tmp_path_factory.mktemp("mixed") / "mixed.sqlite"
    shutil.copy(file, copy)
    app = create_app(settings_for(f"sqlite:///{copy}"), clock=FixedClock(MOMENT))
    with TestClient(app) as client:
        ask = Asker(client, app, made.ask.keys)
        room = ask.made("rooms", a_room(made.north.site, '=<b>"A&B"</b>'))
        ask.made("vessels", a_vessel(room, "N", capacity_l=80.0))
        ask.made("vessels", a_vessel(room, "AR", fluid="argon", capacity_l=30.0))
        box = {"fluid": "carbon-dioxide", "kind": "dry-ice-box", "capacity_kg": 60.0}
        ask.made("vessels", {"tag": "ICE", "room_id": room["id"], **box})
        ask.made("ventilation-units", a_unit(room, "MIXED-AHU"))
        ask.made("detectors", a_detector(room, "MIXED-OX"))
    return copy, made, room


@pytest.fixture
def estate_in_a_file(file_with_mixed, tmp_path):
    """The estate with the room of two fluids in it; ``ask_one`` is started on it."""
    file, made, _ = file_with_mixed
    shutil.copy(file, tmp_path / "copy.sqlite")
    return f"sqlite:///{tmp_path / 'copy.sqlite'}", made


@pytest.fixture
def mixed(file_with_mixed):
    return file_with_mixed[2]


def curve_path(room, query=""):
    return f"/v1/rooms/{room['id']}/curve{query}"


def moment_of(ask):
    ask.clock.advance(timedelta(hours=1))
    moment = ask.clock.now().isoformat().replace("+00:00", "Z")
    ask.clock.advance(timedelta(hours=1))
    return moment


def at_event(curve, what):
    return next((point for point in curve["points"] if what in point["events"]), None)


def content_of(ask):
    """Everything that the database holds, but for when keys were used."""
    file = ask.service.database.url.removeprefix("sqlite:///")
    with sqlite3.connect(f"file:{file}?mode=ro", uri=True) as connection:
        return list(connection.iterdump())


def test_without_a_choice_it_is_the_case_of_the_status(ask, estate):
    room = estate.north.room
    status = ask.body(f"/v1/rooms/{room['id']}/status")
    curve = ask.body(curve_path(room), key="reader")
    CurveRead.model_validate(curve)
    assert {name: curve["case"][name] for name in status["worst"]} == status["worst"]
    same = ("position", "assessed_at", "currency", "basis", "method_version", "tag", "judges")
    assert {name: curve[name] for name in same} == {name: status[name] for name in same}
    assert len(curve["points"]) == 200
    assert "screening calculations" in curve["cautions"]


@pytest.mark.slow
def test_each_case_of_the_assessment_has_its_course_with_the_same_numbers(ask_one, mixed):
    cases = ask_one.body(f"/v1/rooms/{mixed['id']}/assessment")["cases"]
    assert {case["hazard"] for case in cases} == {"oxygen-low", "toxic"}
    for case in cases[:: max(1, len(cases) // 12)]:
        query = "&".join(
            f"{name}={case[name]}" for name in (*WAYS, "variant") if case[name] is not None
        )
        vessel = [*case["vessel_ids"], *case["line_ids"]][0]
        curve = ask_one.body(curve_path(mixed, f"?points=40&{query}&vessel_id={vessel}"))
        assert curve["case"] == case
        extreme = curve["extreme"]
        assert (extreme["at_s"], extreme["oxygen_pct"]) == (case["at_s"], case["oxygen_pct"])
        worst = at_event(curve, extreme["what"])
        assert {name: worst[name] for name in extreme if name != "what"} == {
            name: extreme[name] for name in extreme if name != "what"
        }
        assert (curve["back_s"], curve["margin_s"]) == (case["recovered_s"], case["margin_s"])
        assert (curve["alarm"] or {"at_s": None})["at_s"] == case["alarm_s"]
        for mark in case["marks"]:
            there = at_event(curve, ("first-mark", "second-mark", "third-mark")[mark["place"] - 1])
            assert (there or {"at_s": None})["at_s"] == mark["at_s"]


def test_of_two_fluids_the_nearest_to_a_mark_is_taken_and_a_vessel_can_be_named(ask_one, mixed):
    query = "?release=largest-vessel&airflow=as-measured&hazard=oxygen-low"
    first = ask_one.body(curve_path(mixed, query))
    assert (first["cases_matching"], first["case"]["fluids"]) == (2, ["nitrogen"])
    vessels = ask_one.body(f"/v1/vessels?room_id={mixed['id']}")["items"]
    argon = next(vessel["id"] for vessel in vessels if vessel["fluid"] == "argon")
    second = ask_one.body(curve_path(mixed, f"{query}&vessel_id={argon}"))
    assert (second["cases_matching"], second["case"]["fluids"]) == (1, ["argon"])


def test_the_table_has_the_points_of_the_answer_and_no_formula(ask_one, mixed):
    curve = ask_one.body(curve_path(mixed, "?points=30"))
    answer = ask_one("GET", curve_path(mixed, "?points=30&format=csv"))
    assert answer.headers["Content-Type"].startswith("text/csv")
    rows = list(csv.DictReader(io.StringIO(answer.text, newline="")))
    assert {row["room"] for row in rows} == {f"'{mixed['tag']}"}
    assert {tuple(row[name] for name in sorted(WAYS)) for row in rows} == {
        tuple(curve["case"][name] for name in sorted(WAYS))
    }
    assert len(rows) == len(curve["points"])
    for row, point in zip(rows, curve["points"], strict=True):
        assert float(row["at_s"]) == point["at_s"]
        assert float(row["oxygen_pct"]) == point["oxygen_pct"]
        assert row["events"].split() == point["events"]


@pytest.mark.parametrize(
    ("accept", "form"),
    [
        ("text/csv", "text/csv"),
        ("image/svg+xml", "image/svg+xml"),
        ("image/*;q=0.8, text/*;q=0.3", "image/svg+xml"),
        ("application/json;q=0.1, text/csv;q=0.2", "text/csv"),
        ("*/*", "application/json"),
        ("text/html, */*;q=0.1", "application/json"),
        ("application/json;q=0, */*", "text/csv"),
    ],
)
def test_the_form_is_what_accept_asks_for(ask_one, estate_of_one, accept, form):
    answer = ask_one("GET", curve_path(estate_of_one.north.room), headers={"Accept": accept})
    assert answer.status_code == 200
    assert answer.headers["Content-Type"].startswith(form)
    assert answer.headers["Vary"] == "Accept"


def test_a_named_format_comes_before_accept(ask_one, estate_of_one):
    path = curve_path(estate_of_one.north.room, "?format=json")
    assert ask_one("GET", path, headers={"Accept": "text/csv"}).json()["points"]


@pytest.mark.parametrize("accept", ["text/html", "application/json;q=0", "text/csv;q=nan"])
def test_a_form_that_there_is_not_is_refused_with_those_there_are(ask_one, estate_of_one, accept):
    answer = ask_one("GET", curve_path(estate_of_one.north.room), headers={"Accept": accept})
    assert answer.status_code == 406
    assert "text/csv" in answer.json()["detail"]


@pytest.mark.parametrize(
    ("query", "parameter", "allowed"),
    [
        ("release=flood", "release", "largest-vessel"),
        ("airflow=proven", "airflow", "as-measured"),
        ("hazard=fire", "hazard", "oxygen-low"),
        ("gas=nitrogen", "gas", "carbon-dioxide"),
        ("points=1", "points", "2"),
        ("points=2001", "points", "2000"),
        ("points=many", "points", "integer"),
        ("format=pdf", "format", "csv"),
        ("colour=red", "colour", "no such parameter"),
    ],
)
def test_what_is_not_known_is_named_with_what_is_allowed(
    ask_one, estate_of_one, query, parameter, allowed
):
    answer = ask_one("GET", curve_path(estate_of_one.north.room, f"?{query}"))
    assert answer.status_code == 422
    (error,) = answer.json()["errors"]
    assert error["parameter"] == parameter
    assert allowed in error["detail"]


def test_a_case_that_the_room_has_not_is_told_with_those_it_has(ask_one, estate_of_one):
    answer = ask_one("GET", curve_path(estate_of_one.north.room, "?release=quench"))
    assert answer.status_code == 404
    assert answer.json()["type"].endswith("#no-such-case")
    (error,) = answer.json()["errors"]
    assert error["parameter"] == "release"
    assert "boil-off" in error["detail"]
    assert "largest-vessel" in error["detail"]


def test_an_empty_room_and_one_that_is_not_there_are_told_apart(ask_one, estate_of_one):
    empty = ask_one.made("rooms", a_room(estate_of_one.north.site, "EMPTY"))
    answer = ask_one("GET", curve_path(empty))
    assert (answer.status_code, answer.json()["type"]) == (404, "/docs/problems#no-such-case")
    assert "Nothing in this room" in answer.json()["detail"]
    ask_one("DELETE", f"/v1/rooms/{empty['id']}")
    for room_id in (empty["id"], "nonsense"):
        answer = ask_one("GET", f"/v1/rooms/{room_id}/curve")
        assert answer.json()["type"].endswith("#record-not-found")


def test_a_room_that_cannot_be_computed_says_why(ask_one, estate_of_one, monkeypatch):
    """No record that is let in makes such a room today; an older one may have."""

    def refusing(_room, **_options):
        raise asked.NotComputed("The closing time of a vessel is below 0 or not a number.")

    monkeypatch.setattr(asked, "curve_of", refusing)
    answer = ask_one("GET", curve_path(estate_of_one.north.room))
    assert (answer.status_code, answer.json()["type"]) == (409, "/docs/problems#cannot-compute")
    assert "closing time" in answer.json()["detail"]


def test_the_past_is_answered_from_its_own_records(ask, estate):
    room, vessel = estate.north.room, estate.north.vessel
    before = ask.body(curve_path(room))
    moment = moment_of(ask)
    changed = ask("PATCH", f"/v1/vessels/{vessel['id']}", {"capacity_l": 25.0})
    assert changed.status_code == 200
    after = ask.body(curve_path(room))
    assert after["extreme"]["oxygen_pct"] > before["extreme"]["oxygen_pct"]
    assert after["position"] > before["position"]
    path = curve_path(room, f"?as_of={moment}")
    assert ask.body(path, key="auditor") == before
    picture = ask("GET", f"{path}&format=svg", key="auditor")
    assert f"position {before['position']}," in picture.text


def test_a_removed_record_is_still_there_in_the_past(ask_one, estate_of_one):
    room, vessel = estate_of_one.north.room, estate_of_one.north.vessel
    before = ask_one.body(curve_path(room))
    moment = moment_of(ask_one)
    ask_one("DELETE", f"/v1/controls/{estate_of_one.north.control['id']}")
    ask_one("DELETE", f"/v1/supply-lines/{estate_of_one.north.line['id']}")
    assert ask_one("DELETE", f"/v1/vessels/{vessel['id']}").status_code == 200
    assert ask_one("GET", curve_path(room)).status_code == 404
    assert ask_one.body(curve_path(room, f"?as_of={moment}")) == before
    early = ask_one("GET", curve_path(room, "?as_of=2020-01-01T00:00:00Z"))
    assert early.json()["type"].endswith("#as-of-too-early")


def test_a_course_of_another_method_says_so(ask_one, estate_of_one, monkeypatch):
    room = estate_of_one.north.room
    assert ask_one.body(curve_path(room))["note"] is None
    monkeypatch.setattr(asked, "METHOD_VERSION", "999")
    curve = ask_one.body(curve_path(room))
    assert (curve["method_version"], curve["computed_by"]) == (METHOD_VERSION, "999")
    assert f"method {METHOD_VERSION}" in curve["note"]
    assert "method 999" in curve["note"]


def test_a_case_that_a_status_names_and_this_method_does_not_know_is_passed_over(
    ask_one, estate_of_one, monkeypatch
):
    room = estate_of_one.north.room
    known = ask_one.body(curve_path(room))
    true_curve = asked.curve_of

    def without_what_is_named(room, *, choice, **options):
        if choice != asked.Choice():
            raise asked.NoCase("release", ())
        return true_curve(room, choice=choice, **options)

    monkeypatch.setattr(asked, "curve_of", without_what_is_named)
    assert ask_one.body(curve_path(room))["points"] == known["points"]


def test_a_course_past_its_turn_says_that_it_is_behind(ask_one, estate_of_one):
    room = estate_of_one.north.room
    ask_one.clock.advance(timedelta(days=400))
    assert ask_one.body(curve_path(room))["currency"] == "behind"
    assert "fallen due" in ask_one("GET", curve_path(room, "?format=svg")).text


@pytest.mark.slow
def test_nothing_is_stored_by_asking(ask_one, mixed):
    moment = moment_of(ask_one)
    before = content_of(ask_one)
    for form in ("json", "csv", "svg"):
        for query in ("", "&release=spill", "&release=overfill", f"&as_of={moment}"):
            answer = ask_one("GET", curve_path(mixed, f"?format={form}{query}"))
            assert answer.status_code in (200, 404)
    assert content_of(ask_one) == before


# The picture.


def drawn(ask, room, query=""):
    answer = ask("GET", curve_path(room, f"?format=svg{query}"))
    assert answer.status_code == 200, answer.text
    assert answer.headers["Content-Type"].startswith("image/svg+xml")
    assert answer.headers["Content-Security-Policy"].startswith("default-src 'none'")
    # Made here, by a service that escapes what others wrote: that is what is tested.
    return Xml.fromstring(answer.content)  # noqa: S314


def texts(picture):
    return ["".join(text.itertext()) for text in picture.iter(f"{SVG}text")]


def test_a_picture_says_in_words_what_it_shows(ask_one, mixed):
    query = "release=largest-vessel&hazard=oxygen-low&airflow=as-measured"
    curve = ask_one.body(curve_path(mixed, f"?{query}"))
    picture = drawn(ask_one, mixed, f"&{query}")
    assert picture.get("role") == "img"
    names = {each.get("id"): each.text for each in picture if each.get("id")}
    assert picture.get("aria-labelledby").split() == list(names)
    assert names["title"].startswith(mixed["tag"])
    for word in (curve["case"]["release"], curve["case"]["airflow"]):
        assert word in names["title"]
    said = " ".join(texts(picture))
    assert "Basis baseline" in said
    assert CAUTIONS in said
    assert f"position {curve['position']}," in said
    for mark in curve["case"]["marks"]:
        if mark["crossed"]:
            assert f"{mark['limit_pct']:.3g} %, crossed" in said
    assert "alarm of MIXED-OX" in said
    assert "people out" in said
    assert "back inside the first mark" in said
    assert "[% by volume]" in said


def test_what_others_wrote_is_text_in_a_picture_and_nothing_else(ask_one, mixed):
    picture = drawn(ask_one, mixed)
    known = {"svg", "title", "desc", "style", "rect", "text", "line", "polyline", "circle", "g"}
    assert {each.tag.removeprefix(SVG) for each in picture.iter()} <= known
    for each in picture.iter():
        assert not [name for name in each.attrib if name.startswith("on") or "href" in name]
    style = picture.find(f"{SVG}style").text
    assert "prefers-color-scheme" in style
    assert "url(" not in style
    assert "@import" not in style


@pytest.mark.parametrize(
    "query",
    [
        "&hazard=toxic&release=spill",
        "&hazard=toxic&release=boil-off&airflow=lost",
        "&release=all-vessels&points=2",
        "&release=filling&points=2000",
        "&release=largest-vessel&airflow=design",
    ],
)
def test_every_picture_keeps_inside_its_frame_and_no_two_texts_meet(ask_one, mixed, query):
    picture = drawn(ask_one, mixed, query)
    width, height = float(picture.get("width")), float(picture.get("height"))
    for course in picture.iter(f"{SVG}polyline"):
        places = [tuple(map(float, pair.split(","))) for pair in course.get("points").split()]
        assert all(0.0 <= x <= width and 0.0 <= y <= height for x, y in places)
        assert [x for x, _ in places] == sorted(x for x, _ in places)
    boxes = [box_of(text) for text in picture.iter(f"{SVG}text") if text.get("x") != "0.0"]
    for number, (left, top, right, bottom, said) in enumerate(boxes):
        assert left >= 0.0, said
        assert right <= width, said
        for other in boxes[number + 1 :]:
            apart = right <= other[0] or other[2] <= left or bottom <= other[1] or other[3] <= top
            assert apart, (said, other[4])


def box_of(text):
    """About where a text stands, by a mean width of sans-serif characters (common practice)."""
    said = "".join(text.itertext())
    size = 17.0 if text.get("class") == "head" else 12.0
    width, x, y = 0.56 * size * len(said), float(text.get("x")), float(text.get("y"))
    left = {"start": x, "middle": x - width / 2.0, "end": x - width}[text.get("text-anchor")]
    return left, y - 0.7 * size, left + width, y + 0.1 * size, said
