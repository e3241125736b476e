import numpy as np
import pytest
from CoolProp.CoolProp import PropsSI
from numpy.testing import assert_allclose

from service.physics.ambient import (
    oxygen_at_partial_pressure,
    oxygen_critical_mark,
    oxygen_danger_mark,
    oxygen_in_moist_air,
    oxygen_partial_pressure,
    station_pressure,
    water_saturation_pressure,
)
from service.physics.constants import (
    ATMOSPHERE_EXPONENT,
    MILLIMETRE_OF_MERCURY,
    OXYGEN_IN_AIR,
    STANDARD_PRESSURE,
    ZERO_CELSIUS,
)
from service.physics.errors import OutOfRange

DANGER = {"deficient": 0.195, "danger": 0.18, "danger_pressure": 18_000.0}
CRITICAL = {"critical": 0.10, "critical_pressure": 10_130.0}


def marks(pressure):
    danger = oxygen_danger_mark(pressure, **DANGER)
    return danger, oxygen_critical_mark(pressure, danger_mark=danger, **CRITICAL)


def test_station_pressure_follows_the_standard_atmosphere(handbook):
    """U.S. Standard Atmosphere, 1976, table I, by geopotential altitude."""
    rows = handbook("standard_atmosphere.csv")
    pressure = station_pressure([float(row["elevation_m"]) for row in rows])
    printed = [float(row["pressure_pa"]) for row in rows]
    assert_allclose(pressure, printed, rtol=5e-6)  # The table prints six figures.


def test_station_pressure_has_the_exponent_and_factor_that_are_printed():
    """ISO 2533:1975, from memory: p0 (1 - 2.25577e-5 h)^5.25588; B-1 and B-2."""
    assert_allclose(ATMOSPHERE_EXPONENT, 5.25588, atol=5e-6)
    heights = np.linspace(0.0, 3000.0, 7)
    assert_allclose(
        station_pressure(heights),
        STANDARD_PRESSURE * (1.0 - 2.25577e-5 * heights) ** 5.25588,
        rtol=1e-6,
    )
    assert_allclose(station_pressure([1500.0, 3000.0]), [84556.0, 70108.5], atol=5.0)


def test_the_millimetre_of_mercury_is_the_conventional_one():
    """133.322387 Pa, the conventional millimetre of mercury, from memory."""
    assert_allclose(MILLIMETRE_OF_MERCURY, 133.322387, atol=5e-7)


def test_partial_pressure_falls_with_height():
    """B-3, closed; and McManus, oxygen limits (2009): at 610 m clean air has that of 19.5 %."""
    at_height = oxygen_partial_pressure(0.195, station_pressure(1500.0))
    assert_allclose(at_height / MILLIMETRE_OF_MERCURY, 123.67, atol=0.05)
    clean = oxygen_partial_pressure(OXYGEN_IN_AIR, station_pressure(610.0))
    assert_allclose(clean, oxygen_partial_pressure(0.195, STANDARD_PRESSURE), rtol=2e-3)


def test_the_fraction_of_equal_partial_pressure_rises_with_height():
    """B-4, closed."""
    sea_level = oxygen_partial_pressure(0.195, STANDARD_PRESSURE)
    assert_allclose(
        oxygen_at_partial_pressure(sea_level, station_pressure(1000.0)), 0.21984, atol=1e-4
    )


def test_water_vapour_pressure_is_that_of_the_steam_table(handbook):
    rows = handbook("water_vapour_pressure.csv")
    kelvin = [ZERO_CELSIUS + float(row["celsius"]) for row in rows]
    printed = [float(row["pressure_pa"]) for row in rows]
    # The fit of Alduchov and Eskridge is good to 0.4 %.
    assert_allclose(water_saturation_pressure(kelvin), printed, rtol=4e-3)


def test_humid_air_has_less_oxygen():
    """B-5: CoolProp 8.0.0 for water at 30 degrees Celsius; and 20.71 % at 20 degrees and 50 %."""
    with np.errstate(all="ignore"):
        water = 0.9 * PropsSI("P", "T", ZERO_CELSIUS + 30.0, "Q", 0, "Water")
    humid = oxygen_in_moist_air(ZERO_CELSIUS + 30.0, 0.9, pressure=STANDARD_PRESSURE)
    assert_allclose(humid, 0.20160, atol=2e-4)
    assert_allclose(humid, OXYGEN_IN_AIR * (1.0 - water / STANDARD_PRESSURE), atol=2e-4)
    office = oxygen_in_moist_air(ZERO_CELSIUS + 20.0, 0.5, pressure=STANDARD_PRESSURE)
    assert_allclose(office, 0.2071, atol=1e-4)
    dry = oxygen_in_moist_air(ZERO_CELSIUS + 20.0, 0.0, pressure=STANDARD_PRESSURE)
    assert dry == OXYGEN_IN_AIR
    steam = oxygen_in_moist_air(ZERO_CELSIUS + 50.0, 1.0, pressure=10_000.0)
    assert steam == 0.0


@pytest.mark.parametrize(
    ("elevation", "danger", "critical"),
    [
        (0.0, 0.18, 0.10),
        (600.0, 0.1908, 0.1074),
        (1600.0, 0.195, 0.1213),
        (3000.0, 0.195, 0.1445),
    ],
    ids=["sea level", "B-6", "B-7", "B-8"],
)
def test_marks_rise_with_height_as_far_as_the_deficient_mark(elevation, danger, critical):
    """Methods B4, closed, on the pressures of the standard atmosphere."""
    assert_allclose(marks(station_pressure(elevation)), (danger, critical), atol=1e-4)


def test_danger_equals_deficient_from_about_780_metres():
    """18.0 kPa over 19.5 % is 92.31 kPa; the printed atmosphere has 92 076 Pa at 800 m."""
    danger, _ = marks(station_pressure([760.0, 800.0]))
    assert danger[0] < 0.195
    assert danger[1] == 0.195


def test_marks_keep_their_order_at_every_height():
    danger, critical = marks(station_pressure(np.linspace(-5000.0, 11_000.0, 200)))
    assert (critical <= danger).all()
    assert (danger <= 0.195).all()
    assert (np.diff(danger) >= 0.0).all()
    assert (np.diff(critical) >= 0.0).all()


def test_ambient_formulas_broadcast():
    pressure = station_pressure(np.zeros((3, 1)))
    assert oxygen_danger_mark(pressure, **{**DANGER, "deficient": [0.19, 0.195]}).shape == (3, 2)
    assert oxygen_partial_pressure([0.1, 0.2], pressure).shape == (3, 2)
    assert oxygen_in_moist_air([290.0, 300.0], 0.5, pressure=pressure).shape == (3, 2)
    assert np.shape(station_pressure(0.0)) == ()


@pytest.mark.parametrize("wrong", [-5001.0, 11_001.0, np.nan])
def test_station_pressure_refuses_heights_outside_the_troposphere(wrong):
    with pytest.raises(OutOfRange, match=r"^elevation must be from -5000 to 11000"):
        station_pressure([0.0, wrong])


@pytest.mark.parametrize("wrong", [0.0, -1.0, np.nan])
@pytest.mark.parametrize("named", ["pressure", "danger_pressure"])
def test_the_danger_mark_refuses_pressures_that_are_none(named, wrong):
    with pytest.raises(OutOfRange, match=f"^{named} must be"):
        oxygen_danger_mark(**{"pressure": STANDARD_PRESSURE, **DANGER, named: wrong})


@pytest.mark.parametrize("wrong", [-0.1, 1.1, np.nan])
@pytest.mark.parametrize("named", ["deficient", "danger"])
def test_the_danger_mark_refuses_fractions_that_are_none(named, wrong):
    with pytest.raises(OutOfRange, match=f"^{named} must be"):
        oxygen_danger_mark(**{"pressure": STANDARD_PRESSURE, **DANGER, named: wrong})


@pytest.mark.parametrize("wrong", [-0.1, np.nan])
@pytest.mark.parametrize("named", ["danger_mark", "critical", "critical_pressure", "pressure"])
def test_the_critical_mark_refuses_what_is_none(named, wrong):
    good = {"pressure": STANDARD_PRESSURE, "danger_mark": 0.18, **CRITICAL}
    with pytest.raises(OutOfRange, match=f"^{named} must be"):
        oxygen_critical_mark(**{**good, named: wrong})


@pytest.mark.parametrize(
    ("named", "wrong"),
    [
        ("temperature", 200.0),
        ("temperature", np.nan),
        ("relative_humidity", 1.1),
        ("relative_humidity", np.nan),
        ("pressure", 0.0),
        ("oxygen_in_dry_air", -0.1),
    ],
)
def test_moist_air_refuses_what_is_none(named, wrong):
    good = {"temperature": 293.15, "relative_humidity": 0.5, "pressure": STANDARD_PRESSURE}
    with pytest.raises(OutOfRange, match=f"^{named} must be"):
        oxygen_in_moist_air(**{**good, named: wrong})


@pytest.mark.parametrize("wrong", [0.0, -1.0, np.nan])
def test_a_partial_pressure_of_nothing_has_no_fraction(wrong):
    with pytest.raises(OutOfRange, match=r"^partial_pressure must be"):
        oxygen_at_partial_pressure(wrong, STANDARD_PRESSURE)
