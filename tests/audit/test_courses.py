"""Whole cases of random rooms against a numerical integrator of the balance of gas.

SciPy's DOP853 (rtol 1e-11) integrates V dx/dt = x0 F + B - W x, with F = max(Qs, Qe - R) of fresh
air, W = max(Qs + R, Qe) of outflow (methods D0), R the gas let go and B what counts of it; beside
it the integral of x, for means (E2), and the reading y of a sensor, tau dy/dt = x - y (M1).
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass, field, replace
from math import log

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from tests.audit.builders import (
    ARGON,
    CARBON_DIOXIDE,
    LATER,
    NITROGEN,
    OXYGEN,
    PER_DAY,
    PER_HOUR,
    a_basis,
    a_detector,
    a_fluid,
    a_room,
    a_unit,
    a_vessel,
    case_of,
    some_ice,
)

GAS_CONSTANT = 8.314_462_618  # [J/(mol K)] CODATA
FRESH = 0.2095
MIXTURE = a_fluid("mixture", molar_mass=0.0280135, condensed_density=806.08, oxygen_fraction=0.08)
SUSTAINED_H = 30.0
CLOSE = 1e-6
SEEDS = [
    0,
    *(pytest.param(seed, marks=pytest.mark.slow) for seed in range(1, 12)),
]


@dataclass(frozen=True)
class Piece:
    """Steady flows for some time, in m3/s."""

    seconds: float
    release: float
    counted: float  # oxygen or toxic gas brought
    supply: float
    exhaust: float


@dataclass
class Integrated:
    """A room stepped through by the integrator."""

    volume: float
    clean: float  # of what is integrated, in outdoor air
    start: float
    pieces: list[Piece]
    constant: float = 1e6  # of the sensor [s]; a quick one makes the steps small
    read_at_start: float | None = None
    runs: list = field(default_factory=list)

    def __post_init__(self):
        state = [self.start, 0.0, self.clean if self.read_at_start is None else self.read_at_start]
        begins = 0.0
        for piece in self.pieces:
            if piece.seconds <= 0.0:
                continue
            fresh = max(piece.supply, piece.exhaust - piece.release)
            leaving = max(piece.supply + piece.release, piece.exhaust)

            def balance(_, now, fresh=fresh, leaving=leaving, piece=piece):
                inside = self.clean * fresh + piece.counted - leaving * now[0]
                return [inside / self.volume, now[0], (now[0] - now[2]) / self.constant]

            found = solve_ivp(
                balance,
                (begins, begins + piece.seconds),
                state,
                "DOP853",
                rtol=1e-11,
                atol=1e-14,
                dense_output=True,
            )
            assert found.success
            self.runs.append((begins, begins + piece.seconds, found.sol))
            state, begins = found.y[:, -1], begins + piece.seconds

    def many(self, times, part):
        """Values at many times; after the end the last one."""
        times = np.minimum(times, self.joints[-1])
        found = np.empty(times.shape)
        for begins, ends, solution in self.runs:
            here = (times >= begins) & (times <= ends)
            if here.any():
                found[here] = solution(times[here])[part]
        return found

    def at(self, time, part=0):
        return float(self.many(np.array([time]), part)[0])

    @property
    def joints(self):
        return [0.0, *(ends for _, ends, _ in self.runs)]

    def extreme(self, sign):
        """Value and time; within a piece the course is monotone."""
        values = [sign * self.at(time) for time in self.joints]
        place = int(np.argmax(values))
        return sign * values[place], self.joints[place]

    def first(self, level, sign, part=0):
        """When the level is first passed, or None."""
        for begins, ends, solution in self.runs:
            times = np.linspace(begins, ends, 400)
            above = np.flatnonzero(sign * (solution(times)[part] - level) > 0.0)
            if above.size:
                if above[0] == 0:
                    return begins
                return brentq(
                    lambda time, sol=solution: sol(time)[part] - level,
                    times[above[0] - 1],
                    times[above[0]],
                    xtol=1e-9,
                )
        return None

    def back(self, level, sign):
        """When the level is last passed on the way back, or None."""
        if sign * (self.at(self.joints[-1]) - level) > 0.0:
            return None
        for begins, ends, solution in reversed(self.runs):
            if sign * (float(solution(begins)[0]) - level) > 0.0:
                return brentq(lambda time, sol=solution: sol(time)[0] - level, begins, ends)
        return 0.0

    def mean(self, window):
        """Highest mean of any window of a length."""
        latest = max(self.joints[-1] - window, 0.0)

        def mean_from(times):
            return (self.many(times + window, 1) - self.many(times, 1)) / window

        times = np.unique(
            np.clip(
                [*np.linspace(0.0, latest, 300), *self.joints, *(t - window for t in self.joints)],
                0.0,
                latest,
            )
        )
        values = mean_from(times)
        best = int(np.argmax(values))
        low, high = times[max(best - 1, 0)], times[min(best + 1, times.size - 1)]
        finer = mean_from(np.linspace(low, high, 3000))
        return max(values[best], float(finer.max()))


def density_of_gas(room, fluid):
    """Cubic metres of gas a kilogram in the room."""
    return GAS_CONSTANT * room.temperature / (room.station_pressure * fluid.molar_mass)


def counted_air(units, *, boosted=False):
    """Supply and exhaust that count, in m3/s: outdoor share, share of the room, mixing factor."""
    supply = exhaust = 0.0
    for unit in units:
        moved = max(unit.measured_flow, unit.boost_flow or 0.0) if boosted else unit.measured_flow
        flow = moved * unit.outdoor_air_fraction * unit.share / unit.mixing_factor
        supply += flow if unit.arrangement in ("supply", "balanced") else 0.0
        exhaust += flow if unit.arrangement in ("exhaust", "balanced") else 0.0
    return supply, exhaust


def some_units(random, most=60.0):
    return tuple(
        a_unit(
            random.uniform(2, most),
            tag=f"U{place}",
            arrangement=str(random.choice(["supply", "exhaust", "balanced"])),
            outdoor_air_fraction=random.uniform(0.2, 1.0),
            share=random.uniform(0.3, 1.0),
            mixing_factor=random.uniform(1.0, 4.0),
        )
        for place in range(random.integers(1, 4))
    )


def a_random_room(random, **fields):
    """No natural air, so that only the units count."""
    return a_room(
        random.uniform(15, 150),
        kind="pit",
        temperature=random.uniform(276, 303),
        station_pressure=random.uniform(70e3, 104e3),
        units=some_units(random),
        basis=a_basis(sustained_h=SUSTAINED_H),
        **fields,
    )


def some_vessels(random, fluids=(NITROGEN, ARGON, MIXTURE, OXYGEN)):
    """Vessels that run out at times of their own, and some that go on."""
    return tuple(
        a_vessel(
            litres,
            fluids[random.integers(len(fluids))],
            tag=f"V{place}",
            measured_evaporation=litres * random.uniform(0.3, 4.0) * PER_DAY,
            use=random.uniform(0.0, 3.0) * PER_DAY,
            filled_by=str(random.choice(["exchanged", "attended"])),
            fill_flow=random.uniform(1e-4, 1e-3),
        )
        for place, litres in enumerate(random.uniform(3, 60, random.integers(2, 6)))
    )


def some_boxes(random):
    return tuple(
        some_ice(mass, measured_loss=mass * random.uniform(0.02, 0.3) / 3600, mobile=False)
        for mass in random.uniform(2, 40, random.integers(1, 4))
    )


def evaporating(room, vessels, supply, exhaust, *, toxic=False):
    """Pieces between the times at which anything runs out."""
    sources = []
    for vessel in vessels:
        fluid = vessel.fluid
        if vessel.measured_loss is not None:
            mass_rate, held = vessel.measured_loss, vessel.capacity_mass
        else:
            mass_rate = (vessel.measured_evaporation + vessel.use) * fluid.condensed_density
            held = vessel.capacity_volume * fluid.condensed_density
        goes_on = vessel.filled_by != "exchanged"
        lasts = np.inf if goes_on else held / mass_rate
        sources.append((mass_rate * density_of_gas(room, fluid), lasts, fluid.oxygen_fraction))
    end = SUSTAINED_H * 3600
    joints = sorted({0.0, end, *(lasts for _, lasts, _ in sources if lasts < end)})
    pieces = []
    for begins, ends in itertools.pairwise(joints):
        going = [(rate, own) for rate, lasts, own in sources if lasts > begins]
        release = sum(rate for rate, _ in going)
        counted = release if toxic else sum(rate * own for rate, own in going)
        pieces.append(Piece(ends - begins, release, counted, supply, exhaust))
    return pieces


@pytest.mark.parametrize("seed", SEEDS)
def test_evaporation_of_vessels_that_run_out_one_after_another(seed):
    random = np.random.default_rng(seed)
    vessels = (
        *some_vessels(random),
        a_vessel(20, tag="poor", measured_evaporation=60 * PER_DAY, use=0.0),
    )
    room = a_random_room(random, vessels=vessels)
    air = counted_air(room.units)
    for hazard, sign in (("oxygen-low", -1.0), ("oxygen-high", 1.0)):
        mine = [
            vessel for vessel in vessels if (vessel.fluid.oxygen_fraction > FRESH) is (sign > 0)
        ]
        if not mine:
            continue
        run = Integrated(room.gross_volume, FRESH, FRESH, evaporating(room, mine, *air))
        case = case_of(room, "boil-off", hazard=hazard)
        worst, when = run.extreme(sign)
        assert case.oxygen_pct == pytest.approx(100 * worst, rel=CLOSE)
        if abs(worst - run.at(when - 1.0)) > 1e-9:
            assert case.at_s == pytest.approx(when, rel=CLOSE)
        limit = 0.195 if sign < 0 else 0.23
        assert (case.mark > 0) is (sign * (worst - limit) > 0)
        if case.mark:
            passed, back = run.first(limit, sign), run.back(limit, sign)
            assert case.marks[0].at_s == pytest.approx(passed, rel=CLOSE)
            assert (case.recovered_s is None) is (back is None)
            if back is not None:
                assert case.recovered_s == pytest.approx(back, rel=CLOSE)


@pytest.mark.parametrize("seed", SEEDS)
def test_carbon_dioxide_and_its_means(seed):
    random = np.random.default_rng(100 + seed)
    boxes = some_boxes(random)
    # Of another gas, which is to dilute none of it.
    room = a_random_room(random, vessels=(*boxes, *some_vessels(random)))
    pieces = evaporating(room, boxes, *counted_air(room.units), toxic=True)
    run = Integrated(room.gross_volume, 0.0, 0.0005, pieces)
    case = case_of(room, "boil-off", hazard="toxic")
    assert case.peak_pct == pytest.approx(100 * run.extreme(1.0)[0], rel=CLOSE)
    assert case.mean_15min_pct == pytest.approx(100 * run.mean(900.0), rel=CLOSE)
    assert case.mean_8h_pct == pytest.approx(100 * run.mean(28_800.0), rel=CLOSE)
    assert case.gas_m3 == pytest.approx(
        sum(piece.release * piece.seconds for piece in pieces), rel=CLOSE
    )


def session(room, vessels, supply, exhaust):
    """Filling one after another, the slowest first, and then nothing."""
    parts = sorted(
        (
            0.1
            * vessel.fill_flow
            * vessel.fluid.condensed_density
            * density_of_gas(room, vessel.fluid),
            vessel.capacity_volume / vessel.fill_flow,
        )
        for vessel in vessels
        if vessel.filled_by != "exchanged"
    )
    pieces = [Piece(seconds, rate, 0.0, supply, exhaust) for rate, seconds in parts]
    rest = SUSTAINED_H * 3600 - sum(piece.seconds for piece in pieces)
    return [*pieces, Piece(rest, 0.0, 0.0, supply, exhaust)]


@pytest.mark.parametrize("seed", SEEDS)
def test_a_session_of_filling(seed):
    random = np.random.default_rng(200 + seed)
    vessels = (
        *some_vessels(random, fluids=(NITROGEN, ARGON)),
        a_vessel(40, tag="filled", filled_by="attended", fill_flow=3e-4),
    )
    room = a_random_room(random, vessels=vessels)
    pieces = session(room, vessels, *counted_air(room.units))
    run = Integrated(room.gross_volume, FRESH, FRESH, pieces)
    case = case_of(room, "filling")
    assert case.oxygen_pct == pytest.approx(100 * run.extreme(-1.0)[0], rel=CLOSE)
    if case.mark:
        assert case.to_deficient_s == pytest.approx(run.first(0.195, -1.0), rel=CLOSE)
        assert case.recovered_s == pytest.approx(run.back(0.195, -1.0), rel=CLOSE)


def watched(random, room, **fields):
    """A detector at a height where the gas goes, with a lag and a delay of its own."""
    detector = a_detector(
        t90=random.uniform(5, 300), delay=random.uniform(0, 120), alarms=(19.5,), **fields
    )
    return replace(room, detectors=(detector,)), detector


def alarm_of(run, detector):
    return run.first(0.195, -1.0, part=2) + detector.delay


def level_to_be_out_by(pressure):
    """Danger; where that is as early as deficient, halfway to critical (judging 3 and 4)."""
    danger = min(0.195, max(0.18, 18_000 / pressure))
    critical = min(danger, max(0.10, 10_130 / pressure))
    return danger if danger < 0.195 else (0.195 + critical) / 2


@pytest.mark.parametrize("seed", SEEDS)
def test_what_a_detector_reads_and_the_boost_it_starts(seed):
    random = np.random.default_rng(300 + seed)
    vessels = (
        *some_vessels(random, fluids=(NITROGEN, ARGON)),
        a_vessel(500, tag="large", measured_evaporation=300 * PER_DAY, use=0.0),
    )
    room = a_random_room(random, vessels=vessels)
    boosted = tuple(
        replace(
            unit,
            boost_flow=unit.measured_flow * random.uniform(2, 10),
            boost_trigger="detector-D-1",
        )
        if place == 0
        else unit
        for place, unit in enumerate(room.units)
    )
    room, detector = watched(random, replace(room, units=boosted))
    before, after = counted_air(boosted), counted_air(boosted, boosted=True)
    tau = detector.t90 / log(10)
    pieces = evaporating(room, vessels, *before)
    plain = Integrated(room.gross_volume, FRESH, FRESH, pieces, tau)
    measured = case_of(room, "boil-off")
    assert measured.mark > 0
    alarm = alarm_of(plain, detector)
    assert measured.alarm_s == pytest.approx(alarm, rel=CLOSE)
    second = plain.first(level_to_be_out_by(room.station_pressure), -1.0)
    assert (measured.margin_s is None) is (second is None)
    if second is not None:
        assert measured.margin_s == pytest.approx(second - alarm - 35, abs=1e-2)
    cut = []
    elapsed = 0.0
    for piece in pieces:
        first = min(max(alarm - elapsed, 0.0), piece.seconds)
        cut.append(replace(piece, seconds=first))
        cut.append(replace(piece, seconds=piece.seconds - first, supply=after[0], exhaust=after[1]))
        elapsed += piece.seconds
    run = Integrated(room.gross_volume, FRESH, FRESH, cut, tau)
    case = case_of(room, "boil-off", "boosted")
    assert case.oxygen_pct == pytest.approx(100 * run.extreme(-1.0)[0], rel=CLOSE)
    assert case.to_deficient_s == pytest.approx(measured.to_deficient_s, rel=1e-9)
    back = run.back(0.195, -1.0)
    assert (case.recovered_s is None) is (back is None)
    if back is not None:
        assert case.recovered_s == pytest.approx(back, rel=CLOSE)


@pytest.mark.parametrize("seed", SEEDS)
def test_an_overfill_from_the_worst_of_what_evaporates(seed):
    random = np.random.default_rng(400 + seed)
    flow, closes = random.uniform(5e-5, 5e-4), random.uniform(30, 1200)
    freezer = a_vessel(
        200,
        tag="freezer",
        use=0.0,
        measured_evaporation=random.uniform(1, 30) * PER_DAY,
        filled_by="automatic",
        fill_flow=flow,
        independent_high_level=True,
        closes_in=closes,
        shut_off_test_due=LATER,
    )
    vessels = (*some_vessels(random, fluids=(NITROGEN,)), freezer)
    room, detector = watched(random, a_random_room(random, vessels=vessels))
    air = counted_air(room.units)
    before = Integrated(room.gross_volume, FRESH, FRESH, evaporating(room, vessels, *air))
    start = before.extreme(-1.0)[0]
    rate = flow * 806.08 * density_of_gas(room, NITROGEN)
    pieces = [
        Piece(closes, rate, 0.0, *air),
        Piece(SUSTAINED_H * 3600 - closes, 0.0, 0.0, *air),
    ]
    tau = detector.t90 / log(10)
    run = Integrated(room.gross_volume, FRESH, start, pieces, tau)
    case = case_of(room, "overfill")
    assert case.oxygen_pct == pytest.approx(100 * run.extreme(-1.0)[0], rel=CLOSE)
    if case.mark:
        read = run.first(0.195, -1.0, part=2)
        assert (case.alarm_s is None) is (read is None)
        if read is not None:
            assert case.alarm_s == pytest.approx(read + detector.delay, rel=CLOSE)
        back = run.back(0.195, -1.0)
        assert (case.recovered_s is None) is (back is None)
        if back is not None:
            assert case.recovered_s == pytest.approx(back, rel=CLOSE)


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("arrangement", ["supply", "exhaust"])
def test_the_air_required_just_holds_the_course_and_its_means(seed, arrangement):
    """Integrated with that air counted, each comes to its first mark and not beyond."""
    random = np.random.default_rng(500 + seed)
    boxes = some_boxes(random)
    vessels = (a_vessel(300, tag="large", measured_evaporation=150 * PER_DAY, use=0.0), *boxes)
    room = replace(
        a_random_room(random, vessels=vessels),
        units=(a_unit(1.0, arrangement=arrangement, mixing_factor=2.0),),
    )

    def with_air(moved):
        counted = moved / 2.0 * PER_HOUR
        return (counted, 0.0) if arrangement == "supply" else (0.0, counted)

    low, toxic = (case_of(room, "boil-off", hazard=each) for each in ("oxygen-low", "toxic"))
    run = Integrated(
        room.gross_volume, FRESH, FRESH, evaporating(room, vessels, *with_air(low.required_m3_h))
    )
    assert run.extreme(-1.0)[0] == pytest.approx(0.195, rel=CLOSE)
    pieces = evaporating(room, boxes, *with_air(toxic.required_m3_h), toxic=True)
    means = Integrated(room.gross_volume, 0.0, 0.0005, pieces).mean(28_800.0)
    if toxic.required_m3_h > 0.0:
        assert means == pytest.approx(0.005, rel=CLOSE)
    else:
        assert means < 0.005


@pytest.mark.parametrize("seed", SEEDS)
def test_the_air_to_restore_has_the_room_back_within_the_hour(seed):
    """From the lowest point, with nothing more let go (methods D4)."""
    random = np.random.default_rng(600 + seed)
    vessels = (a_vessel(60, measured_evaporation=0.0), *some_boxes(random))
    room = replace(a_random_room(random, vessels=vessels), units=(a_unit(30.0),))
    for release, hazard, clean, limit in (
        ("largest-vessel", "oxygen-low", FRESH, 0.195),
        ("boil-off", "toxic", 0.0, 0.005),
    ):
        case = case_of(room, release, hazard=hazard)
        worst = case.oxygen_pct / 100 if clean else case.peak_pct / 100
        air = case.restore_m3_h / 3.0 * PER_HOUR
        run = Integrated(room.gross_volume, clean, worst, [Piece(3600.0, 0.0, 0.0, 0.0, air)])
        # A mean may hold although the fraction is beyond for a while.
        if (worst < limit) if clean else (worst > limit):
            assert run.at(3600.0) == pytest.approx(limit, rel=CLOSE)
        else:
            assert case.restore_m3_h == 0.0


def test_the_integrator_itself_agrees_with_the_printed_values():
    """Methods D-10 and E-2: what it is trusted with, it can do."""
    steps = ((300, 0.10), (600, 0.03), (900, 0.0))
    run = Integrated(
        100.0, FRESH, FRESH, [Piece(seconds, rate, 0.0, 0.0, 0.2) for seconds, rate in steps]
    )
    assert [run.at(time) for time in run.joints[1:]] == pytest.approx(
        [0.162238, 0.173305, 0.203517], abs=1e-6
    )
    box = Integrated(40.0, 0.0, 0.0, [Piece(28_800, 75.510e-6, 75.510e-6, 0.0, 40 / 3600)])
    assert box.at(900, 1) / 900 == pytest.approx(783e-6, rel=5e-3)
    assert box.at(28_800, 1) / 28_800 == pytest.approx(5947e-6, rel=5e-3)


def test_carbon_dioxide_is_counted_for_the_oxygen_with_all_that_is_poorer():
    """Ice and nitrogen together lower the oxygen; each is a share of one release (methods E)."""
    random = np.random.default_rng(7)
    boxes = some_boxes(random)
    vessels = (a_vessel(60, measured_evaporation=60 * PER_DAY, use=0.0), *boxes)
    room = a_random_room(random, vessels=vessels)
    pieces = evaporating(room, vessels, *counted_air(room.units))
    run = Integrated(room.gross_volume, FRESH, FRESH, pieces)
    case = case_of(room, "boil-off")
    assert CARBON_DIOXIDE.record.tag in case.fluids
    assert case.oxygen_pct == pytest.approx(100 * run.extreme(-1.0)[0], rel=CLOSE)
