import json
import logging
from typing import Annotated

import pytest
from fastapi import APIRouter, Depends, FastAPI, Query, Request
from hypothesis import given, settings
from hypothesis import strategies as st
from starlette.exceptions import HTTPException
from starlette.testclient import TestClient

from service.api.body import body_of, declare_bodies, sent_body
from service.api.fields import Edge, Litres, Metres, Notes, Patch, RecordIdText, Tag, patch_of
from service.api.limits import Limits
from service.api.paging import Limit
from service.api.problems import (
    ALWAYS,
    declare_problems,
    install_problem_handlers,
    instance_of,
    problem_bytes,
    problems,
)
from service.errors import KeyMissing, RecordNotFound, RevisionMoved, every_problem

PROBLEM_JSON = "application/problem+json"


class Door(Edge):
    """A door."""

    width_m: Metres
    swing: str = "out"


class VesselCreate(Edge):
    """A vessel as it is made."""

    tag: Tag
    capacity_l: Litres
    notes: Notes | None = None
    door: Door | None = None
    attended: bool = False
    count: int = 0


@patch_of(VesselCreate)
class VesselPatch(Patch):
    """What changes in a vessel."""


class VesselRead(VesselCreate):
    """A vessel as it is answered."""

    id: RecordIdText


def with_key(request: Request) -> None:
    if "authorization" not in request.headers:
        raise KeyMissing


def an_app() -> FastAPI:
    app = FastAPI()
    install_problem_handlers(app)
    router = APIRouter(
        prefix="/v1/vessels", dependencies=[Depends(with_key)], responses=problems(*ALWAYS)
    )

    @router.post("")
    async def create_vessel(
        request: Request, vessel: Annotated[VesselCreate, body_of(VesselCreate)]
    ) -> dict[str, object]:
        sent = sent_body(request)
        return {"tag": vessel.tag, "capacity_l": vessel.capacity_l, "bytes": len(sent.raw)}

    @router.get("")
    async def list_vessels(
        limit: Limit = 100, after: Annotated[int, Query(ge=0)] = 0
    ) -> list[VesselRead]:
        if limit + after == 13:
            raise RuntimeError("s3cret detail")
        return []

    @router.patch("/{vessel_id}", responses=problems(RecordNotFound, RevisionMoved))
    async def patch_vessel(
        vessel_id: str, vessel: Annotated[VesselPatch, body_of(VesselPatch, limit=200)]
    ) -> dict[str, object]:
        if vessel_id == "moved":
            raise RevisionMoved(7)
        return vessel.changes()

    @router.get("/{vessel_id}")
    async def get_vessel(vessel_id: str) -> VesselRead:
        if vessel_id == "teapot":
            raise HTTPException(418, "s3cret")
        raise RecordNotFound.of("vessel")

    app.include_router(router)
    return app


APP = an_app()
KEY = {"Authorization": "Bearer x"}
JSON = {**KEY, "Content-Type": "application/json"}


@pytest.fixture(scope="module")
def client():
    with TestClient(Limits(APP, largest_body=1000), raise_server_exceptions=False) as client:
        yield client


def post(client, body, headers=JSON):
    return client.post("/v1/vessels", content=body, headers=headers)


def problem(response, status, slug):
    assert response.status_code == status
    assert response.headers["content-type"] == PROBLEM_JSON
    document = response.json()
    assert document["status"] == status
    assert document["type"] == (slug if slug == "about:blank" else f"/docs/problems#{slug}")
    assert document["instance"] == instance_of(response.headers["x-request-id"])
    return document


def test_a_sound_body_reaches_the_route_and_its_bytes_too(client):
    body = b'{"tag": "D-1", "capacity_l": "2 m3"}'
    assert post(client, body).json() == {"tag": "D-1", "capacity_l": 2000.0, "bytes": len(body)}


@pytest.mark.parametrize(
    ("body", "status", "pointer", "code"),
    [
        (b'{"tag":"D-1","capacity_l":NaN}', 400, "/capacity_l", "not-finite"),
        (b'{"tag":"D-1","capacity_l":Infinity}', 400, "/capacity_l", "not-finite"),
        (b'{"tag":"D-1","capacity_l":1e400}', 422, "/capacity_l", "number-too-large"),
        (b'{"tag":"\\ud800","capacity_l":1}', 422, "/tag", "lone-surrogate"),
        (b'{"tag":"a\\u0000","capacity_l":1}', 422, "/tag", "control-character"),
        (b'{"tag":"D-1","capacity_l":true}', 422, "/capacity_l", "not-a-number"),
        (b'{"tag":"D-1","capacity_l":"7"}', 422, "/capacity_l", "unit-missing"),
        (b'{"tag":"D-1","capacity_l":"nan L"}', 422, "/capacity_l", "number-expected"),
        (b'{"tag":"D-1","capacity_l":1,"x":1}', 422, "/x", "unknown-field"),
        (b'{"tag":"D-1","capacity_l":1,"count":' + b"9" * 30 + b"}", 422, "/count", "number-too"),
        (b'{"tag":"D-1","tag":"D-2","capacity_l":1}', 400, "/tag", "duplicate-name"),
        (b'{"tag":"D-1","capacity_l":1,"attended":1}', 422, "/attended", "not-a-boolean"),
        (b"[" * 900, 400, "", "too-deep"),
        (b"[]", 422, "", "not-an-object"),
        (b"null", 422, "", "not-an-object"),
        (b'"x"', 422, "", "not-an-object"),
        (b"\xff\xfe", 400, "", "not-utf-8"),
        (b"", 400, "", "empty"),
        (b'{"tag":"D-1"', 400, "", "syntax"),
        (b'{"capacity_l":1}', 422, "/tag", "required"),
    ],
)
def test_a_hostile_body_is_answered_by_a_problem_with_a_pointer(
    client, body, status, pointer, code
):
    response = post(client, body)
    found = problem(response, status, "not-json" if status == 400 else "fields-refused")["errors"]
    assert found[0]["pointer"] == pointer
    assert found[0]["code"].startswith(code)


@settings(max_examples=60, deadline=None)
@given(body=st.binary(max_size=60) | st.text(alphabet='{}[]":,tagcpiyl_0', max_size=60))
def test_no_body_gives_a_fault(client, body):
    assert post(client, body).status_code in (200, 400, 422)


@pytest.mark.parametrize(
    "kind",
    [
        "application/json",
        "application/json; charset=utf-8",
        "Application/JSON;charset=UTF-8",
        "application/merge-patch+json",
        "application/vnd.example+json",
    ],
)
def test_json_is_taken_by_any_of_its_names(client, kind):
    body = b'{"tag":"D-1","capacity_l":1}'
    assert post(client, body, {**KEY, "Content-Type": kind}).status_code == 200


@pytest.mark.parametrize(
    "kind",
    [
        "",
        "text/plain",
        "application/x-www-form-urlencoded",
        "application/jsonx",
        "application/json; charset=latin-1",
        "json",
        ";",
    ],
)
def test_another_content_type_is_refused(client, kind):
    response = post(client, b'{"tag":"D-1","capacity_l":1}', {**KEY, "Content-Type": kind})
    problem(response, 415, "media-type-refused")
    assert "application/json" in response.headers["accept"]


def test_a_compressed_body_is_refused(client):
    problem(post(client, b"x", {**JSON, "Content-Encoding": "gzip"}), 415, "media-type-refused")


def test_a_caller_without_a_key_learns_nothing_about_the_body(client):
    response = post(client, b"not json", {"Content-Type": "application/json"})
    problem(response, 401, "key-missing")
    assert response.headers["www-authenticate"] == "Bearer"


def test_a_patch_answers_what_was_sent(client):
    kind = {**KEY, "Content-Type": "application/merge-patch+json"}
    response = client.patch("/v1/vessels/1", content=b'{"notes":null}', headers=kind)
    assert response.json() == {"notes": None}


def test_a_route_may_take_less_than_others(client):
    body = json.dumps({"notes": "x" * 300}).encode()
    response = client.patch("/v1/vessels/1", content=body, headers=JSON)
    assert problem(response, 413, "body-too-large")["detail"].endswith("200 bytes.")

    def chunks():
        yield body[:150]
        yield body[150:]

    chunked = client.patch("/v1/vessels/1", content=chunks(), headers=JSON)
    problem(chunked, 413, "body-too-large")


def test_a_moved_revision_is_answered_with_its_tag(client):
    response = client.patch("/v1/vessels/moved", content=b"{}", headers=JSON)
    problem(response, 412, "revision-moved")
    assert response.headers["etag"] == '"7"'
    assert response.headers["cache-control"] == "no-store"


@pytest.mark.parametrize(
    ("query", "name", "code"),
    [
        ("limit=0", "limit", "out-of-range"),
        ("limit=501", "limit", "out-of-range"),
        ("limit=s3cret", "limit", "not-an-integer"),
        ("limit=" + "9" * 5000, "limit", "number-too-large"),
        ("after=-1", "after", "out-of-range"),
    ],
)
def test_a_bad_parameter_is_named(client, query, name, code):
    response = client.get(f"/v1/vessels?{query}", headers=KEY)
    found = problem(response, 422, "fields-refused")["errors"][0]
    assert (found["parameter"], found["code"]) == (name, code)
    assert "pointer" not in found
    assert "s3cret" not in response.text


def test_an_unknown_path_and_a_missing_record_are_problems(client):
    problem(client.get("/s3cret"), 404, "path-not-found")
    problem(client.get("/v1/vessels/1", headers=KEY), 404, "record-not-found")


def test_a_wrong_method_is_answered_with_all_that_the_path_takes(client):
    response = client.put("/v1/vessels/1")
    problem(response, 405, "method-refused")
    assert response.headers["allow"] == "GET, PATCH"
    assert client.delete("/v1/vessels").headers["allow"] == "GET, POST"


def test_a_status_of_the_framework_keeps_its_number_and_loses_its_words(client):
    response = client.get("/v1/vessels/teapot", headers=KEY)
    document = problem(response, 418, "about:blank")
    assert "s3cret" not in json.dumps(document)


def test_a_fault_is_logged_under_the_id_that_the_caller_gets(client, caplog):
    with caplog.at_level(logging.ERROR, "rimeward.api"):
        response = client.get("/v1/vessels?limit=13", headers={**KEY, "X-Request-Id": "poll-0001"})
    problem(response, 500, "internal-fault")
    assert "s3cret" not in response.text
    assert response.headers["x-request-id"] == "poll-0001"
    record = next(record for record in caplog.records if record.name == "rimeward.api")
    assert record.request_id == "poll-0001"
    assert "/v1/vessels" in record.getMessage()
    assert "s3cret" in str(record.exc_info[1])


@pytest.mark.parametrize("kind", every_problem(), ids=lambda kind: kind.type)
def test_every_error_can_be_written_and_declared(kind):
    error = kind(7) if kind is RevisionMoved else kind()
    document = json.loads(problem_bytes(error, "01890a5d-ac96-774b-bcce-b302099a8057"))
    assert document["instance"] == "urn:uuid:01890a5d-ac96-774b-bcce-b302099a8057"
    assert document["title"] == kind.title
    declared = problems(kind)[kind.status]["content"]
    assert declared[PROBLEM_JSON]["examples"][kind.type]["value"]["type"] == kind.uri()


def a_document():
    document = APP.openapi()
    document = json.loads(json.dumps(document))
    declare_bodies(document, APP.routes)
    declare_problems(document)
    return document


def references_in(node):
    if isinstance(node, dict):
        yield from (value for key, value in node.items() if key == "$ref")
        node = list(node.values())
    if isinstance(node, list):
        for item in node:
            yield from references_in(item)


def test_the_document_shows_what_a_body_looks_like():
    document = a_document()
    schemas = document["components"]["schemas"]
    created = document["paths"]["/v1/vessels"]["post"]["requestBody"]
    assert created["required"]
    assert created["content"] == {
        "application/json": {"schema": {"$ref": "#/components/schemas/VesselCreate"}}
    }
    patched = document["paths"]["/v1/vessels/{vessel_id}"]["patch"]["requestBody"]["content"]
    assert set(patched) == {"application/json", "application/merge-patch+json"}
    assert schemas["VesselCreate"]["required"] == ["tag", "capacity_l"]
    assert "requestBody" not in document["paths"]["/v1/vessels"]["get"]


def test_an_object_is_described_apart_where_it_is_answered_in_another_form():
    schemas = a_document()["components"]["schemas"]
    assert [form["type"] for form in schemas["DoorSent"]["properties"]["width_m"]["anyOf"]] == [
        "number",
        "string",
    ]
    assert schemas["Door"]["properties"]["width_m"]["type"] == "number"
    assert schemas["VesselCreate"]["properties"]["door"]["anyOf"][0]["$ref"].endswith("DoorSent")
    assert schemas["VesselRead"]["properties"]["door"]["anyOf"][0]["$ref"].endswith("/Door")


def test_no_reference_of_the_document_leads_nowhere():
    document = a_document()
    schemas = document["components"]["schemas"]
    found = set(references_in(document))
    assert found
    assert {reference.removeprefix("#/components/schemas/") for reference in found} <= set(schemas)


def test_errors_are_declared_as_problem_documents_only():
    document = a_document()
    assert "HTTPValidationError" not in document["components"]["schemas"]
    for path in document["paths"].values():
        for operation in path.values():
            for status, response in operation["responses"].items():
                if status >= "400":
                    assert list(response["content"]) == [PROBLEM_JSON], status
    patched = document["paths"]["/v1/vessels/{vessel_id}"]["patch"]["responses"]
    assert {"401", "403", "404", "412", "422", "429", "500", "503"} <= set(patched)
