"""Pairs of rooms for the rules on accidents, on layers, on supply lines and on magnets."""

from __future__ import annotations

from datetime import timedelta
from typing import Any

from service.audit.inputs import FluidValues, PitValues, RoomValues
from tests.audit.builders import (
    CARBON_DIOXIDE,
    HELIUM,
    HYDROGEN,
    LATER,
    METHANE,
    NITROGEN,
    NITROUS_OXIDE,
    NOW,
    OXYGEN,
    a_detector,
    a_line,
    a_magnet,
    a_room,
    a_shut_line,
    a_vessel,
)
from tests.audit.pairs import Pair

SECOND = timedelta(seconds=1)
TOXIC = (("carbon-dioxide", CARBON_DIOXIDE), ("nitrous-oxide", NITROUS_OXIDE))


def tipped(litres: float, fluid: FluidValues = NITROGEN) -> RoomValues:
    """A room of 100 m3 with a dewar that can tip."""
    return a_room(100, vessels=(a_vessel(litres, fluid, mobile=True, measured_evaporation=0.0),))


def leaking(litres: float, fluid: FluidValues = NITROGEN, **fields: Any) -> RoomValues:
    """A room of 100 m3 without any air of its own, and a vessel with a vacuum in it."""
    vessel = a_vessel(
        litres, fluid, insulation="vacuum-powder", measured_evaporation=0.0, cold_area=None
    )
    return a_room(100, vessels=(vessel,), kind="walk-in", **fields)


def broken(kilograms: float, fluid: FluidValues = NITROGEN, **fields: Any) -> RoomValues:
    """A walk-in room of 100 m3 with a line from a vessel outdoors that holds so much."""
    outdoors = a_vessel(1, fluid, capacity_volume=None, capacity_mass=kilograms, kind="tank")
    line = a_line(fluid=fluid, source=outdoors, **fields)
    return a_room(100, kind="walk-in", lines=(line,))


def quenching(litres: float, fluid: FluidValues = HELIUM) -> RoomValues:
    """A room of 100 m3 with a magnet that has no pipe."""
    return a_room(100, vessels=(a_magnet(litres, fluid),))


# Deficient by displacement at a share of 1 - 19.5 / 20.95 = 0.0692 of 100 m3 (methods C): 6.92 m3
# are 10.00 L of nitrogen, 9.23 L of helium (methods A1). Enriched at (23 - 20.95) / (100 - 20.95):
# 2.593 m3 are 3.02 L of oxygen. Nitrous oxide counts from 5 %: 5 m3 are 7.48 L. By mass 6.92 m3
# of nitrogen are 8.06 kg, 2.593 m3 of oxygen 3.45 kg. A line that flows into a room without air
# empties its source soon, and mixes while it displaces: 1 - exp(-x), so 7.17 m3 and 8.35 kg.
ACCIDENTS = (
    Pair("enrichment/spill", tipped(2.97, OXYGEN), tipped(3.08, OXYGEN), "minor"),
    Pair("toxic/spill", tipped(7.3, NITROUS_OXIDE), tipped(7.6, NITROUS_OXIDE), "major",
         "nitrous-oxide"),
    Pair("flammable/spill", tipped(0.1, METHANE), tipped(20, METHANE), "critical"),
    Pair("oxygen/vacuum-loss", leaking(10.2), leaking(10.6), "minor"),
    Pair("enrichment/vacuum-loss", leaking(2.9, OXYGEN), leaking(3.3, OXYGEN), "minor"),
    *(
        Pair("toxic/vacuum-loss", leaking(0.01, fluid), leaking(50, fluid), worst, gas)
        for gas, fluid, worst in (
            ("carbon-dioxide", CARBON_DIOXIDE, "critical"),
            ("nitrous-oxide", NITROUS_OXIDE, "major"),
        )
    ),
    Pair("flammable/vacuum-loss", leaking(0.1, HYDROGEN), leaking(20, HYDROGEN), "critical"),
    Pair("oxygen/line-break", broken(8.3), broken(8.4), "minor"),
    Pair("enrichment/line-break", broken(3.4, OXYGEN), broken(3.6, OXYGEN), "minor"),
    *(
        Pair("toxic/line-break", broken(0.01, fluid), broken(90, fluid), "critical", gas)
        for gas, fluid in TOXIC
    ),
    Pair("flammable/line-break", broken(0.05, METHANE), broken(50, METHANE), "critical"),
    Pair("oxygen/quench", quenching(9.15), quenching(9.3), "minor"),
    Pair("enrichment/quench", quenching(2.97, OXYGEN), quenching(3.08, OXYGEN), "minor"),
    *(
        Pair("toxic/quench", quenching(0.01, fluid), quenching(90, fluid), "critical", gas)
        for gas, fluid in TOXIC
    ),
    Pair("flammable/quench", quenching(0.1, HYDROGEN), quenching(20, HYDROGEN), "critical"),
)  # fmt: skip


def with_pit(litres: float, **fields: Any) -> RoomValues:
    """A room of 500 m3 with a pit of 3 m3, and a dewar that can let go into it."""
    defaults: dict[str, Any] = {
        "vessels": (a_vessel(litres, measured_evaporation=0.0),),
        "pit": PitValues(2.0, 1.5, entered=True),
    }
    return a_room(500, **{**defaults, **fields})


def with_layer(litres: float, fluid: FluidValues = NITROGEN, **fields: Any) -> RoomValues:
    """A room of 500 m3 and 5 m high: 30 % of it is below breathing height, 70 % above."""
    vessel = a_vessel(litres, fluid, measured_evaporation=0.0)
    return a_room(500, floor_area=100.0, height=5.0, vessels=(vessel,), **fields)


# Methods F-3: 4.34 L of nitrogen fill 3 m3 as warm gas. The zone below 1.5 m has 150 m3, of which
# 6.92 % are 10.38 m3 or 15.0 L; that above it has 350 m3, 24.2 m3 or 32.3 L of helium.
LAYERS = (
    Pair("layering/pit", with_pit(4.32), with_pit(4.36), "critical"),
    Pair("layering/floor", with_layer(14.9), with_layer(15.2), "minor"),
    Pair("layering/ceiling", with_layer(32.0, HELIUM), with_layer(32.6, HELIUM), "minor"),
)


def with_line(**fields: Any) -> RoomValues:
    """A room with a line that is shut by an excess flow and restricted, but for what is said."""
    return a_room(500, lines=(a_shut_line(**fields),))


def with_its_detector(**fields: Any) -> RoomValues:
    """A room whose detector shuts a line."""
    detector = a_detector(**fields)
    line = a_shut_line(trigger=detector.record.id)
    return a_room(500, lines=(line,), detectors=(detector,))


LINES = (
    Pair(
        "supply-lines/shut-off-missing",
        with_line(),
        a_room(500, lines=(a_line(restrictor=0.01),)),
        "observation",
    ),
    Pair(
        "supply-lines/shut-off-sees-no-break",
        with_line(),
        with_line(trigger="high-level"),
        "observation",
    ),
    Pair(
        "supply-lines/shut-off-trigger",
        with_its_detector(),
        with_its_detector(state="fault"),
        "minor",
    ),
    Pair(
        "supply-lines/shut-off-fails-open",
        with_line(),
        with_line(fails_closed=None),
        "minor",
    ),
    Pair(
        "supply-lines/shut-off-untested",
        with_line(shut_off_test_due=NOW + SECOND),
        with_line(shut_off_test_due=NOW),
        "minor",
    ),
    Pair(
        "supply-lines/unrestricted",
        with_line(),
        with_line(trigger="manual", restrictor=None),
        "observation",
    ),
)


def with_magnet(**quench: Any) -> RoomValues:
    """A large room with a magnet whose pipe is inspected and clear, but for what is said."""
    sound: dict[str, Any] = {
        "has_pipe": True,
        "pipe_inspected": True,
        "pipe_inspection_due": LATER,
        "outlet_clear": True,
    }
    return a_room(9000, vessels=(a_magnet(100, **{**sound, **quench}),))


MAGNETS = (
    Pair(
        "vessels/quench-not-recorded",
        with_magnet(),
        a_room(9000, vessels=(a_vessel(100, HELIUM, kind="magnet"),)),
        "observation",
    ),
    Pair("vessels/quench-pipe-missing", with_magnet(), with_magnet(has_pipe=False), "minor"),
    Pair("vessels/quench-pipe-blocked", with_magnet(), with_magnet(outlet_clear=False), "major"),
    Pair(
        "vessels/quench-outlet-unknown",
        with_magnet(),
        with_magnet(outlet_clear=None),
        "observation",
    ),
    Pair(
        "vessels/quench-pipe-inspection-overdue",
        with_magnet(pipe_inspection_due=NOW + SECOND),
        with_magnet(pipe_inspection_due=NOW),
        "minor",
    ),
    Pair(
        "vessels/quench-duration-missing", with_magnet(), with_magnet(duration=None), "observation"
    ),
)
