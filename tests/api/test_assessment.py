"""The assessment over HTTP: whole, and as it is described."""

import pytest

from service.api.schemas.status import AssessmentRead, StatusRead
from tests.api.estate import a_detector, a_room, a_unit, a_vessel


@pytest.mark.slow
def test_every_release_airflow_and_hazard_of_a_mixed_room_is_told_as_described(ask, estate):
    room = ask.made("rooms", a_room(estate.north.site, "MIXED", height_m=3, floor_area_m2=40))
    detector = ask.made("detectors", a_detector(room, "OX-MIXED"))
    ask.made(
        "ventilation-units",
        a_unit(room, "AHU-MIXED", boost_flow_m3_h=3000, boost_trigger=detector["id"]),
    )
    filling = {"by": "automatic", "flow_l_min": 12}
    ask.made("vessels", a_vessel(room, "N2", capacity_l=200, filling=filling))
    ask.made("vessels", a_vessel(room, "O2", fluid="oxygen", capacity_l=20, filling=None))
    ask.made("vessels", a_vessel(room, "N2O", fluid="nitrous-oxide", capacity_l=20, filling=None))
    ask.made("vessels", a_vessel(room, "LNG", fluid="methane", capacity_l=20, filling=None))
    ice = {"fluid": "carbon-dioxide", "kind": "dry-ice-box", "tag": "ICE", "capacity_kg": 30}
    ask.made("vessels", {"site_id": room["site_id"], "room_id": room["id"], **ice})
    assessment = ask.body(f"/v1/rooms/{room['id']}/assessment")
    AssessmentRead.model_validate(assessment)
    StatusRead.model_validate(ask.body(f"/v1/rooms/{room['id']}/status"))
    cases = assessment["cases"]
    assert {case["release"] for case in cases} == {
        "boil-off", "filling", "overfill", "largest-vessel", "all-vessels", "spill", "vacuum-loss",
    }  # fmt: skip
    assert {case["airflow"] for case in cases} == {"as-measured", "design", "lost", "boosted"}
    assert {(case["hazard"], case["gas"]) for case in cases} == {
        ("oxygen-low", "oxygen"), ("oxygen-high", "oxygen"), ("toxic", "carbon-dioxide"),
        ("toxic", "nitrous-oxide"), ("flammable", "flammable-gas"),
    }  # fmt: skip
    assert {mark["measure"] for case in cases for mark in case["marks"]} == {
        "oxygen", "peak", "mean-15min", "mean-8h", "lower-limit",
    }  # fmt: skip
    named = {slug for case in cases for slug in case["method"]}
    assert named == set(assessment["methods"])
    assert named <= {method["slug"] for method in ask.body("/v1/methods")["items"]}
    assert {peak["gas"] for peak in ask.body(f"/v1/rooms/{room['id']}/status")["peaks"]} == {
        "carbon-dioxide", "nitrous-oxide", "flammable-gas",
    }  # fmt: skip
    assert ask.body(f"/v1/rooms/{room['id']}/assessment") == assessment
