"""Numbers and records as rules say them: short, and rounded to the side that is safe."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

import numpy as np

from service.audit.inputs import Reference


def oxygen_text(percent: float, *, low: bool) -> str:
    """An oxygen figure of two places, never milder than it is."""
    rounding = math.floor if low else math.ceil
    # Ten figures are what the solver answers; the product must not make an eleventh.
    return f"{rounding(round(percent * 100.0, 6)) / 100.0:.2f} %"


def at_most(value: float) -> str:
    """Three figures, rounded down."""
    return _three_figures(value, math.floor)


def at_least(value: float) -> str:
    """Three figures, rounded up."""
    return _three_figures(value, math.ceil)


def _three_figures(value: float, rounding: Callable[[float], int]) -> str:
    if value <= 0.0:
        return "0"
    places = 2 - math.floor(math.log10(value))
    scale = 10.0**places
    return f"{rounding(round(value * scale, 6)) / scale:.{max(places, 0)}f}"


def duration_text(seconds: float) -> str:
    """A time in the unit that people would use."""
    if seconds < 120.0:
        return f"{seconds:.0f} s"
    if seconds < 7200.0:
        return f"{seconds / 60.0:.0f} min"
    return f"{seconds / 3600.0:.1f} h".replace(".0 h", " h")


def moment_text(moment: np.datetime64) -> str:
    """A moment, to the minute."""
    return f"{str(moment)[:16].replace('T', ' ')} UTC"


def listed(names: Sequence[str]) -> str:
    """Names as a list in a sentence; more than four are counted."""
    if len(names) > 4:
        return f"{', '.join(names[:3])} and {len(names) - 3} more"
    return " and ".join(filter(None, [", ".join(names[:-1]), *names[-1:]]))


def as_record(reference: Reference) -> dict[str, str | int]:
    """A record as evidence names it."""
    return {
        "kind": reference.kind,
        "id": reference.id,
        "tag": reference.tag,
        "revision": reference.revision,
    }


def number(value: float) -> float | None:
    """A number of ten figures, or None where there is none."""
    return float(f"{value:.10g}") if math.isfinite(value) else None
