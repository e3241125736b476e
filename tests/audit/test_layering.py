"""Bounds for gas that does not mix, as the assessment of a room tells them (methods F)."""

import pytest

from service.audit.inputs import PitValues
from tests.audit.builders import (
    ARGON,
    CARBON_DIOXIDE,
    HELIUM,
    LITRE,
    NITROGEN,
    a_line,
    a_room,
    a_vessel,
    assessed,
)


def layers(room):
    return assessed(room)[0].layering


def ten_litres(**fields):
    """The room of check F-1: 20 m2 of floor, 2.5 m high, and 10 L of nitrogen."""
    vessel = a_vessel(10, measured_evaporation=0.0)
    return a_room(50, floor_area=20.0, height=2.5, vessels=(vessel,), **fields)


def test_the_zones_are_as_worked_for_check_f_1():
    """Methods F-1: mixed 0.18050, below 1.5 m 0.16117, below 0.5 m 0.06452."""
    found = layers(ten_litres())
    assert found["breathing_zone"]["mixed_oxygen_pct"] == pytest.approx(18.050, rel=3e-3)
    assert found["breathing_zone"]["oxygen_pct"] == pytest.approx(16.117, rel=3e-3)
    assert found["kneeling_zone"]["oxygen_pct"] == pytest.approx(6.452, rel=3e-3)
    assert found["breathing_zone"]["zone_m3"] == pytest.approx(30.0)
    assert found["ceiling_zone"] is None
    assert found["bound"] is True
    assert "never a concentration" in found["caution"]


def test_the_depths_are_as_worked_for_check_f_2():
    """Methods F-2: 0.0874 m cold and 0.3460 m warm."""
    layer = layers(ten_litres())["layer"]
    assert layer["cold_m"] == pytest.approx(0.0874, rel=5e-3)
    assert layer["warm_m"] == pytest.approx(0.3460, rel=5e-3)


def test_a_pit_fills_as_worked_for_check_f_3():
    """Methods F-3: 17.16 L of nitrogen fill 3 m3 as cold vapour, and 4.34 L as warm gas."""
    pit = layers(ten_litres(pit=PitValues(2.0, 1.5, entered=None)))["pit"]
    assert pit["filled_by_l_cold"] == pytest.approx(17.16, rel=5e-3)
    assert pit["filled_by_l_warm"] == pytest.approx(4.34, rel=5e-3)
    assert (pit["volume_m3"], pit["oxygen_pct"], pit["entered"]) == (3.0, 0.0, None)


def test_light_gas_is_bounded_under_the_ceiling():
    """Methods F1: the zone of light gas is the floor times what is above 1.5 m."""
    vessel = a_vessel(10, HELIUM, measured_evaporation=0.0)
    room = a_room(50, floor_area=20.0, height=2.5, vessels=(vessel,))
    zone = layers(room)["ceiling_zone"]
    assert zone["zone_m3"] == pytest.approx(20.0)
    assert zone["oxygen_pct"] == pytest.approx(20.95 * (1.0 - 7.496 / 20.0), rel=3e-3)
    assert layers(room)["breathing_zone"] is None


def test_a_bound_is_never_above_the_mixed_figure():
    for litres in (1, 10, 100):
        vessel = a_vessel(litres, measured_evaporation=litres * 1e-9)
        found = layers(a_room(60, vessels=(vessel,)))
        for name in ("breathing_zone", "kneeling_zone"):
            assert found[name]["oxygen_pct"] <= found[name]["mixed_oxygen_pct"]


def test_what_evaporates_for_days_makes_no_layer():
    room = a_room(50, purge_flow=1e-4, purge_fluid=NITROGEN)
    assert assessed(room)[0].cases
    assert layers(room) is None


def test_only_what_sinks_of_several_gases_lies_on_the_floor():
    """Methods F-2 for the nitrogen of a manifold, whatever helium is joined to it."""
    nitrogen = a_vessel(10, measured_evaporation=0.0, manifold="M")
    helium = a_vessel(30, HELIUM, measured_evaporation=0.0, manifold="M")
    for vessels in ((nitrogen, helium), (helium, nitrogen)):
        found = layers(a_room(50, floor_area=20.0, height=2.5, vessels=vessels))
        assert found["layer"]["cold_m"] == pytest.approx(0.0874, rel=5e-3)
        assert found["layer"]["warm_m"] == pytest.approx(0.3460, rel=5e-3)


def test_a_layer_of_two_gases_is_as_deep_as_both():
    """Methods F2, by the densities of CoolProp 8: nitrogen 4.6121, argon 5.7736 kg/m3 as vapour."""
    nitrogen = a_vessel(5, NITROGEN, measured_evaporation=0.0, manifold="M")
    argon = a_vessel(5, ARGON, measured_evaporation=0.0, manifold="M")
    found = layers(a_room(50, floor_area=20.0, height=2.5, vessels=(nitrogen, argon)))
    by_hand = (5 * LITRE * 806.08 / 4.6121 + 5 * LITRE * 1395.40 / 5.7736) / 20.0
    assert found["layer"]["cold_m"] == pytest.approx(by_hand, rel=5e-3)


def test_gas_that_was_never_cold_makes_no_cold_layer():
    pit = PitValues(2.0, 1.5)
    bottle = a_vessel(
        fluid=CARBON_DIOXIDE, kind="cylinder", capacity_volume=None, capacity_mass=20.0
    )
    piped = a_line(phase="gas", bore=0.006, source_pressure=6e5)
    for room in (a_room(pit=pit, vessels=(bottle,)), a_room(pit=pit, lines=(piped,))):
        found = layers(room)
        assert found["layer"]["cold_m"] is None
        assert found["layer"]["warm_m"] > 0.0
        assert found["pit"]["filled_by_l_cold"] is None
