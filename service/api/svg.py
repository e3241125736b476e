"""Pictures as SVG: elements, escaped text, and the ticks of axes. Knows nothing of rooms."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from html import escape
from itertools import product
from typing import Final, NewType

Drawn = NewType("Drawn", str)
"""What is SVG already, and needs no escaping any more."""

CHARACTER: Final = 0.56
"""Mean width of a character in a sans-serif face, by its size; for what must not overlap."""

_FACTORS: Final = (1.0, 2.0, 5.0)
_SLACK: Final = 1e-9


def element(name: str, *inner: Drawn, **attributes: str | float) -> Drawn:
    """Write an element; an underscore in an attribute's name stands for a hyphen."""
    written = "".join(
        f' {key.rstrip("_").replace("_", "-")}="{_attribute(value)}"'
        for key, value in attributes.items()
    )
    if not inner:
        return Drawn(f"<{name}{written}/>")
    return Drawn(f"<{name}{written}>{''.join(inner)}</{name}>")


def _attribute(value: str | float) -> str:
    return escape(value) if isinstance(value, str) else f"{value:.1f}"


def said(text: str) -> Drawn:
    """Escape a text."""
    return Drawn(escape(text))


def line(x1: float, y1: float, x2: float, y2: float, look: str) -> Drawn:
    """Draw a straight line."""
    return element("line", x1=x1, y1=y1, x2=x2, y2=y2, class_=look)


def words(text: str, x: float, y: float, look: str, anchor: str = "start") -> Drawn:
    """Set a line of text."""
    return element("text", said(text), x=x, y=y, class_=look, text_anchor=anchor)


def path(points: Iterable[tuple[float, float]], look: str) -> Drawn:
    """Draw a line through points."""
    return element("polyline", points=" ".join(f"{x:.1f},{y:.1f}" for x, y in points), class_=look)


def picture(
    title: str, description: str, style: str, width: float, height: float, inner: Sequence[Drawn]
) -> bytes:
    """Write a picture, complete by itself: nothing is fetched and nothing runs."""
    drawn = element(
        "svg",
        element("title", said(title), id="title"),
        element("desc", said(description), id="description"),
        element("style", Drawn(style)),
        *inner,
        xmlns="http://www.w3.org/2000/svg",
        viewBox=f"0 0 {width:g} {height:g}",
        width=width,
        height=height,
        role="img",
        aria_labelledby="title description",
    )
    return drawn.encode()


def width_of(text: str, size: float) -> float:
    """Estimate how wide a text comes out."""
    return len(text) * size * CHARACTER


def shortened(text: str, most: int) -> str:
    """Cut a text that is longer than so many characters."""
    return text if len(text) <= most else f"{text[: most - 1].rstrip()}…"


def wrapped(text: str, size: float, width: float) -> list[str]:
    """Break a text into lines of some width, between words."""
    lines: list[str] = []
    for word in text.split():
        if lines and width_of(f"{lines[-1]} {word}", size) <= width:
            lines[-1] += f" {word}"
        else:
            lines.append(word)
    return lines


def round_step(span: float, most: int) -> float:
    """Give the smallest step of 1, 2 or 5 times a power of ten that makes so many at most."""
    least = span / most
    power = 10.0 ** math.floor(math.log10(least))
    steps = (power * factor * ten for ten, factor in product((1.0, 10.0), _FACTORS))
    return next(step for step in steps if step >= least * (1.0 - _SLACK))


def ticks(low: float, high: float, step: float) -> list[float]:
    """Give the multiples of a step in a range."""
    first = math.ceil(low / step - _SLACK)
    last = math.floor(high / step + _SLACK)
    return [number * step for number in range(first, last + 1)]


def spread(wanted: Sequence[float], apart: float, low: float, high: float) -> list[float]:
    """Move places as little as need be so that they stand apart, in their order, in a range."""
    order = sorted(range(len(wanted)), key=lambda each: wanted[each])
    placed = list(wanted)
    last = low - apart
    for each in order:
        last = placed[each] = max(placed[each], last + apart)
    ceiling = high
    for each in reversed(order):
        placed[each] = min(placed[each], ceiling)
        ceiling = placed[each] - apart
    return placed


@dataclass(frozen=True, slots=True)
class Flag:
    """A text beside an upright line that rises to it, in a row above a plot."""

    x: float
    text: str
    row: int
    leftward: bool
    begins: float
    ends: float

    def stands_free(self, other: Flag) -> bool:
        """Tell whether neither the texts nor the lines of two meet."""
        if self.row == other.row:
            return self.ends < other.begins or other.ends < self.begins
        low, high = sorted((self, other), key=lambda flag: flag.row)
        return not low.begins <= high.x <= low.ends


def flags(
    wanted: Iterable[tuple[float, str]], size: float, left: float, right: float
) -> list[Flag]:
    """Place texts beside upright lines, in as few rows as keep them apart."""
    placed: list[Flag] = []
    upright = sorted(wanted, key=lambda each: -each[0])
    for x, text in upright:
        tries = [
            _flag(x, text, row, leftward, size)
            for row in range(len(upright))
            for leftward in (False, True)
        ]
        inside = [flag for flag in tries if left <= flag.begins and flag.ends <= right]
        free = [flag for flag in inside if all(flag.stands_free(other) for other in placed)]
        placed.append((free or inside or tries)[0] if free else (inside or tries)[-1])
    return placed


def _flag(x: float, text: str, row: int, leftward: bool, size: float) -> Flag:
    gap, width = size / 3.0, width_of(text, size)
    begins = x - gap - width if leftward else x + gap
    return Flag(x, text, row, leftward, begins, begins + width)
