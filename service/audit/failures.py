"""Rooms whose numbers cannot be: why, as a sentence, before any formula sees them."""

from collections.abc import Callable, Iterator
from typing import Final

import numpy as np

from service.audit.columns import Columns
from service.physics.arrays import Floats, Integers, Mask
from service.physics.constants import ATMOSPHERE_HIGHEST, ATMOSPHERE_LOWEST
from service.physics.real_gas import HIGHEST_PRESSURE

Held = Callable[[Floats], Mask]

# What no record of a room can be, in any of the units met here; formulas would overflow beyond.
_SMALLEST: Final = 1e-9
_LARGEST: Final = 1e12


def failures(given: Columns) -> tuple[str | None, ...]:
    """Return for each room the first thing that makes it impossible to compute, or None."""
    sentences: list[str | None] = [None] * given.count
    for room, sentence in _found(given):
        if sentences[room] is None:
            sentences[room] = sentence
    return tuple(sentences)


def _found(given: Columns) -> Iterator[tuple[int, str]]:
    yield from _of_rooms(given)
    yield from _of_vessels(given)
    yield from _of_units(given)
    yield from _of_detectors(given)


def _of_rooms(given: Columns) -> Iterator[tuple[int, str]]:
    rooms, every = given.rooms, np.arange(given.count)
    yield from _bad(every, _positive(rooms.gross_volume), "The volume of the room is not above 0.")
    share = np.isnan(rooms.occupied_fraction) | (
        (rooms.occupied_fraction >= 0.0) & (rooms.occupied_fraction < 1.0)
    )
    yield from _bad(every, share, "The occupied fraction leaves no air in the room.")
    yield from _bad(
        every,
        np.isnan(rooms.elevation)
        | ((rooms.elevation >= ATMOSPHERE_LOWEST) & (rooms.elevation <= ATMOSPHERE_HIGHEST)),
        "The elevation of the site is outside the atmosphere that is tabulated.",
    )
    yield from _bad(
        every, _unknown_or(_positive, rooms.station_pressure), "The air pressure is not above 0."
    )
    yield from _bad(
        every,
        _unknown_or(_positive, rooms.temperature),
        "The temperature of the room is not above absolute zero.",
    )
    for values, what in (
        (rooms.floor_area, "The floor area"),
        (rooms.height, "The height of the room"),
    ):
        yield from _bad(every, _unknown_or(_positive, values), f"{what} is not above 0.")
    for values, what in (
        (rooms.purge_flow, "The purge flow"),
        (rooms.way_out, "The way out"),
    ):
        yield from _bad(every, _unknown_or(_not_negative, values), f"{what} is below 0.")


def _of_vessels(given: Columns) -> Iterator[tuple[int, str]]:
    vessels, fluids = given.vessels, given.fluids
    capacity = np.where(
        np.isnan(vessels.capacity_mass), vessels.capacity_volume, vessels.capacity_mass
    )
    yield from _bad(
        vessels.room, _not_negative(capacity), "The capacity of a vessel is unknown or below 0."
    )
    sound_fluid = (
        _positive(fluids.molar_mass)
        & _positive(fluids.condensed_density)
        & _positive(fluids.liquid_density)
        & (fluids.oxygen_fraction >= 0.0)
        & (fluids.oxygen_fraction <= 1.0)
    )
    of_purge = given.rooms.purge_fluid
    purge_sound = np.ones(given.count, dtype=np.bool_)
    purge_sound[of_purge >= 0] = sound_fluid[of_purge[of_purge >= 0]]
    sentence = "The molar mass, density or oxygen of a fluid is impossible."
    yield from _bad(vessels.room, sound_fluid[vessels.fluid], sentence)
    yield from _bad(np.arange(given.count), purge_sound, sentence)
    for values, what in (
        (vessels.contents_volume, "contents"),
        (vessels.contents_mass, "contents"),
        (vessels.rated_evaporation, "rated evaporation"),
        (vessels.measured_evaporation, "measured evaporation"),
        (vessels.measured_loss, "measured loss"),
        (vessels.use, "use"),
        (vessels.closes_in, "closing time"),
    ):
        held = _unknown_or(_not_negative, values)
        yield from _bad(vessels.room, held, f"The {what} of a vessel is below 0 or not a number.")

    for values, what in (
        (vessels.fill_flow, "filling flow"),
        (vessels.charge_pressure, "charge pressure"),
    ):
        held = _unknown_or(_positive, values)
        yield from _bad(vessels.room, held, f"The {what} of a vessel is not above 0.")
    sound = np.isnan(vessels.charge_pressure) | (vessels.charge_pressure <= HIGHEST_PRESSURE)
    yield from _bad(vessels.room, sound, "The charge pressure of a cylinder is above 500 bar.")
    limits = _unknown_or(_is_share, fluids.own_limit)[vessels.fluid]
    yield from _bad(
        vessels.room, limits, "The lower flammable limit of a fluid is not between 0 and 100 %."
    )


def _of_units(given: Columns) -> Iterator[tuple[int, str]]:
    units = given.units
    for values, what in (
        (units.design_flow, "design flow"),
        (units.measured_flow, "measured flow"),
        (units.outdoor_air_fraction, "outdoor air fraction"),
        (units.boost_flow, "boost flow"),
    ):
        held = _unknown_or(_not_negative, values)
        yield from _bad(units.room, held, f"The {what} of a ventilation unit is below 0.")
    yield from _bad(
        units.room, _not_negative(units.share), "The share of a ventilation unit is below 0."
    )
    yield from _bad(
        units.room,
        _unknown_or(_positive, units.mixing_factor),
        "The mixing factor of a ventilation unit is not above 0.",
    )


def _of_detectors(given: Columns) -> Iterator[tuple[int, str]]:
    detectors = given.detectors
    yield from _bad(
        detectors.room,
        _unknown_or(_positive, detectors.t90),
        "The time of response of a detector is not above 0.",
    )
    yield from _bad(
        detectors.room,
        _unknown_or(_not_negative, detectors.delay),
        "A detector's delay is below 0.",
    )


def _bad(room: Integers, held: Mask, sentence: str) -> Iterator[tuple[int, str]]:
    # Asked for what must hold, so that not-a-number fails.
    for index in room[~held]:
        yield int(index), sentence


def _positive(values: Floats) -> Mask:
    return (values >= _SMALLEST) & (values <= _LARGEST)


def _not_negative(values: Floats) -> Mask:
    return (values >= 0.0) & (values <= _LARGEST)


def _is_share(values: Floats) -> Mask:
    return (values > 0.0) & (values <= 1.0)


def _unknown_or(held: Held, values: Floats) -> Mask:
    return np.isnan(values) | held(values)
