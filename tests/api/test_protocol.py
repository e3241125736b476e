"""What a caller may take its time with, on real connections."""

import asyncio
import contextlib
import socket
import threading
import time
from datetime import timedelta

import pytest
from uvicorn import Config, Server

from service.api.protocol import LARGEST_HEADERS, deadline_protocol

DEADLINE_S = 0.4


async def application(scope, receive, send):
    """Answers what it was sent; slowly where the path says so."""
    body = b""
    while True:
        message = await receive()
        if message["type"] == "http.disconnect":
            return
        body += message.get("body", b"")
        if not message.get("more_body"):
            break
    if scope["path"] == "/slow":
        await asyncio.sleep(3 * DEADLINE_S)
    length = str(len(body)).encode()
    headers = [(b"content-length", length), (b"content-type", b"text/plain")]
    await send({"type": "http.response.start", "status": 200, "headers": headers})
    await send({"type": "http.response.body", "body": body})


@pytest.fixture(scope="module")
def address():
    listener = socket.create_server(("127.0.0.1", 0))
    protocol = deadline_protocol(timedelta(seconds=DEADLINE_S))
    server = Server(
        Config(application, http=protocol, ws="none", lifespan="off", log_config=None,
               server_header=False, timeout_keep_alive=30)
    )  # fmt: skip
    thread = threading.Thread(target=server.run, kwargs={"sockets": [listener]})
    thread.start()
    yield listener.getsockname()
    server.should_exit = True
    thread.join(20)


@pytest.fixture
def connection(address):
    with contextlib.closing(socket.create_connection(address, timeout=10)) as opened:
        yield opened


def all_of(connection):
    """Read until the other side closes; return what it said and how long that took."""
    began, said = time.monotonic(), b""
    with contextlib.suppress(ConnectionResetError):
        while chunk := connection.recv(65536):
            said += chunk
    return said, time.monotonic() - began


def answer_of(connection, length):
    said = b""
    while len(said.partition(b"\r\n\r\n")[2]) < length or b"\r\n\r\n" not in said:
        said += connection.recv(65536)
    return said


def test_a_connection_that_says_nothing_is_closed(connection):
    said, took = all_of(connection)
    assert said.startswith(b"HTTP/1.1 408 ")
    assert took < 5 * DEADLINE_S


@pytest.mark.parametrize(
    "beginning",
    [
        b"GET / HTTP/1.1\r\nHost: x\r\nX-A",
        b"POST / HTTP/1.1\r\nHost: x\r\nContent-Length: 9\r\n\r\n12",
    ],
    ids=["half a header", "half a body"],
)
def test_a_request_that_stays_half_is_closed(connection, beginning):
    connection.sendall(beginning)
    said, took = all_of(connection)
    assert not said.startswith(b"HTTP/1.1 200")
    assert took < 5 * DEADLINE_S


def test_a_request_that_drips_is_closed(connection):
    began = time.monotonic()
    connection.settimeout(0.05)
    with contextlib.suppress(OSError):
        for letter in b"GET / HTTP/1.1\r\nHost: " + b"x" * 10_000:
            connection.sendall(bytes([letter]))
            with contextlib.suppress(TimeoutError):
                if not connection.recv(1):
                    break
    assert time.monotonic() - began < 10 * DEADLINE_S


def test_a_slow_answer_is_waited_for(connection):
    connection.sendall(b"POST /slow HTTP/1.1\r\nHost: x\r\nContent-Length: 2\r\n\r\nok")
    assert answer_of(connection, 2).endswith(b"ok")


def test_a_connection_that_is_kept_alive_is_not_hurried(connection):
    for _ in range(2):
        connection.sendall(b"POST / HTTP/1.1\r\nHost: x\r\nContent-Length: 2\r\n\r\nok")
        assert answer_of(connection, 2).endswith(b"ok")
        time.sleep(2 * DEADLINE_S)


@pytest.mark.parametrize("ended", [True, False])
def test_headers_beyond_the_limit_are_refused(connection, ended):
    line = b"X-A: " + b"a" * 4000 + b"\r\n"
    with contextlib.suppress(OSError):
        connection.sendall(
            b"GET / HTTP/1.1\r\nHost: x\r\n" + line * 9 + (b"\r\n" if ended else b"")
        )
    said, _ = all_of(connection)
    assert said.startswith(b"HTTP/1.1 431 ")
    assert b"application/problem+json" in said


def test_headers_within_the_limit_and_a_large_body_are_taken(connection):
    line = b"X-A: " + b"a" * (LARGEST_HEADERS - 200) + b"\r\n"
    body = b"b" * 200_000
    connection.sendall(
        b"POST / HTTP/1.1\r\nHost: x\r\nContent-Length: 200000\r\n" + line + b"\r\n" + body
    )
    assert answer_of(connection, len(body)).endswith(body)


def test_what_is_no_http_is_refused_with_a_problem(connection):
    connection.sendall(b"\x16\x03\x01\x02\x00 hello\r\n\r\n")
    said, _ = all_of(connection)
    assert said.startswith(b"HTTP/1.1 400 ")
    assert b"application/problem+json" in said
