"""The HTTP protocol with what its base leaves open: a deadline, and a limit on headers.

Without them an idle or dripping connection stays open for ever, and headers grow without end. What
is timed is the caller alone: a slow answer, and a connection kept alive, are left as they are.
"""

from __future__ import annotations

import asyncio
from datetime import timedelta
from typing import Any, ClassVar, Final

from uvicorn.protocols.http.httptools_impl import HttpToolsProtocol

LARGEST_HEADERS: Final = 32 * 1024
_REFUSED: Final = (
    b"HTTP/1.1 %d %s\r\ncontent-type: application/problem+json\r\ncontent-length: %d\r\n"
    b"cache-control: no-store\r\nconnection: close\r\n\r\n%s"
)
_TOO_LARGE: Final = (431, b"Request Header Fields Too Large")
_TOO_SLOW: Final = (408, b"Request Timeout")


class DeadlineProtocol(HttpToolsProtocol):
    """Closes a connection whose request does not come in whole within a deadline."""

    deadline: ClassVar[timedelta] = timedelta(seconds=10)
    largest_headers: ClassVar[int] = LARGEST_HEADERS

    def __init__(self, *arguments: Any, **options: Any) -> None:
        super().__init__(*arguments, **options)
        # One timer a connection, which looks at this: to set one for each request costs more than
        # all else here.
        self._waiting_since: float | None = None
        self._timer: asyncio.TimerHandle | None = None
        self._in_headers = True
        self._header_bytes = 0
        self._too_large = False

    def connection_made(self, transport: asyncio.Transport) -> None:  # type: ignore[override]
        """Begin to count when the connection opens: it may never say a word."""
        super().connection_made(transport)
        self._waiting_since = self.loop.time()
        self._look_in(self.deadline.total_seconds())

    def connection_lost(self, exc: Exception | None) -> None:
        """Stop counting."""
        if self._timer is not None:
            self._timer.cancel()
        super().connection_lost(exc)

    def data_received(self, data: bytes) -> None:
        """Count the bytes of headers that have not ended yet."""
        super().data_received(data)
        if self._in_headers:
            self._header_bytes += len(data)
            if self._header_bytes > self.largest_headers:
                self._refuse(*_TOO_LARGE)

    def on_message_begin(self) -> None:
        """Begin to count for this request, unless it waits behind another one's answer."""
        super().on_message_begin()
        self._in_headers, self._header_bytes = True, 0
        if self.cycle is None or self.cycle.response_complete:
            self._waiting_since = self.loop.time()

    def on_headers_complete(self) -> None:
        """Go on with the request if its headers are small enough."""
        self._in_headers = False
        size = len(self.url) + sum(len(name) + len(value) for name, value in self.headers)
        if size > self.largest_headers:
            self._too_large = True
            raise ValueError("The headers are too large.")  # Stops the parser.
        super().on_headers_complete()

    def on_message_complete(self) -> None:
        """Stop counting: the request is here."""
        self._waiting_since = None
        super().on_message_complete()

    def send_400_response(self, msg: str) -> None:
        """Refuse what is no HTTP, and headers that came whole and too large."""
        if self._too_large:
            self._refuse(*_TOO_LARGE)
        elif not self.transport.is_closing():
            self._refuse(400, b"Bad Request")

    def _look_in(self, seconds: float) -> None:
        self._timer = self.loop.call_later(seconds, self._look)

    def _look(self) -> None:
        limit = self.deadline.total_seconds()
        waited = 0.0 if self._waiting_since is None else self.loop.time() - self._waiting_since
        if waited < limit:
            self._look_in(limit - waited)
        elif self.cycle is not None and not self.cycle.response_complete:
            # The application waits for the body and hears now that nobody sends it.
            self.transport.close()
        else:
            self._refuse(*_TOO_SLOW)

    def _refuse(self, status: int, phrase: bytes) -> None:
        if self.transport.is_closing():
            return
        body = b'{"type":"about:blank","title":"%s","status":%d,"detail":"%s."}' % (
            phrase,
            status,
            phrase,
        )
        self.transport.write(_REFUSED % (status, phrase, len(body), body))
        self.transport.close()


def deadline_protocol(deadline: timedelta) -> type[DeadlineProtocol]:
    """Make the protocol class for a deadline."""
    return type("DeadlineProtocol", (DeadlineProtocol,), {"deadline": deadline})
