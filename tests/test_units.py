import math

import pint
import pytest
from hypothesis import given
from hypothesis import strategies as st

from service import units
from service.units import (
    CELSIUS,
    CUBIC_METRES_PER_HOUR,
    DAYS,
    FRACTION,
    KILOGRAMS,
    KILOPASCALS,
    KILOPASCALS_ABSOLUTE,
    LITRES,
    MILLIMETRES,
    UnitRefused,
    convert,
    field_unit_of,
    find_unit,
    read_number,
    read_quantity,
)

REGISTRY = pint.UnitRegistry()
BASES = {
    units.VOLUME: "m**3",
    units.MASS: "kg",
    units.LENGTH: "m",
    units.AREA: "m**2",
    units.TIME: "s",
    units.VOLUME_FLOW: "m**3/s",
    units.MASS_FLOW: "kg/s",
    units.GAUGE: "Pa",
    units.ABSOLUTE: "Pa",
    units.LOAD: "Pa",
    units.SHARE: "dimensionless",
    units.FORCE: "N",
    units.SPEED: "m/s",
}
# Where our name of a unit is not pint's, or pint has none.
IN_PINT = {
    "hL": "hectoliter",
    "ft3": "foot**3",
    "in3": "inch**3",
    "gal": "gallon",
    "US gal": "gallon",
    "imp gal": "imperial_gallon",
    "m3": "m**3",
    "m2": "m**2",
    "cm2": "cm**2",
    "mm2": "mm**2",
    "ft2": "foot**2",
    "in2": "inch**2",
    "in": "inch",
    "days": "day",
    "weeks": "week",
    "h": "hour",
    "t": "metric_ton",
    "cfm": "foot**3/min",
    "cfh": "foot**3/hour",
    "lpm": "liter/min",
    "gpm": "gallon/min",
    "fpm": "foot/min",
    "kg/m2": "kilogram_force/m**2",
    "psf": "pound_force/foot**2",
    "lbf": "pound_force",
    "kgf": "kilogram_force",
    "%": "percent",
}
EVERY_UNIT = [(dimension, unit) for dimension in BASES for unit in dimension.units]
FIELDS = list(units.FIELD_UNITS.values())


def pint_name(name: str) -> str:
    if name in IN_PINT:
        return IN_PINT[name]
    above, slash, below = name.removesuffix("(g)").removesuffix("(a)").partition("/")
    return f"{IN_PINT.get(above, above)}{slash}{IN_PINT.get(below, below)}"


@pytest.mark.parametrize(
    ("dimension", "unit"), EVERY_UNIT, ids=[f"{d.name}:{u.name}" for d, u in EVERY_UNIT]
)
def test_every_factor_agrees_with_pint(dimension, unit):
    """pint 0.25, its default registry."""
    theirs = REGISTRY.Quantity(1.0, pint_name(unit.name)).to(BASES[dimension]).magnitude
    assert math.isclose(float(unit.factor), theirs, rel_tol=1e-12)


@pytest.mark.parametrize(("name", "theirs"), [("°C", "degC"), ("K", "kelvin"), ("°F", "degF")])
@pytest.mark.parametrize("degrees", [-320.5, -40.0, 0.0, 68.0, 451.0])
def test_temperatures_are_points_on_their_scale(name, theirs, degrees):
    """pint 0.25, its default registry."""
    expected = REGISTRY.Quantity(degrees, theirs).to("degC").magnitude
    ours = convert(degrees, find_unit(name, CELSIUS), CELSIUS)
    assert math.isclose(ours, expected, rel_tol=1e-12, abs_tol=1e-9)


@pytest.mark.parametrize("unit", FIELDS, ids=lambda unit: unit.suffix)
def test_every_field_reads_its_own_unit_unchanged_and_its_example(unit):
    if unit is not FRACTION:
        assert read_quantity(f"12.5 {unit.unit.name}", unit).value == 12.5
    assert math.isfinite(read_quantity(unit.example, unit).value)


def test_no_spelling_means_two_units_of_one_dimension():
    for dimension in units.DIMENSIONS:
        spelt = [text for unit in dimension.units for text in {unit.name, *unit.spellings}]
        assert len(spelt) == len(set(spelt)), dimension.name


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_a_number_in_its_own_unit_survives_as_text(number):
    written = repr(number)
    if number and abs(number) < 1e-300:
        return
    assert read_quantity(f"{written} L", LITRES).value == number


def outcome(text, unit):
    try:
        return read_quantity(text, unit)
    except UnitRefused as error:
        return error


@given(st.text(max_size=80), st.sampled_from(FIELDS))
def test_any_text_is_read_finite_or_refused(text, unit):
    found = outcome(text, unit)
    assert found.code if isinstance(found, UnitRefused) else math.isfinite(found.value)


@given(st.from_regex(r"[+-]?[0-9]{1,9}(\.[0-9]{1,9})?([eE][+-]?[0-9]{1,4})? ?[a-zA-Z/0-9]{0,6}"))
def test_anything_that_looks_like_a_quantity_is_read_finite_or_refused(text):
    found = outcome(text, LITRES)
    assert found.code if isinstance(found, UnitRefused) else math.isfinite(found.value)


@pytest.mark.parametrize(
    ("text", "code"),
    [
        ("nan L", "number-expected"),
        ("inf L", "number-expected"),
        ("L", "number-expected"),
        ("", "number-expected"),
        ("٤٧ L", "number-expected"),
        ("1e400 L", "out-of-range"),
        ("1e-400 L", "out-of-range"),
        ("1e99999 L", "out-of-range"),
        ("1,000 L", "separator-refused"),
        ("1.000,5 L", "separator-refused"),
        ("1 000 L", "separator-refused"),
        ("1'000 L", "separator-refused"),
        ("1_000 L", "separator-refused"),
        ("1/2 L", "separator-refused"),
        ("47", "unit-missing"),
        ("47 furlongs", "unit-unknown"),
        ("47 ML", "unit-unknown"),
        ("47 kg", "unit-of-other-kind"),
        ("47 Nm3", "unit-refused"),
        ("0x10 L", "unit-unknown"),
        ("1" * 80 + " L", "too-long"),
    ],
)
def test_what_is_no_volume_is_refused_with_a_code(text, code):
    with pytest.raises(UnitRefused) as refused:
        read_quantity(text, LITRES)
    assert refused.value.code == code


def test_an_unknown_unit_is_answered_with_those_that_are_known():
    with pytest.raises(UnitRefused) as refused:
        read_quantity("47 furlongs", LITRES)
    assert "imp gal" in refused.value.detail
    assert "furlongs" not in refused.value.detail


def test_a_bare_gallon_is_the_us_gallon_and_says_so():
    """NIST Special Publication 811 (2008), appendix B.8: 3.785412 L and 4.54609 L."""
    reading = read_quantity("1 gal", LITRES)
    assert reading.value == pytest.approx(3.785412, abs=5e-7)
    assert "US gallon" in reading.note
    imperial = read_quantity("1 imp gal", LITRES)
    assert imperial.value == 4.54609
    assert imperial.note is None


def test_cubic_feet_per_minute_are_a_flow_and_air_changes_are_none():
    """NIST Special Publication 811 (2008), appendix B.8: 1 ft3/min = 4.719474E-04 m3/s."""
    assert read_quantity("1 cfm", CUBIC_METRES_PER_HOUR).value == pytest.approx(
        4.719474e-4 * 3600, rel=1e-6
    )
    with pytest.raises(UnitRefused, match="volume of the room"):
        read_quantity("6 ACH", CUBIC_METRES_PER_HOUR)
    with pytest.raises(UnitRefused, match="room conditions"):
        read_quantity("350 scfm", CUBIC_METRES_PER_HOUR)


@pytest.mark.parametrize("text", ["2 barg", "2 bar(g)", "2 bar g", "2 bar gauge", "200 kPa(g)"])
def test_gauge_pressure_is_read_without_a_note(text):
    assert read_quantity(text, KILOPASCALS) == units.Reading(200.0, text_unit(text), None)


def text_unit(text: str) -> str:
    return "kPa(g)" if "kPa" in text else "bar(g)"


@pytest.mark.parametrize("text", ["2 bara", "2 bar(a)", "2 bar abs", "30 psia", "1 atm"])
def test_absolute_pressure_is_refused_where_gauge_is_meant(text):
    with pytest.raises(UnitRefused, match="absolute pressure; this field takes a gauge"):
        read_quantity(text, KILOPASCALS)
    assert read_quantity(text, KILOPASCALS_ABSOLUTE).note is None


@pytest.mark.parametrize("text", ["1 barg", "15 psig"])
def test_gauge_pressure_is_refused_where_absolute_is_meant(text):
    with pytest.raises(UnitRefused, match="gauge pressure; this field takes an absolute"):
        read_quantity(text, KILOPASCALS_ABSOLUTE)


@pytest.mark.parametrize(("field", "word"), [(KILOPASCALS, "gauge"), (KILOPASCALS_ABSOLUTE, "abs")])
@pytest.mark.parametrize("text", ["1 bar", "14.5 psi", "100 kPa"])
def test_a_plain_pressure_is_read_as_the_field_means_it_and_says_so(text, field, word):
    assert f"was read as {word}" in read_quantity(text, field).note


def test_case_is_free_where_it_changes_nothing_and_bound_where_it_does():
    assert read_quantity("5 IN", MILLIMETRES).value == 127.0
    assert read_quantity("5 KG", KILOGRAMS).value == 5.0
    with pytest.raises(UnitRefused, match="Upper and lower case matter"):
        read_quantity("5 MM", MILLIMETRES)


def test_a_month_has_no_length():
    with pytest.raises(UnitRefused, match="write days"):
        read_quantity("12 months", DAYS)


@pytest.mark.parametrize(("text", "value"), [("-4", -4.0), ("1.5e3", 1500.0), (".5", 0.5)])
def test_a_bare_number_is_read_where_the_unit_is_known(text, value):
    assert read_number(text) == value


@pytest.mark.parametrize("text", ["1,5", "1 000", "5 L", "nan", "1e400", ""])
def test_a_bare_number_has_nothing_beside_it(text):
    with pytest.raises(UnitRefused):
        read_number(text)


def test_a_converted_column_keeps_decimal_tenths():
    assert convert(0.1, find_unit("mL", LITRES), LITRES) == 0.0001
    with pytest.raises(UnitRefused):
        convert(math.nan, find_unit("mL", LITRES), LITRES)


@pytest.mark.parametrize(
    ("name", "suffix"),
    [
        ("capacity_l", "l"),
        ("station_pressure_kpa_abs", "kpa_abs"),
        ("working_pressure_kpa", "kpa"),
        ("design_flow_m3_h", "m3_h"),
        ("measured_loss_kg_day", "kg_day"),
        ("calibrate_every_days", "days"),
        ("outdoor_air_fraction", "fraction"),
        ("t90_s", "s"),
    ],
)
def test_a_name_tells_its_unit_by_the_longest_ending(name, suffix):
    assert field_unit_of(name).suffix == suffix


@pytest.mark.parametrize("name", ["name", "room_id", "labels", "l", "kind"])
def test_a_name_without_a_unit_has_none(name):
    assert field_unit_of(name) is None


def test_a_floor_rating_is_a_load_and_no_pressure():
    unit = field_unit_of("floor_rating_kpa")
    assert read_quantity("1000 kg/m2", unit).value == 9.80665
    with pytest.raises(UnitRefused):
        read_quantity("2 barg", unit)
