import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from service.physics.constants import OXYGEN_IN_AIR, ROOM_TEMPERATURE, STANDARD_PRESSURE
from service.physics.errors import OutOfRange
from service.physics.fluids import FLUIDS
from service.physics.gas import gas_volume_of_liquid
from service.physics.mixing import (
    gas_volume_to_reach_by_displacement,
    gas_volume_to_reach_by_mixing,
    oxygen_after_dilution,
    oxygen_after_displacement,
    oxygen_after_mixing,
    released_fraction_after_displacement,
    released_fraction_after_mixing,
    room_volume_to_stay_above_by_displacement,
    room_volume_to_stay_above_by_mixing,
)

AFTER = [oxygen_after_displacement, oxygen_after_mixing, oxygen_after_dilution]
RELEASED = [released_fraction_after_displacement, released_fraction_after_mixing]
INVERSES = [
    gas_volume_to_reach_by_displacement,
    gas_volume_to_reach_by_mixing,
    room_volume_to_stay_above_by_displacement,
    room_volume_to_stay_above_by_mixing,
]

volumes = st.floats(1.0, 1e5)
# Nothing, or more than a cubic millimetre: what no meter could see only underflows.
gases = st.just(0.0) | st.floats(1e-9, 1e6)
fractions = st.just(0.0) | st.floats(1e-9, 1.0)


def gas_of(slug, litres):
    fluid = FLUIDS[slug]
    return gas_volume_of_liquid(
        litres / 1000.0,
        fluid.liquid_density_kg_m3,
        fluid.molar_mass_kg_mol,
        pressure=STANDARD_PRESSURE,
        temperature=ROOM_TEMPERATURE,
    )


def test_fifty_litres_of_nitrogen_in_fifty_cubic_metres():
    """C-1, C-2: closed, with 34.601 m3 of gas from CoolProp 8.0.0."""
    gas = gas_of("nitrogen", 50.0)
    assert_allclose(gas, 34.601, rtol=1e-3)
    assert_allclose(oxygen_after_displacement(gas, 50.0), 0.06452, atol=3e-4)
    assert_allclose(oxygen_after_mixing(gas, 50.0), 0.10487, atol=3e-4)
    assert_allclose(oxygen_after_dilution(gas, 50.0), 0.12382, atol=3e-4)


def test_filling_loss_adds_a_tenth_of_the_gas():
    """C-3: closed, CoolProp 8.0.0."""
    gas = 1.1 * gas_of("nitrogen", 50.0)
    assert_allclose(oxygen_after_displacement(gas, 50.0), 0.05002, atol=3e-4)
    assert_allclose(oxygen_after_mixing(gas, 50.0), 0.09786, atol=3e-4)


def test_a_dewar_of_helium_leaves_no_oxygen_in_a_small_room():
    """C-4: closed, CoolProp 8.0.0."""
    gas = gas_of("helium", 100.0)
    assert_allclose(gas, 74.96, rtol=3e-3)
    assert oxygen_after_displacement(gas, 30.0) == 0.0
    assert_allclose(oxygen_after_mixing(gas, 30.0), 0.01722, rtol=3e-3)


def test_five_litres_of_nitrogen_bring_fifty_cubic_metres_to_the_deficient_mark():
    """C-5: closed, CoolProp 8.0.0."""
    gas = gas_volume_to_reach_by_displacement(50.0, oxygen=0.195)
    assert_allclose(gas / gas_of("nitrogen", 1.0), 5.001, rtol=3e-3)


def test_a_litre_of_nitrogen_needs_about_ten_cubic_metres():
    """Methods C, 9.998 and 9.648 m3 a litre by CoolProp 8.0.0."""
    gas = gas_of("nitrogen", 1.0)
    by_displacement = room_volume_to_stay_above_by_displacement(gas, oxygen=0.195)
    assert_allclose(by_displacement, 9.998, rtol=3e-3)
    by_mixing = room_volume_to_stay_above_by_mixing(gas, oxygen=0.195)
    assert_allclose(by_mixing, 9.648, rtol=3e-3)


def test_the_share_of_gas_at_the_deficient_mark_depends_on_what_air_is_taken_to_be():
    """Methods B and C, closed: 0.06921, 0.07172, and 0.07143 for manuals that print 0.21."""
    assert_allclose(gas_volume_to_reach_by_displacement(1.0, oxygen=0.195), 0.06921, atol=5e-6)
    assert_allclose(gas_volume_to_reach_by_mixing(1.0, oxygen=0.195), 0.07172, atol=5e-6)
    manual = gas_volume_to_reach_by_displacement(1.0, oxygen=0.195, oxygen_before=0.21)
    assert_allclose(manual, 0.07143, atol=5e-6)


def test_liquid_oxygen_enriches_a_room_by_displacement():
    """Methods E4, closed: 1.881 L bring 50 m3 to 23.5 %."""
    gas = gas_of("oxygen", 1.881)
    oxygen = oxygen_after_displacement(gas, 50.0) + gas / 50.0
    assert_allclose(oxygen, 0.235, atol=3e-5)


@given(gases, volumes, fractions)
def test_displacement_leaves_least_and_a_sealed_room_most(gas, room, before):
    least, middle, most = (after(gas, room, oxygen_before=before) for after in AFTER)
    assert 0.0 <= least <= middle * (1 + 1e-12)
    assert middle <= most * (1 + 1e-12)
    assert most <= before


@given(gases, gases, volumes)
def test_more_gas_never_raises_oxygen(gas, more, room):
    for after in AFTER:
        assert after(gas + more, room) <= after(gas, room)


@given(volumes)
def test_no_gas_leaves_the_air_as_it_was(room):
    for after in AFTER:
        assert after(0.0, room) == OXYGEN_IN_AIR
    for released in RELEASED:
        assert released(0.0, room, fraction_before=0.25) == 0.25


@given(gases, volumes, fractions)
def test_released_fraction_and_oxygen_say_the_same(gas, room, before):
    for after, released in zip(AFTER, RELEASED, strict=False):
        fraction = released(gas, room, fraction_before=before)
        assert 0.0 <= fraction <= 1.0
        oxygen = after(gas, room, oxygen_before=OXYGEN_IN_AIR * (1.0 - before))
        assert_allclose(OXYGEN_IN_AIR * (1.0 - fraction), oxygen, atol=1e-15)


@given(gases, gases, volumes, fractions)
def test_mixing_twice_is_mixing_the_sum(gas, more, room, before):
    first = released_fraction_after_mixing(gas, room, fraction_before=before)
    twice = released_fraction_after_mixing(more, room, fraction_before=first)
    once = released_fraction_after_mixing(gas + more, room, fraction_before=before)
    assert_allclose(twice, once, rtol=1e-12, atol=1e-15)


def test_a_room_filled_with_gas_has_the_fraction_of_that_gas():
    for released in RELEASED:
        full = released(1e9, 1.0, fraction_before=0.5, dilution_volume=0.25e9)
        assert_allclose(full, 0.25, rtol=1e-12)
        assert released(0.0, 1.0, fraction_before=0.5, dilution_volume=0.0) == 0.5


@given(fractions, fractions, volumes)
def test_an_equal_mixture_changes_nothing(share, before, room):
    gas = share * room
    for released in RELEASED:
        after = released(gas, room, fraction_before=before, dilution_volume=before * gas)
        assert_allclose(after, before, atol=1e-12)


@given(volumes, st.floats(0.001, OXYGEN_IN_AIR))
def test_the_gas_to_reach_a_fraction_reaches_it(room, oxygen):
    by_displacement = gas_volume_to_reach_by_displacement(room, oxygen=oxygen)
    assert_allclose(oxygen_after_displacement(by_displacement, room), oxygen, rtol=1e-12)
    by_mixing = gas_volume_to_reach_by_mixing(room, oxygen=oxygen)
    assert_allclose(oxygen_after_mixing(by_mixing, room), oxygen, rtol=1e-12)


@given(st.floats(0.001, 1e5), st.floats(0.001, 0.2))
def test_the_smallest_room_keeps_the_fraction(gas, oxygen):
    room = room_volume_to_stay_above_by_displacement(gas, oxygen=oxygen)
    assert_allclose(oxygen_after_displacement(gas, room), oxygen, rtol=1e-12)
    room = room_volume_to_stay_above_by_mixing(gas, oxygen=oxygen)
    assert_allclose(oxygen_after_mixing(gas, room), oxygen, rtol=1e-12)


def test_a_room_already_there_needs_no_gas():
    for inverse in INVERSES[:2]:
        assert inverse(50.0, oxygen=0.195, oxygen_before=0.18) == 0.0


def test_mixing_broadcasts_rows_against_columns():
    gas, room = np.array([[1.0], [2.0], [3.0]]), np.array([10.0, 20.0])
    for formula in AFTER + RELEASED:
        assert np.shape(formula(1.0, 10.0)) == ()
        assert formula(gas, room).shape == (3, 2)
        assert formula(gas, room)[2, 1] == formula(3.0, 20.0)
    for inverse in INVERSES:
        assert inverse(gas, oxygen=[0.1, 0.15]).shape == (3, 2)


@pytest.mark.parametrize("formula", AFTER + RELEASED)
@pytest.mark.parametrize(
    ("gas", "room", "named"),
    [
        (-1.0, 10.0, "gas_volume"),
        (np.nan, 10.0, "gas_volume"),
        (np.inf, 10.0, "gas_volume"),
        (1.0, 0.0, "room_volume"),
        (1.0, -1.0, "room_volume"),
        (1.0, np.nan, "room_volume"),
    ],
)
def test_mixing_refuses_rooms_and_gas_that_are_none(formula, gas, room, named):
    with pytest.raises(OutOfRange, match=f"^{named} must be"):
        formula([0.0, gas], [10.0, room])


@pytest.mark.parametrize("wrong", [-0.1, 1.1, np.nan])
def test_mixing_refuses_fractions_that_are_none(wrong):
    for after in AFTER:
        with pytest.raises(OutOfRange, match=r"^oxygen_before must be"):
            after(1.0, 10.0, oxygen_before=wrong)
    for inverse in INVERSES:
        with pytest.raises(OutOfRange, match=r"^oxygen must be"):
            inverse(10.0, oxygen=wrong)
        with pytest.raises(OutOfRange, match=r"^oxygen_before must be"):
            inverse(10.0, oxygen=0.1, oxygen_before=wrong)
    for released in RELEASED:
        with pytest.raises(OutOfRange, match=r"^fraction_before must be"):
            released(1.0, 10.0, fraction_before=np.nan)
        with pytest.raises(OutOfRange, match=r"^dilution_volume must be"):
            released(1.0, 10.0, dilution_volume=np.nan)


@pytest.mark.parametrize("inverse", INVERSES[2:])
@pytest.mark.parametrize("oxygen", [OXYGEN_IN_AIR, 0.25])
def test_no_room_keeps_more_oxygen_than_it_had(inverse, oxygen):
    with pytest.raises(OutOfRange, match=r"^oxygen must be below oxygen_before"):
        inverse(10.0, oxygen=oxygen)


def test_no_gas_by_mixing_takes_all_oxygen():
    for inverse in (gas_volume_to_reach_by_mixing, room_volume_to_stay_above_by_mixing):
        with pytest.raises(OutOfRange, match=r"^oxygen must be above 0"):
            inverse(10.0, oxygen=0.0)
