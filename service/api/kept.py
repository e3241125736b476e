"""Rendered answers kept in memory by their entity tags, for polls that many callers make alike."""

from __future__ import annotations

import threading
from collections import OrderedDict
from typing import Final

KEPT_BYTES: Final = 4 * 1024 * 1024


class KeptBodies:
    """Bodies by strong entity tag, bounded by bytes, the least recently used going first.

    A tag that is strong names the bytes whoever asks, so that nothing is ever out of date here.
    """

    def __init__(self, limit_bytes: int = KEPT_BYTES) -> None:
        self._limit = limit_bytes
        self._lock = threading.Lock()
        self._bodies: OrderedDict[str, bytes] = OrderedDict()
        self._bytes = 0

    @property
    def bytes_held(self) -> int:
        """Return how many bytes are kept."""
        return self._bytes

    def get(self, tag: str) -> bytes | None:
        """Return the body of a tag, if it is here."""
        with self._lock:
            body = self._bodies.get(tag)
            if body is not None:
                self._bodies.move_to_end(tag)
            return body

    def put(self, tag: str, body: bytes) -> None:
        """Keep a body, and drop what was asked for longest ago where there is no room."""
        with self._lock:
            self._bytes += len(body) - len(self._bodies.pop(tag, b""))
            self._bodies[tag] = body
            while self._bytes > self._limit:
                _, oldest = self._bodies.popitem(last=False)
                self._bytes -= len(oldest)
