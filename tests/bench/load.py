"""A load from one thread over raw sockets: cheap enough that the server is what is measured."""

import selectors
import socket
import time
from dataclasses import dataclass

CONNECTIONS = 16


@dataclass(frozen=True, slots=True)
class Measured:
    """What a run of requests gave."""

    requests: int
    seconds: float
    status: int
    reply: bytes

    @property
    def rate(self) -> float:
        return self.requests / self.seconds


def request_bytes(method, path, *, key=None, body=b"", headers=()):
    """Write one HTTP/1.1 request that keeps its connection."""
    lines = [f"{method} {path} HTTP/1.1", "Host: 127.0.0.1"]
    if key is not None:
        lines.append(f"Authorization: Bearer {key}")
    if body:
        lines += ["Content-Type: application/json", f"Content-Length: {len(body)}"]
    lines += [f"{name}: {value}" for name, value in headers]
    return "\r\n".join(lines).encode() + b"\r\n\r\n" + body


def reply_to(connection, request):
    """Send one request and read its whole reply."""
    connection.sendall(request)
    held = b""
    while b"\r\n\r\n" not in held:
        held += _more(connection)
    head, _, body = held.partition(b"\r\n\r\n")
    length = 0
    for line in head.split(b"\r\n")[1:]:
        name, _, value = line.partition(b":")
        if name.lower() == b"content-length":
            length = int(value)
    while len(body) < length:
        body += _more(connection)
    return int(head.split(b" ", 2)[1]), head, body


def _more(connection):
    received = connection.recv(65536)
    if not received:
        raise ConnectionError("The server closed the connection.")
    return received


def connect(port):
    connection = socket.create_connection(("127.0.0.1", port), timeout=10)
    connection.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
    return connection


def asked_once(port, request):
    """Ask on a connection of its own."""
    with connect(port) as connection:
        return reply_to(connection, request)


def load(port, request, *, seconds, connections=CONNECTIONS):
    """Ask the same over and over on several connections, each waiting for its answer."""
    opened = [connect(port) for _ in range(connections)]
    status, head, body = reply_to(opened[0], request)
    # Every reply has this length, so that counting bytes counts replies.
    length = len(head) + 4 + len(body)
    received = dict.fromkeys(opened, 0)
    done = 0
    with selectors.DefaultSelector() as selector:
        for connection in opened:
            selector.register(connection, selectors.EVENT_READ)
            connection.sendall(request)
        began = time.perf_counter()
        ends = began + seconds
        while (now := time.perf_counter()) < ends:
            for ready, _ in selector.select(timeout=1.0):
                connection = ready.fileobj
                received[connection] += len(_more(connection))
                if received[connection] >= length:
                    assert received[connection] == length, "a reply of another length"
                    received[connection] = 0
                    done += 1
                    connection.sendall(request)
    for connection in opened:
        connection.close()
    return Measured(done, now - began, status, body)
