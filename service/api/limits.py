"""The outermost layer: what a framework leaves open, in plain ASGI.

It names each request, continues a trace, refuses a body that is too large while it comes in and a
path or query with control characters, and puts the security headers on every answer.
"""

import re
import secrets
from collections.abc import Mapping
from contextvars import ContextVar
from dataclasses import dataclass, field
from typing import Final
from uuid import uuid4

from starlette.types import ASGIApp, Message, Receive, Scope, Send

from service.api.problems import log_fault, send_problem, set_request_id
from service.errors import BodyTooLarge, FieldsRefused, InternalFault, RimewardError

# Read by whatever writes log lines or calls further on while a request is served.
REQUEST_ID: Final[ContextVar[str]] = ContextVar("rimeward_request_id", default="")
TRACEPARENT: Final[ContextVar[str]] = ContextVar("rimeward_traceparent", default="")

PAGE_POLICY: Final = b"default-src 'self'; frame-ancestors 'none'"

_SANE_ID: Final = re.compile(rb"[A-Za-z0-9][A-Za-z0-9._-]{7,63}")
# W3C Trace Context, section 3.2.2; a later version may add fields after the flags.
_TRACEPARENT: Final = re.compile(
    rb"(?P<version>[0-9a-f]{2})-(?P<trace>[0-9a-f]{32})-(?P<parent>[0-9a-f]{16})"
    rb"-(?P<flags>[0-9a-f]{2})(?P<more>-.*)?"
)
_ESCAPED_CONTROL: Final = re.compile(rb"%(?:[01][0-9a-f]|7f)|[\x00-\x1f\x7f]", re.IGNORECASE)
_CONTROL: Final = re.compile("[\x00-\x1f\x7f]")


@dataclass(frozen=True, slots=True)
class Limits:
    """The layer around an application; ``larger`` maps a path's beginning to its own limit."""

    app: ASGIApp
    largest_body: int
    larger: Mapping[str, int] = field(default_factory=dict)

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Serve one request."""
        if scope["type"] != "http":
            await self.app(scope, receive, send)
            return
        sent = _Answer(send, _request_id(scope))
        set_request_id(scope, sent.request_id)
        named = REQUEST_ID.set(sent.request_id)
        traced = TRACEPARENT.set(continued_trace(_header(scope, b"traceparent")))
        try:
            await self._serve(scope, receive, sent)
        finally:
            REQUEST_ID.reset(named)
            TRACEPARENT.reset(traced)

    async def _serve(self, scope: Scope, receive: Receive, sent: "_Answer") -> None:
        try:
            limit = self.limit_for(scope["path"])
            refuse_address(scope)
            refuse_announced(scope, limit)
            await self.app(scope, _Counted(receive, limit), sent)
        except RimewardError as error:
            if sent.started:
                raise
            await send_problem(sent, scope, error)
        except Exception as error:
            # The framework has answered and logged its own faults before they come by here.
            if sent.started:
                raise
            log_fault(scope, error)
            await send_problem(sent, scope, InternalFault())
            raise

    def limit_for(self, path: str) -> int:
        """Give the largest body that a path takes."""
        own = (limit for start, limit in self.larger.items() if _begins(path, start))
        return max(own, default=self.largest_body)


def _begins(path: str, start: str) -> bool:
    return path == start or path.startswith(f"{start.rstrip('/')}/")


def _header(scope: Scope, name: bytes) -> bytes:
    return next((value for key, value in scope["headers"] if key == name), b"")


def _request_id(scope: Scope) -> str:
    """Take the caller's id where it is a sane one, else make one."""
    sent = _header(scope, b"x-request-id")
    return sent.decode("ascii") if _SANE_ID.fullmatch(sent) else str(uuid4())


def continued_trace(sent: bytes) -> str:
    """Continue the trace of a well-formed ``traceparent``, or begin one; the span is our own."""
    found = _TRACEPARENT.fullmatch(sent)
    span = secrets.token_hex(8)
    if (
        found is None
        or found["version"] == b"ff"
        or (found["version"] == b"00" and found["more"])
        or not int(found["trace"], 16)
        or not int(found["parent"], 16)
    ):
        return f"00-{secrets.token_hex(16)}-{span}-00"
    return f"00-{found['trace'].decode()}-{span}-{found['flags'].decode()}"


def refuse_address(scope: Scope) -> None:
    """Refuse control characters in path and query; no name or tag has any."""
    if _CONTROL.search(scope["path"]):
        raise FieldsRefused.parameter("path", "control-character", "No control characters.")
    if _ESCAPED_CONTROL.search(scope.get("query_string", b"")):
        raise FieldsRefused.parameter("query", "control-character", "No control characters.")


def refuse_announced(scope: Scope, limit: int) -> None:
    """Refuse a body whose announced length is too large, before any of it is read."""
    announced = _header(scope, b"content-length")
    if announced.isdigit() and (len(announced) > 18 or int(announced) > limit):
        raise BodyTooLarge.above(limit)


class _Counted:
    """Receives, and counts the bytes of the body."""

    def __init__(self, receive: Receive, limit: int) -> None:
        self._receive = receive
        self._limit = limit
        self._received = 0

    async def __call__(self) -> Message:
        message = await self._receive()
        if message["type"] == "http.request":
            self._received += len(message.get("body", b""))
            if self._received > self._limit:
                raise BodyTooLarge.above(self._limit)
        return message


class _Answer:
    """Sends, and adds the headers that every answer has."""

    def __init__(self, send: Send, request_id: str) -> None:
        self._send = send
        self.request_id = request_id
        self.started = False

    async def __call__(self, message: Message) -> None:
        if message["type"] == "http.response.start":
            self.started = True
            message = {**message, "headers": self._completed(list(message.get("headers", ())))}
        await self._send(message)

    def _completed(self, headers: list[tuple[bytes, bytes]]) -> list[tuple[bytes, bytes]]:
        present = {name.lower(): value for name, value in headers}
        added = [
            (b"x-request-id", self.request_id.encode("ascii")),
            (b"x-content-type-options", b"nosniff"),
            (b"referrer-policy", b"no-referrer"),
        ]
        if present.get(b"content-type", b"").startswith(b"text/html"):
            added.append((b"content-security-policy", PAGE_POLICY))
        return headers + [(name, value) for name, value in added if name not in present]
