"""The stored answers: the currency spliced in, and what decides it."""

from datetime import UTC, datetime, timedelta

import orjson
import pytest

from service.changes.answers import currency_of, rendered, status_etag, with_currency
from service.store.history import assessment_now

NOW = datetime(2027, 3, 1, 8, tzinfo=UTC)


def _currency(**changed):
    usual = {
        "position": 7, "wanted": 7, "turns_at": NOW + timedelta(hours=1),
        "method_version": "1", "failed": False, "now": NOW, "running_method": "1",
    }  # fmt: skip
    return currency_of(**{**usual, **changed})


def test_an_answer_is_current_until_something_moves():
    assert _currency() == "current"
    assert _currency(turns_at=None) == "current"


@pytest.mark.parametrize(
    ("changed", "currency"),
    [
        ({"wanted": 8}, "recalculating"),
        ({"method_version": "0"}, "recalculating"),
        ({"turns_at": NOW}, "behind"),
        ({"turns_at": NOW, "wanted": 8}, "recalculating"),
        ({"failed": True, "turns_at": NOW, "wanted": 8}, "failed"),
    ],
)
def test_the_gravest_reason_not_to_rely_on_an_answer_is_told(changed, currency):
    assert _currency(**changed) == currency
    assert status_etag(7, currency) == f'"7-{currency[0]}"'


def test_the_currency_is_spliced_into_its_own_place_whatever_a_room_is_called(sqlite_line):
    line = sqlite_line
    line.a_site()
    room = line.a_room(tag='x","currency":"', name='"currency":"failed')
    status = line.read(assessment_now, room.id).status
    document = orjson.loads(with_currency(status, "behind"))
    assert document["currency"] == "behind"
    assert (document["tag"], document["name"]) == ('x","currency":"', '"currency":"failed')


@pytest.mark.parametrize("number", [float("nan"), float("inf"), -float("inf")])
def test_a_number_that_is_not_finite_is_never_answered(number):
    with pytest.raises(ValueError, match="finite"):
        rendered({"a": [{"b": number}]})


def test_the_status_tells_toxic_and_flammable_gas_each_at_its_worst(sqlite_line):
    """A closed store with dry ice, and hydrogen that gathers under its ceiling."""
    line = sqlite_line
    line.a_site()
    room = line.a_room(
        kind="walk-in", volume_m3=1000.0, occupied_fraction=0.0, temperature_c=20.0,
        floor_area_m2=400.0, height_m=2.5,
    )  # fmt: skip
    # A kilogram makes 0.5466 m3 of ideal gas (methods A-4): 127 kg make 69.4 m3.
    line.a_vessel(
        room, tag="ICE", fluid="carbon-dioxide", kind="dry-ice-box", capacity_l=None,
        capacity_kg=127.0, mobile=False,
    )  # fmt: skip
    line.a_vessel(room, tag="H", fluid="hydrogen", kind="cylinder", capacity_l=None, capacity_kg=1)
    status = orjson.loads(line.read(assessment_now, room.id).status)
    dioxide, flammable = status["peaks"]
    assert (dioxide["gas"], dioxide["release"]) == ("carbon-dioxide", "boil-off")
    # What has left the closed room meanwhile took some along: 1 - (1 - 0.0005) exp(-0.0694).
    assert dioxide["peak_pct"] == pytest.approx(6.75, rel=0.003)
    assert dioxide["deciding"] == {
        "measure": "peak", "limit": "carbon_dioxide_pct/peak", "limit_pct": 4.0,
        "value_pct": dioxide["peak_pct"], "place": 3, "crossed": True,
    }  # fmt: skip
    # A kilogram of hydrogen is 11.93 m3 at 20 degrees Celsius (methods A1), in the 400 m3 above
    # the height that people breathe at: 2.98 %, three quarters of 4 %.
    assert (flammable["hazard"], flammable["release"]) == ("flammable", "largest-vessel")
    assert flammable["lower_limit_pct"] == pytest.approx(74.6, rel=0.003)
    assert flammable["mean_8h_pct"] is None
    assert status["worst"]["hazard"] == "toxic"
    assert status["worst"]["mark"] == 3
