"""Requests made up from the description of the API, and from what contradicts it."""

import contextlib
import warnings

import pytest
import schemathesis
from hypothesis import HealthCheck, Phase, given, settings
from hypothesis import strategies as st
from hypothesis.errors import Unsatisfiable
from schemathesis.checks import load_all_checks, not_a_server_error
from schemathesis.generation import GenerationMode
from schemathesis.specs.openapi.checks import (
    response_schema_conformance,
    status_code_conformance,
)

from service.app import create_app
from tests.api.conftest import settings_for

pytestmark = pytest.mark.slow

EXAMPLES = 12
# Mostly one that is let in, so that what is made up is read.
ROLES = ("reader", "recorder", "auditor", *["administrator"] * 7)
# The clients used here refuse to send some of what is made up; that is no fault of the service.
UNSENT = (UnicodeEncodeError, ValueError, TypeError)

load_all_checks()
DESCRIBED = schemathesis.openapi.from_dict(
    create_app(settings_for("sqlite:///nowhere.sqlite")).openapi()
)
OPERATIONS = [result.ok() for result in DESCRIBED.get_all_operations()]


def real_values(estate, path):
    """What a body can name that is there, so that not every made-up record is lost at the door."""
    north = estate.north
    of_site = {"site_id": north.site["id"]}
    in_room = of_site | {"room_id": north.room["id"]}
    return {
        "sites": {"basis": "baseline"},
        "rooms": of_site | {"volume_m3": 50, "purge_fluid": "helium"},
        "ventilation-units": of_site | {"serves": [{"room_id": north.room["id"], "share": 0.5}]},
        "vessels": in_room | {"fluid": "nitrogen", "kind": "tank", "capacity_l": 50},
        "detectors": in_room | {"gas": "oxygen"},
        "openings": in_room | {"kind": "door"},
        "controls": in_room | {"kind": "training"},
        "bases": of_site | {"derived_from": "us", "values": {}, "sources": {}},
        "fluids": of_site
        | {
            "molar_mass_g_mol": 29,
            "boiling_k": 80,
            "condensed_density_kg_m3": 800,
            "oxygen_fraction": 0.1,
            "solid": False,
            "hazards": ["asphyxiant"],
            "settles": "low",
        },
    }.get(path.split("/")[2] if path.startswith("/v1/") else "", {})


def named(case, estate, draw):
    """Put ids of records that are there into a request, now and then."""
    if draw(st.booleans()):
        kind = case.path.split("/")[2] if case.path.startswith("/v1/") else ""
        known = {
            "sites": estate.north.site, "rooms": estate.north.room, "bases": estate.north.basis,
            "ventilation-units": estate.north.unit, "vessels": estate.north.vessel,
            "detectors": estate.north.detector, "fluids": estate.north.fluid,
            "openings": estate.north.opening, "controls": estate.north.control,
        }.get(kind)  # fmt: skip
        for name in ("record_id", "room_id"):
            if known is not None and name in case.path_parameters:
                case.path_parameters[name] = known["id"]
    sound = real_values(estate, case.path)
    if isinstance(case.body, dict) and sound and draw(st.booleans()):
        made_up = (
            draw(st.lists(st.sampled_from(sorted(case.body)), max_size=3)) if case.body else ()
        )
        tag = f"FUZZ-{draw(st.integers(0, 10**9))}"
        case.body = {"tag": tag} | sound | {name: case.body[name] for name in made_up}


@pytest.mark.parametrize("mode", [GenerationMode.POSITIVE, GenerationMode.NEGATIVE])
@pytest.mark.parametrize("operation", OPERATIONS, ids=lambda operation: operation.label)
def test_no_request_meets_a_fault_or_an_answer_that_is_not_declared(
    ask_one, estate_of_one, operation, mode
):
    sent = []

    # A fixed seed, so that a run says the same each time.
    @settings(
        max_examples=EXAMPLES, derandomize=True, database=None, deadline=None,
        phases=[Phase.generate], suppress_health_check=list(HealthCheck),
    )  # fmt: skip
    @given(st.data())
    def fuzzed(data):
        case = data.draw(operation.as_strategy(generation_mode=mode))
        named(case, estate_of_one, data.draw)
        role = data.draw(st.sampled_from(ROLES))
        headers = {"Authorization": f"Bearer {ask_one.keys[role]}"}
        try:
            arguments = case.as_transport_kwargs(base_url="http://testserver")
            made_up = arguments.get("headers") or {}
            kept = {
                n: v for n, v in made_up.items() if n.lower() not in ("authorization", "x-api-key")
            }
            arguments["headers"] = kept | headers
            arguments = {name: value for name, value in arguments.items() if value is not None}
            answer = ask_one.client.request(**arguments)
        except UNSENT:
            return
        sent.append(answer.status_code)
        case.validate_response(
            answer,
            checks=[not_a_server_error, status_code_conformance, response_schema_conformance],
        )

    with warnings.catch_warnings():
        # Of the generator, about strategies of its own.
        warnings.simplefilter("ignore")
        # What takes nothing at all cannot be contradicted.
        with contextlib.suppress(Unsatisfiable):
            fuzzed()
    assert sent or mode is GenerationMode.NEGATIVE


def test_every_operation_of_the_description_is_tried():
    tried = {operation.label for operation in OPERATIONS}
    assert len(tried) == len(OPERATIONS) > 50
