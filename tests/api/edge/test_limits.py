import asyncio
import json
import re

import pytest

from service.api.limits import REQUEST_ID, TRACEPARENT, Limits, continued_trace
from service.errors import Conflict

# W3C Trace Context, section 3.2.3, the example of a traceparent.
EXAMPLE = b"00-4bf92f3577b34da6a3ce929d0e0e4736-00f067aa0ba902b7-01"


def serve(app, *, path="/v1/x", query=b"", headers=(), chunks=(b"",), larger=None):
    """Send one request through the layer as a server would, and gather what comes out."""
    sent = []
    waiting = [
        {"type": "http.request", "body": chunk, "more_body": number < len(chunks) - 1}
        for number, chunk in enumerate(chunks)
    ]

    async def receive():
        return waiting.pop(0)

    async def send(message):
        sent.append(message)

    scope = {
        "type": "http",
        "method": "POST",
        "path": path,
        "query_string": query,
        "headers": list(headers),
    }
    layer = Limits(app, largest_body=10, larger=larger or {})
    asyncio.run(layer(scope, receive, send))
    return Answer(sent, len(waiting))


class Answer:
    def __init__(self, sent, unread):
        self.status = sent[0]["status"]
        self.headers = {name.decode(): value.decode() for name, value in sent[0]["headers"]}
        self.body = b"".join(message.get("body", b"") for message in sent[1:])
        self.unread = unread


def answering(content_type=b"application/json", extra=()):
    async def app(_scope, receive, send):
        while (await receive()).get("more_body"):
            pass
        headers = [(b"content-type", content_type), *extra]
        await send({"type": "http.response.start", "status": 200, "headers": headers})
        told = json.dumps([REQUEST_ID.get(), TRACEPARENT.get()]).encode()
        await send({"type": "http.response.body", "body": told})

    return app


def test_a_body_within_the_limit_passes():
    assert serve(answering(), chunks=(b"12345", b"67890")).status == 200


def test_a_body_is_refused_as_soon_as_it_grows_too_large():
    answer = serve(answering(), chunks=(b"123456", b"78901", b"x", b"y"))
    assert answer.status == 413
    assert answer.unread == 2
    assert answer.headers["content-type"] == "application/problem+json"
    assert answer.headers["connection"] == "close"
    assert json.loads(answer.body)["type"] == "/docs/problems#body-too-large"


@pytest.mark.parametrize("length", [b"11", b"9" * 30])
def test_an_announced_body_that_is_too_large_is_not_read(length):
    answer = serve(answering(), headers=[(b"content-length", length)], chunks=(b"x",))
    assert (answer.status, answer.unread) == (413, 1)


def test_a_path_may_take_more_than_others_and_its_neighbours_do_not():
    larger = {"/v1/imports": 1000}
    for path, status in (
        ("/v1/imports", 200),
        ("/v1/imports/7", 200),
        ("/v1/importsx", 413),
        ("/v1/x", 413),
    ):
        assert serve(answering(), path=path, chunks=(b"x" * 500,), larger=larger).status == status


@pytest.mark.parametrize("query", [b"tag=%00", b"tag=a%0Ab", b"tag=%1b", b"tag=%7F", b"tag=\x01"])
def test_control_characters_in_a_query_are_refused(query):
    answer = serve(answering(), query=query)
    assert answer.status == 422
    assert json.loads(answer.body)["errors"][0]["parameter"] == "query"


def test_control_characters_in_a_path_are_refused_and_other_signs_are_not():
    assert serve(answering(), path="/v1/a\x00b").status == 422
    assert serve(answering(), path="/v1/Ø", query=b"tag=%C3%98%20%2B").status == 200


def test_every_answer_has_the_security_headers():
    answer = serve(answering())
    assert answer.headers["x-content-type-options"] == "nosniff"
    assert answer.headers["referrer-policy"] == "no-referrer"
    assert "content-security-policy" not in answer.headers


def test_a_page_has_a_policy_and_may_have_its_own():
    page = serve(answering(b"text/html; charset=utf-8"))
    assert page.headers["content-security-policy"] == "default-src 'self'; frame-ancestors 'none'"
    own = serve(answering(b"text/html", [(b"content-security-policy", b"default-src 'none'")]))
    assert own.headers["content-security-policy"] == "default-src 'none'"


def test_a_sane_request_id_is_kept_and_another_is_made():
    kept = serve(answering(), headers=[(b"x-request-id", b"poll-00017")])
    assert kept.headers["x-request-id"] == json.loads(kept.body)[0] == "poll-00017"
    for odd in (b"", b"short", b"a b c d e f", b"x" * 65, b"id\r\nSet-Cookie: a", b"<script>1</>"):
        made = serve(answering(), headers=[(b"x-request-id", odd)])
        assert re.fullmatch(
            r"[0-9a-f]{8}(-[0-9a-f]{4}){3}-[0-9a-f]{12}", made.headers["x-request-id"]
        )
    assert REQUEST_ID.get() == ""


def test_a_well_formed_trace_is_continued_with_a_span_of_our_own():
    trace = json.loads(serve(answering(), headers=[(b"traceparent", EXAMPLE)]).body)[1]
    assert trace.startswith("00-4bf92f3577b34da6a3ce929d0e0e4736-")
    assert trace.endswith("-01")
    assert "00f067aa0ba902b7" not in trace


@pytest.mark.parametrize(
    "sent",
    [
        b"",
        b"00-" + b"0" * 32 + b"-00f067aa0ba902b7-01",
        b"00-4bf92f3577b34da6a3ce929d0e0e4736-" + b"0" * 16 + b"-01",
        b"ff" + EXAMPLE[2:],
        EXAMPLE + b"-more",
        EXAMPLE.upper(),
        EXAMPLE[:-1],
    ],
)
def test_a_malformed_trace_is_ignored(sent):
    """W3C Trace Context, section 3.2.2: what is invalid and must not be continued."""
    made = continued_trace(sent)
    assert "4bf92f3577b34da6a3ce929d0e0e4736" not in made.lower()
    assert continued_trace(made.encode())[:35] == made[:35]


def test_a_later_version_of_a_trace_is_continued():
    assert continued_trace(b"01" + EXAMPLE[2:] + b"-more")[:35].encode() == EXAMPLE[:35]


def test_an_error_outside_of_the_framework_is_answered_as_a_problem():
    async def app(_scope, _receive, _send):
        raise Conflict("It cannot be.")

    answer = serve(app)
    assert answer.status == 409
    assert json.loads(answer.body)["detail"] == "It cannot be."


def test_a_fault_outside_of_the_framework_is_answered_and_goes_on(caplog):
    sent = []

    async def app(_scope, _receive, _send):
        raise RuntimeError("s3cret")

    async def send(message):
        sent.append(message)

    scope = {"type": "http", "method": "GET", "path": "/", "query_string": b"", "headers": []}
    with pytest.raises(RuntimeError):
        asyncio.run(Limits(app, largest_body=10)(scope, None, send))
    assert sent[0]["status"] == 500
    assert b"s3cret" not in sent[1]["body"]
    assert "Fault in GET" in caplog.text


def test_what_is_no_request_passes_untouched():
    seen = []

    async def app(scope, _receive, _send):
        seen.append(scope["type"])

    asyncio.run(Limits(app, largest_body=10)({"type": "lifespan"}, None, None))
    assert seen == ["lifespan"]
