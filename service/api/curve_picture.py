"""The course of a case as a picture: axes, course, marks, what happens, and what it rests on."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from typing import Final

from service.api.svg import (
    Drawn,
    Flag,
    element,
    flags,
    line,
    path,
    picture,
    round_step,
    shortened,
    spread,
    ticks,
    words,
    wrapped,
)
from service.audit.assessment import METHOD_VERSION, Case, Mark
from service.audit.curve import Curve, Point
from service.audit.hazards import FLAMMABLE, OXYGEN_HIGH, OXYGEN_LOW
from service.audit.releases import OVERFILL
from service.changes.answers import BEHIND, RECALCULATING
from service.changes.cautions import CAUTIONS
from service.changes.curve import CourseOfRoom
from service.physics.constants import OXYGEN_IN_AIR

_WIDTH: Final = 940.0
_LEFT: Final = 62.0
_RIGHT: Final = 722.0  # of the plot; beside it stand the names of the marks
_EDGE: Final = 24.0
_PLOT: Final = 300.0
_ROW: Final = 17.0
_TEXT: Final = 12.0
_LEAD_IN: Final = 0.03  # share of the width that shows the air before the release
_MARGIN: Final = 0.07  # share of the height that stays free above and below
_MOST_TICKS: Final = 9
_LONGEST_TAG: Final = 40
_NAMED: Final = 5
_MARK_LOOKS: Final = ("first", "second", "third")

# Longest course, seconds a unit, its name, and steps between ticks.
_UNITS: Final = (
    (180.0, 1.0, "s", (1.0, 2.0, 5.0, 10.0, 15.0, 30.0)),
    (10_800.0, 60.0, "min", (1.0, 2.0, 5.0, 10.0, 15.0, 30.0)),
    (float("inf"), 3600.0, "h", (1.0, 2.0, 3.0, 6.0, 12.0, 24.0, 48.0)),
)
_NOT_CURRENT: Final = {
    RECALCULATING: "The room is being recalculated: what it is judged by has changed since.",
    BEHIND: "Something has fallen due since, and the room is not judged by it yet.",
}
_MEASURES: Final = {
    "peak": "peak",
    "mean-15min": "15 min mean",
    "mean-8h": "8 h mean",
}

STYLE: Final = """
svg{--ground:#fdfcf9;--ink:#23272b;--quiet:#5b6167;--grid:#dedbd3;--course:#0b4a78}
@media (prefers-color-scheme:dark){svg{--ground:#17191c;--ink:#e9e7e2;--quiet:#a7abaf;
--grid:#34383c;--course:#93c9ef}}
text{font:12px system-ui,sans-serif;fill:var(--ink);paint-order:stroke;stroke:var(--ground);
stroke-width:3px;stroke-linejoin:round}
.ground{fill:var(--ground)}.head{font-size:17px;font-weight:600}.quiet{fill:var(--quiet)}
.strong{font-weight:600}line,polyline{fill:none;stroke:var(--ink);stroke-width:1}
.grid{stroke:var(--grid)}.lead{stroke:var(--quiet);stroke-width:.7}
.course{stroke:var(--course);stroke-width:2.6;stroke-linejoin:round}
.first{stroke-dasharray:9 4}.second{stroke-dasharray:9 3 2 3}.third{stroke-width:1.6}
.event{stroke-dasharray:2 3}.extreme{fill:var(--ground);stroke:var(--course);stroke-width:2.2}
"""


def curve_picture(course: CourseOfRoom, currency: str) -> bytes:
    """Draw a course, and say how current the assessment is that it belongs to."""
    case = course.curve.case
    flown = flags(list(_upright(course.curve)), _TEXT, _LEFT, _WIDTH - _EDGE)
    head = list(_head(course))
    top = 46.0 + _ROW * len(head)
    rows = 1 + max((flag.row for flag in flown), default=-1)
    plot = _Plot.of(course.curve, top + _ROW * rows + 7.0)
    foot = list(_foot(course, currency))
    below = plot.bottom + 62.0
    height = below + _ROW * len(foot) - 2.0
    title = _title(course)
    drawn: list[Drawn] = [
        element("rect", x=0.0, y=0.0, width=_WIDTH, height=height, class_="ground"),
        words(shortened(title, 88), _EDGE, 32.0, "head"),
        *_lines(head, 54.0, ""),
        *_axes(plot, course.curve),
        *_marks(plot, case),
        *_flags(plot, flown),
        path(plot.line(course.curve), "course"),
        *_extreme(plot, case),
        *_lines(foot, below, "quiet"),
    ]
    return picture(title, " ".join([*head, *foot]), STYLE, _WIDTH, height, drawn)


def _lines(texts: Sequence[str], y: float, look: str) -> Iterator[Drawn]:
    for number, text in enumerate(texts):
        yield words(text, _EDGE, y + _ROW * number, look)


def value_of(case: Case) -> Callable[[Point], float]:
    """Give what the hazard of a case is drawn by."""
    if case.hazard in (OXYGEN_LOW, OXYGEN_HIGH):
        return lambda point: point.oxygen_pct
    if case.hazard == FLAMMABLE:
        return lambda point: point.lower_limit_pct or 0.0
    return lambda point: point.gas_pct or 0.0


def _clean(case: Case) -> float:
    return 100.0 * OXYGEN_IN_AIR if case.hazard in (OXYGEN_LOW, OXYGEN_HIGH) else 0.0


@dataclass(frozen=True, slots=True)
class _Plot:
    """Where a time and a value lie on the paper."""

    top: float
    bottom: float
    low: float
    high: float
    ends: float
    value: Callable[[Point], float]

    @classmethod
    def of(cls, curve: Curve, top: float) -> _Plot:
        """Choose a range that holds the course, clean air, and the marks up to the next."""
        value = value_of(curve.case)
        shown = [mark.limit_pct for mark in shown_marks(curve.case)]
        values = [*map(value, (curve.before, *curve.points)), _clean(curve.case), *shown]
        least, most = min(values), max(values)
        spare = _MARGIN * (most - least or 1.0)
        low = least - spare if least > spare or curve.case.hazard == OXYGEN_LOW else 0.0
        return cls(top, top + _PLOT, max(low, 0.0), most + spare, curve.ends_s, value)

    def x(self, at: float) -> float:
        """Give the place of a time."""
        begins = _LEFT + _LEAD_IN * (_RIGHT - _LEFT)
        return begins + (_RIGHT - begins) * at / self.ends

    def y(self, value: float) -> float:
        """Give the place of a value."""
        return self.bottom - _PLOT * (value - self.low) / (self.high - self.low)

    def line(self, curve: Curve) -> Iterator[tuple[float, float]]:
        """Give the course, with the air before the release."""
        before = self.y(self.value(curve.before))
        yield _LEFT, before
        yield self.x(0.0), before
        for point in curve.points:
            yield self.x(point.at_s), self.y(self.value(point))


def shown_marks(case: Case) -> list[Mark]:
    """Marks that are drawn: those crossed, and the next."""
    worst = max((mark.place for mark in case.marks if mark.crossed), default=0)
    following = min((mark.place for mark in case.marks if mark.place > worst), default=worst)
    return [mark for mark in case.marks if mark.place <= max(worst, following)]


def _axes(plot: _Plot, curve: Curve) -> Iterator[Drawn]:
    step = round_step(plot.high - plot.low, _MOST_TICKS)
    for value in ticks(plot.low, plot.high, step):
        y = plot.y(value)
        yield line(_LEFT, y, _RIGHT, y, "grid")
        yield words(f"{value:.6g}", _LEFT - 8.0, y + 4.0, "", "end")
    seconds, unit, between = time_unit(curve.ends_s)
    for time in ticks(0.0, curve.ends_s / seconds, between):
        x = plot.x(time * seconds)
        yield line(x, plot.bottom, x, plot.bottom + 5.0, "")
        yield words(f"{time:.6g}", x, plot.bottom + 19.0, "", "middle")
    yield line(_LEFT, plot.bottom, _RIGHT, plot.bottom, "")
    yield line(_LEFT, plot.top, _LEFT, plot.bottom, "")
    middle = (plot.top + plot.bottom) / 2.0
    yield element(
        "g",
        words(_axis(curve.case), 0.0, 0.0, "quiet", "middle"),
        transform=f"translate(18 {middle:.1f}) rotate(-90)",
    )
    said = f"time since the release begins [{unit}]"
    yield words(said, (_LEFT + _RIGHT) / 2.0, plot.bottom + 36.0, "quiet", "middle")


def time_unit(ends: float) -> tuple[float, str, float]:
    """Give the seconds of the unit of the time axis, its name, and the step between ticks."""
    _, seconds, name, steps = next(unit for unit in _UNITS if ends <= unit[0])
    span = ends / seconds
    few = next((step for step in steps if span / step <= _MOST_TICKS), None)
    return seconds, name, few or round_step(span, _MOST_TICKS)


def _axis(case: Case) -> str:
    if case.hazard in (OXYGEN_LOW, OXYGEN_HIGH):
        return "oxygen [% by volume]"
    if case.hazard == FLAMMABLE:
        return "share of the lower flammable limit [%]"
    return f"{_plain(case.gas)} [% by volume]"


def _marks(plot: _Plot, case: Case) -> Iterator[Drawn]:
    marks = shown_marks(case)
    heights = [plot.y(mark.limit_pct) for mark in marks]
    beside = spread(heights, _ROW, plot.top + 4.0, plot.bottom)
    for mark, y, label in zip(marks, heights, beside, strict=True):
        yield line(_LEFT, y, _RIGHT, y, _MARK_LOOKS[mark.place - 1])
        yield line(_RIGHT, y, _RIGHT + 12.0, label, "lead")
        look = "strong" if mark.crossed else ""
        yield words(_mark(mark, case), _RIGHT + 16.0, label + 4.0, look)


def _mark(mark: Mark, case: Case) -> str:
    name = _mark_name(mark, case)
    return f"{name}, crossed" if mark.crossed else name


def _mark_name(mark: Mark, case: Case) -> str:
    if case.hazard == FLAMMABLE:
        return f"{_short(mark.limit_pct)} % of the limit"
    if mark.limit.startswith("oxygen_") and mark.measure == "oxygen":
        place = mark.limit.removeprefix("oxygen_").removesuffix("_pct")
        name = place if place.isalpha() else "oxygen"
        return f"{name} {_short(mark.limit_pct)} %"
    return f"{_MEASURES.get(mark.measure, mark.measure)} {_short(mark.limit_pct)} %"


def _upright(curve: Curve) -> Iterator[tuple[float, str]]:
    """What happens, where along the axis it stands, and what is said of it."""
    begins = _LEFT + _LEAD_IN * (_RIGHT - _LEFT)

    def x(at: float) -> float:
        return begins + (_RIGHT - begins) * at / curve.ends_s

    if curve.alarm is not None and curve.alarm.at_s <= curve.ends_s:
        tag = shortened(curve.alarm.detector.tag, 16)
        yield x(curve.alarm.at_s), f"alarm of {tag} {duration(curve.alarm.at_s)}"
    if curve.out_s is not None and curve.out_s <= curve.ends_s:
        yield x(curve.out_s), f"people out {duration(curve.out_s)}"
    back = curve.case.recovered_s
    if back is not None and back > 0.0:
        yield x(back), f"back inside the first mark {duration(back)}"


def _flags(plot: _Plot, flown: Sequence[Flag]) -> Iterator[Drawn]:
    for flag in flown:
        y = plot.top - 9.0 - _ROW * flag.row
        yield line(flag.x, y - 9.0, flag.x, plot.bottom, "event")
        yield words(flag.text, flag.begins, y, "")


def _extreme(plot: _Plot, case: Case) -> Iterator[Drawn]:
    extreme = _worst_value(case)
    x, y = plot.x(case.at_s), plot.y(extreme)
    below = case.hazard == OXYGEN_LOW
    leftward = x > (_LEFT + _RIGHT) / 2.0
    yield element("circle", cx=x, cy=y, r=4.0, class_="extreme")
    yield words(
        f"{'lowest' if below else 'highest'} {_short(extreme)} %",
        x + (-9.0 if leftward else 9.0),
        min(y + 16.0, plot.bottom - 4.0) if below else y - 9.0,
        "strong",
        "end" if leftward else "start",
    )


def _worst_value(case: Case) -> float:
    if case.hazard in (OXYGEN_LOW, OXYGEN_HIGH):
        return case.oxygen_pct
    found = case.lower_limit_pct if case.hazard == FLAMMABLE else case.peak_pct
    return found or 0.0


def _title(course: CourseOfRoom) -> str:
    case = course.curve.case
    tag = shortened(course.room.record.tag, _LONGEST_TAG)
    gas = "oxygen" if case.hazard in (OXYGEN_LOW, OXYGEN_HIGH) else _plain(case.gas)
    return f"{tag}: {case.release}, airflow {case.airflow}, {gas}"


def _head(course: CourseOfRoom) -> Iterator[str]:
    """Say in words what the picture shows."""
    yield from wrapped(_sentence(course.curve), _TEXT, _WIDTH - 2 * _EDGE)
    yield from wrapped(_let_go(course.curve.case), _TEXT, _WIDTH - 2 * _EDGE)


def _sentence(curve: Curve) -> str:
    case = curve.case
    when = "at once" if case.at_s == 0.0 else f"after {duration(case.at_s)}"
    oxygen = f"{_short(case.oxygen_pct)} % oxygen ({_short(case.oxygen_kpa)} kPa)"
    means = "".join(
        f", {name} {_short(mean)} %"
        for name, mean in (("15 min mean", case.mean_15min_pct), ("8 h mean", case.mean_8h_pct))
        if mean is not None
    )
    if case.hazard == OXYGEN_LOW:
        worst = f"Lowest {oxygen} {when}"
    elif case.hazard == OXYGEN_HIGH:
        worst = f"Highest {oxygen} {when}"
    elif case.hazard == FLAMMABLE:
        share = f"{_short(_worst_value(case))} % of the lower flammable limit"
        worst = f"Highest {share} {when}"
    else:
        worst = f"Highest {_short(_worst_value(case))} % {_plain(case.gas)} {when}{means}"
    return f"{worst}. {_afterwards(curve)} {_way_out(curve)}"


def _afterwards(curve: Curve) -> str:
    back = curve.case.recovered_s
    if curve.case.mark == 0:
        return "No mark is crossed."
    if back is None:
        return f"Not back inside the first mark within {duration(curve.ends_s)}."
    return f"Back inside the first mark after {duration(back)}."


def _way_out(curve: Curve) -> str:
    if curve.out_s is None:
        warned = "No alarm." if curve.case.mark > 0 else ""
        return f"{warned} Nothing warns people to leave." if warned else ""
    margin = curve.case.margin_s
    out = f"People are out after {duration(curve.out_s)}"
    if margin is None:
        return f"{out}."
    side = "before" if margin >= 0.0 else "after"
    return f"{out}, {duration(abs(margin))} {side} the second mark."


def _let_go(case: Case) -> str:
    tags = [vessel.tag for vessel in case.vessels]
    # Vessels that would do alike are one case of overfilling, for any one of them.
    which = "any one of " if case.release == OVERFILL and len(tags) > 1 else ""
    named = f" from {which}{_some(tags)}" if tags else ""
    return f"Let go: {_some(case.fluids)}{named}."


def _some(names: Sequence[str]) -> str:
    """Name the first of many."""
    told = ", ".join(shortened(name, _LONGEST_TAG) for name in names[:_NAMED])
    return f"{told} and {len(names) - _NAMED} more" if len(names) > _NAMED else told


def _foot(course: CourseOfRoom, currency: str) -> Iterator[str]:
    assessment = course.assessment
    basis = course.room.basis.record.tag
    assessed = assessment.assessed_at.strftime("%Y-%m-%d %H:%M:%S UTC")
    rests = (
        f"Basis {shortened(basis, _LONGEST_TAG)}, revision {assessment.basis_revision}; position "
        f"{assessment.from_position}, assessed {assessed}; computed by method {METHOD_VERSION}."
    )
    for text in (rests, _NOT_CURRENT.get(currency, ""), course.note or "", CAUTIONS):
        yield from wrapped(text, _TEXT, _WIDTH - 2 * _EDGE)


def duration(seconds: float) -> str:
    """Say a time in the unit that fits it."""
    for longest, unit, name, _ in _UNITS:
        if seconds <= longest:
            return f"{_short(seconds / unit)} {name}"
    raise ValueError("A time is a number.")


def _short(value: float) -> str:
    """Write a number in three figures, and never with an exponent."""
    figures = f"{value:.3g}"
    return figures if "e" not in figures else f"{value:.0f}" if value >= 1.0 else f"{value:.6f}"


def _plain(slug: str) -> str:
    return slug.replace("-", " ")
