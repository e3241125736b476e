"""Long lists of ids, in parts: what one statement may have as parameters is bounded."""

from collections.abc import Iterable, Iterator
from typing import Final

AT_ONCE: Final = 1000


def in_parts(ids: Iterable[str]) -> Iterator[list[str]]:
    """Return ids in order, each once, in parts that one statement takes."""
    ordered = sorted(set(ids))
    for first in range(0, len(ordered), AT_ONCE):
        yield ordered[first : first + AT_ONCE]
