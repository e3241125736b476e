"""Numbers that no record of a room can be are said, and hide no other room."""

import pytest

from tests.audit.builders import a_fluid, a_room, a_unit, a_vessel, assessed


@pytest.mark.parametrize(
    ("fields", "said"),
    [
        ({"vessels": (a_vessel(fill_flow=0.0),)}, "filling flow"),
        ({"vessels": (a_vessel(fill_flow=float("nan")),)}, None),
        ({"vessels": (a_vessel(closes_in=-1.0),)}, "closing time"),
        ({"vessels": (a_vessel(charge_pressure=-1.0),)}, "charge pressure"),
        ({"units": (a_unit(boost_flow=-1.0),)}, "boost flow"),
        (
            {
                "vessels": (
                    a_vessel(
                        fluid=a_fluid(
                            "x", molar_mass=0.02, condensed_density=500.0, flammable_limit=0.0
                        )
                    ),
                )
            },
            "lower flammable limit",
        ),
    ],
)
def test_an_impossible_number_is_named(fields, said):
    failed = assessed(a_room(**fields))[0].failed
    assert (failed is None) if said is None else (said in failed)
