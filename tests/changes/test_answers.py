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
