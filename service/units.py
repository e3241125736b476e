"""Quantities with units: a finite table, exact factors, and no guess.

A field's name ends in its unit, ``capacity_l``; a caller may send ``"47 gal"`` instead of a
number, and then reads in the answer what was made of it. The table is ours because a general
library of units reads ``350 cfm`` as a length and knows no gauge pressure. Factors are exact
fractions, by the definitions in NIST Special Publication 811 (2008), appendix B; a result is
rounded once, to the nearest double.
"""

import re
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from types import MappingProxyType
from typing import Final

LONGEST_TEXT: Final = 64

# ASCII digits only, a point as the only separator, an exponent of at most three digits.
NUMBER: Final = re.compile(
    r"[+-]?(?:[0-9]+(?:\.[0-9]+)?|\.[0-9]+)(?:[eE][+-]?[0-9]{1,3}(?![0-9]))?"
)
# "1,000 L", "1 000 L", "1'000 L", "1.000.5 L", "1_000 L": a separator, then more digits.
SEPARATED: Final = re.compile(r"[\s,.'\u2019_]\s*[0-9]|,")
# A lower-case m and an upper-case M before these are milli and mega: six or nine powers apart.
CASE_MATTERS: Final = re.compile(r"[mM](?:[lLgsm]|bar|Pa)")


class UnitRefused(ValueError):
    """A text that is no quantity of the kind asked for; it never repeats the text."""

    def __init__(self, code: str, detail: str, accepted: tuple[str, ...] = ()) -> None:
        self.code = code
        self.detail = f"{detail} Accepted: {', '.join(accepted)}." if accepted else detail
        self.accepted = accepted
        super().__init__(self.detail)


@dataclass(frozen=True, slots=True)
class Unit:
    """A unit: its name, how it is spelt, and the line that takes it to its dimension's base."""

    name: str
    factor: Fraction
    offset: Fraction = Fraction(0)
    spellings: tuple[str, ...] = ()
    note: str | None = None


@dataclass(frozen=True, slots=True, eq=False)
class Dimension:
    """A kind of quantity with all its units."""

    name: str
    units: tuple[Unit, ...]
    hints: Mapping[str, str] = field(default_factory=dict)
    exact: Mapping[str, Unit] = field(init=False)
    folded: Mapping[str, Unit] = field(init=False)

    def __post_init__(self) -> None:
        """Make the two tables that a spelling is looked up in."""
        exact = {_tidy(text): unit for unit in self.units for text in (unit.name, *unit.spellings)}
        folded = {
            text.casefold(): unit for text, unit in exact.items() if not CASE_MATTERS.match(text)
        }
        object.__setattr__(self, "exact", MappingProxyType(exact))
        object.__setattr__(self, "folded", MappingProxyType(folded))

    @property
    def accepted(self) -> tuple[str, ...]:
        """Name its units, for a sentence."""
        return tuple(unit.name for unit in self.units)

    def find(self, spelling: str) -> Unit | None:
        """Find the unit that a text spells, if it is one of these."""
        tidy = _tidy(spelling)
        return self.exact.get(tidy) or self.folded.get(tidy.casefold())


@dataclass(frozen=True, slots=True)
class FieldUnit:
    """What a field's name ends in: the unit that its numbers are in."""

    suffix: str
    dimension: Dimension
    unit: Unit
    example: str

    @property
    def accepted(self) -> tuple[str, ...]:
        """Name the units that a text may have, for a sentence."""
        return self.dimension.accepted


@dataclass(frozen=True, slots=True)
class Reading:
    """What was made of a text: the number in the field's unit, the unit read, a note if needed."""

    value: float
    unit_read: str
    note: str | None = None


def _tidy(spelling: str) -> str:
    """Make one form of the ways to write an exponent, a micro sign, a space."""
    plain = spelling.translate({0xB2: "2", 0xB3: "3", 0x2044: "/", 0xBA: "°", ord("^"): None})
    return re.sub(r" ?/ ?", "/", " ".join(plain.split()))


def _unit(
    name: str,
    factor: Fraction | int | str,
    spellings: str = "",
    *,
    offset: Fraction | str = "0",
    note: str | None = None,
) -> Unit:
    spelt = tuple(text for text in spellings.split("|") if text)
    return Unit(name, Fraction(factor), Fraction(offset), spelt, note)


# Definitions: international yard and pound, the litre, standard gravity, the two gallons.
FOOT: Final = Fraction("0.3048")
INCH: Final = FOOT / 12
POUND: Final = Fraction("0.45359237")
GRAVITY: Final = Fraction("9.80665")
POUND_FORCE: Final = POUND * GRAVITY
US_GALLON: Final = 231 * INCH**3
IMPERIAL_GALLON: Final = Fraction("0.00454609")
PSI: Final = POUND_FORCE / INCH**2

GALLON_NOTE: Final = (
    "'gal' was read as the US gallon of 3.785411784 L; write 'imp gal' for the imperial gallon."
)

VOLUME: Final = Dimension(
    "volume",
    (
        _unit("L", Fraction(1, 1000), "l|litre|litres|liter|liters|dm3"),
        _unit("mL", Fraction(1, 10**6), "ml|cm3|cc|millilitre|millilitres|milliliter|milliliters"),
        _unit("hL", Fraction(1, 10), "hl|hectolitre|hectolitres"),
        _unit("m3", 1, "cu m|cubic metre|cubic metres|cubic meter|cubic meters"),
        _unit("ft3", FOOT**3, "cu ft|cuft|cf|cubic foot|cubic feet"),
        _unit("in3", INCH**3, "cu in|cubic inch|cubic inches"),
        _unit("gal", US_GALLON, "gallon|gallons", note=GALLON_NOTE),
        _unit("US gal", US_GALLON, "gal US|gal (US)|US gallon|US gallons|USG|gal_us"),
        _unit(
            "imp gal",
            IMPERIAL_GALLON,
            "imperial gallon|imperial gallons|gal (imp)|gal imp|UK gal|gal UK|gal (UK)",
        ),
    ),
    hints=dict.fromkeys(
        ("Nm3", "scf", "sm3", "std m3", "Nl", "SL"),
        "A volume at standard conditions depends on which; send the net liquid volume.",
    ),
)

MASS: Final = Dimension(
    "mass",
    (
        _unit("kg", 1, "kilogram|kilograms|kilogramme|kilogrammes|kgs"),
        _unit("g", Fraction(1, 1000), "gram|grams|gramme|grammes"),
        _unit("mg", Fraction(1, 10**6), "milligram|milligrams"),
        _unit("t", 1000, "tonne|tonnes|metric ton|metric tons"),
        _unit("lb", POUND, "lbs|lbm|pound|pounds"),
        _unit("oz", POUND / 16, "ounce|ounces"),
    ),
    hints=dict.fromkeys(
        ("ton", "tons"), "'ton' is 907, 1000 or 1016 kg; write kg, or t for the metric ton."
    ),
)

LENGTH: Final = Dimension(
    "length",
    (
        _unit("m", 1, "metre|metres|meter|meters"),
        _unit("cm", Fraction(1, 100), "centimetre|centimetres|centimeter|centimeters"),
        _unit("mm", Fraction(1, 1000), "millimetre|millimetres|millimeter|millimeters"),
        _unit("km", 1000, "kilometre|kilometres|kilometer|kilometers"),
        _unit("in", INCH, 'inch|inches|"|\N{DOUBLE PRIME}'),
        _unit("ft", FOOT, "foot|feet|'|\N{PRIME}"),
        _unit("yd", 3 * FOOT, "yard|yards"),
    ),
)

AREA: Final = Dimension(
    "area",
    (
        _unit("m2", 1, "sq m|sqm|square metre|square metres|square meter|square meters"),
        _unit("cm2", Fraction(1, 10**4), "sq cm|square centimetre|square centimetres"),
        _unit("mm2", Fraction(1, 10**6), "sq mm|square millimetre|square millimetres"),
        _unit("ft2", FOOT**2, "sq ft|sqft|sf|square foot|square feet"),
        _unit("in2", INCH**2, "sq in|square inch|square inches"),
    ),
)

TIME: Final = Dimension(
    "time",
    (
        _unit("s", 1, "sec|secs|second|seconds"),
        _unit("ms", Fraction(1, 1000), "millisecond|milliseconds"),
        _unit("min", 60, "mins|minute|minutes"),
        _unit("h", 3600, "hr|hrs|hour|hours"),
        _unit("days", 86400, "day|d"),
        _unit("weeks", 7 * 86400, "week|wk"),
    ),
    hints=dict.fromkeys(
        ("month", "months", "mo", "year", "years", "yr", "yrs", "a"),
        "A month or a year has no fixed length; write days.",
    ),
)


def _per(amount: Dimension, names: Iterable[str], times: Iterable[str]) -> Iterator[Unit]:
    """Make each amount over each time, in every spelling of both."""
    for name in names:
        for time_name in times:
            above, below = amount.exact[name], TIME.exact[time_name]
            over = {"days": "day"}.get(time_name, time_name)
            yield Unit(
                f"{above.name}/{over}",
                above.factor / below.factor,
                spellings=tuple(
                    f"{spelt}{sign}{time}"
                    for spelt in (above.name, *above.spellings)
                    for time in (below.name, *below.spellings)
                    for sign in ("/", " per ")
                ),
                note=above.note,
            )


STANDARD_FLOW: Final = (
    "A flow at standard conditions depends on which; send the flow at room conditions."
)
VOLUME_FLOW: Final = Dimension(
    "volume flow",
    (
        *_per(VOLUME, ("m3", "L", "ft3"), ("s", "min", "h", "days")),
        *_per(VOLUME, ("mL", "gal", "US gal", "imp gal"), ("min", "h", "days")),
        _unit("cfm", FOOT**3 / 60, "CFM"),
        _unit("cfh", FOOT**3 / 3600, "CFH"),
        _unit("lpm", Fraction(1, 60_000), "LPM"),
        _unit("gpm", US_GALLON / 60, "GPM", note=GALLON_NOTE.replace("'gal'", "'gpm'")),
    ),
    hints={
        **dict.fromkeys(
            ("ACH", "air changes", "air changes per hour", "ac/h", "1/h", "/h", "vol/h"),
            "Air changes are no flow: send air changes times the volume of the room.",
        ),
        **dict.fromkeys(
            ("scfm", "scfh", "slpm", "sccm", "Nm3/h", "Nl/min", "sm3/h", "SLM"), STANDARD_FLOW
        ),
    },
)

MASS_FLOW: Final = Dimension(
    "mass flow",
    (
        *_per(MASS, ("kg", "g", "lb"), ("s", "min", "h", "days")),
        *_per(MASS, ("t",), ("h", "days")),
    ),
)

# Name, pascals, and the spellings of the bare unit; gauge and absolute forms are made of them.
PRESSURES: Final = (
    ("kPa", Fraction(1000), ("kPa", "kpa")),
    ("Pa", Fraction(1), ("Pa",)),
    ("hPa", Fraction(100), ("hPa",)),
    ("MPa", Fraction(10**6), ("MPa",)),
    ("mbar", Fraction(100), ("mbar",)),
    ("bar", Fraction(10**5), ("bar", "bars")),
    ("psi", PSI, ("psi", "lbf/in2")),
)
PLAIN_GAUGE: Final = "A pressure without 'gauge' or 'absolute' was read as gauge."
PLAIN_ABSOLUTE: Final = "A pressure without 'gauge' or 'absolute' was read as absolute."
NOT_GAUGE: Final = "That is an absolute pressure; this field takes a gauge pressure."
NOT_ABSOLUTE: Final = "That is a gauge pressure; this field takes an absolute pressure."


def _marked(spellings: tuple[str, ...], mark: str, word: str) -> tuple[str, ...]:
    """Spell a pressure as gauge or absolute: ``barg``, ``bar(g)``, ``bar g``, ``bar gauge``."""
    forms = (mark, f"({mark})", f" {mark}", f" ({mark})", f" {word}", f" ({word})")
    short = {"absolute": (" abs", " (abs)"), "gauge": ()}[word]
    return tuple(f"{spelt}{form}" for spelt in spellings for form in (*forms, *short))


def _pressures(mark: str, word: str, plain_note: str) -> Iterator[Unit]:
    for name, pascals, spellings in PRESSURES:
        yield Unit(f"{name}({mark})", pascals, spellings=_marked(spellings, mark, word))
        yield Unit(name, pascals, spellings=spellings, note=plain_note)


def _other(mark: str, word: str, hint: str) -> dict[str, str]:
    return {text: hint for _, _, spellings in PRESSURES for text in _marked(spellings, mark, word)}


GAUGE: Final = Dimension(
    "gauge pressure",
    tuple(_pressures("g", "gauge", PLAIN_GAUGE)),
    hints=_other("a", "absolute", NOT_GAUGE) | dict.fromkeys(("atm", "mmHg", "torr"), NOT_GAUGE),
)
ABSOLUTE: Final = Dimension(
    "absolute pressure",
    (
        *_pressures("a", "absolute", PLAIN_ABSOLUTE),
        _unit("atm", 101325),
        _unit("mmHg", Fraction("133.322387415"), "mm Hg"),
        _unit("torr", Fraction(101325, 760), "Torr"),
        _unit("inHg", Fraction("25.4") * Fraction("133.322387415"), "in Hg"),
    ),
    hints=_other("g", "gauge", NOT_ABSOLUTE),
)
LOAD: Final = Dimension(
    "load on an area",
    (
        _unit("kPa", 1000, "kN/m2"),
        _unit("Pa", 1, "N/m2"),
        _unit("kg/m2", GRAVITY, "kgf/m2"),
        _unit("psf", POUND_FORCE / FOOT**2, "lb/ft2|lbf/ft2|lb/sq ft"),
        _unit("psi", PSI, "lb/in2|lbf/in2"),
    ),
)

ZERO_CELSIUS: Final = Fraction("273.15")
TEMPERATURE: Final = Dimension(
    "temperature",
    (
        _unit("°C", 1, "C|degC|deg C|Celsius|degrees Celsius", offset=ZERO_CELSIUS),
        _unit("K", 1, "kelvin|kelvins"),
        _unit(
            "°F",
            Fraction(5, 9),
            "F|degF|deg F|Fahrenheit|degrees Fahrenheit",
            offset=Fraction("459.67") * Fraction(5, 9),
        ),
    ),
)

SHARE: Final = Dimension(
    "share",
    (
        _unit("%", Fraction(1, 100), "pct|percent|per cent|vol%|vol %|% vol|%vol|% by volume"),
        _unit("ppm", Fraction(1, 10**6), "ppmv|ppm by volume"),
    ),
)
FORCE: Final = Dimension(
    "force",
    (
        _unit("N", 1, "newton|newtons"),
        _unit("lbf", POUND_FORCE),
        _unit("kgf", GRAVITY),
    ),
)
SPEED: Final = Dimension(
    "speed", (*_per(LENGTH, ("m", "ft"), ("s", "min")), _unit("fpm", FOOT / 60))
)
ONE: Final = Unit("1", Fraction(1))


def _field(suffix: str, dimension: Dimension, unit: str, example: str) -> FieldUnit:
    return FieldUnit(suffix, dimension, dimension.exact[unit], example)


LITRES: Final = _field("l", VOLUME, "L", "50 gal")
CUBIC_METRES: Final = _field("m3", VOLUME, "m3", "2500 ft3")
KILOGRAMS: Final = _field("kg", MASS, "kg", "60 lb")
CUBIC_METRES_PER_HOUR: Final = _field("m3_h", VOLUME_FLOW, "m3/h", "350 cfm")
LITRES_PER_MINUTE: Final = _field("l_min", VOLUME_FLOW, "L/min", "2 gal/min")
LITRES_PER_DAY: Final = _field("l_day", VOLUME_FLOW, "L/day", "40 mL/min")
KILOGRAMS_PER_HOUR: Final = _field("kg_h", MASS_FLOW, "kg/h", "20 lb/h")
KILOGRAMS_PER_DAY: Final = _field("kg_day", MASS_FLOW, "kg/day", "10 lb/day")
METRES: Final = _field("m", LENGTH, "m", "9 ft")
MILLIMETRES: Final = _field("mm", LENGTH, "mm", "0.5 in")
SQUARE_METRES: Final = _field("m2", AREA, "m2", "200 ft2")
SQUARE_MILLIMETRES: Final = _field("mm2", AREA, "mm2", "0.2 in2")
KILOPASCALS: Final = _field("kpa", GAUGE, "kPa", "22 psig")
KILOPASCALS_ABSOLUTE: Final = _field("kpa_abs", ABSOLUTE, "kPa", "1013 mbar(a)")
KILOPASCALS_OF_LOAD: Final = FieldUnit("kpa", LOAD, LOAD.exact["kPa"], "100 psf")
CELSIUS: Final = _field("c", TEMPERATURE, "°C", "68 °F")
KELVINS: Final = _field("k", TEMPERATURE, "K", "-196 °C")
SECONDS: Final = _field("s", TIME, "s", "2 min")
HOURS: Final = _field("h", TIME, "h", "90 min")
DAYS: Final = _field("days", TIME, "days", "26 weeks")
PERCENT: Final = _field("pct", SHARE, "%", "5000 ppm")
FRACTION: Final = FieldUnit("fraction", SHARE, ONE, "80 %")
NEWTONS: Final = _field("n", FORCE, "N", "10 lbf")
METRES_PER_SECOND: Final = _field("m_s", SPEED, "m/s", "100 ft/min")

DIMENSIONS: Final = (
    VOLUME, MASS, LENGTH, AREA, TIME, VOLUME_FLOW, MASS_FLOW, GAUGE, ABSOLUTE, LOAD, TEMPERATURE,
    SHARE, FORCE, SPEED,
)  # fmt: skip
FIELD_UNITS: Final[Mapping[str, FieldUnit]] = MappingProxyType(
    {
        unit.suffix: unit
        for unit in (
            LITRES, CUBIC_METRES, KILOGRAMS, CUBIC_METRES_PER_HOUR, LITRES_PER_MINUTE,
            LITRES_PER_DAY, KILOGRAMS_PER_HOUR, KILOGRAMS_PER_DAY, METRES, MILLIMETRES,
            SQUARE_METRES, SQUARE_MILLIMETRES, KILOPASCALS, KILOPASCALS_ABSOLUTE, CELSIUS, KELVINS,
            SECONDS, HOURS, DAYS, PERCENT, FRACTION, NEWTONS, METRES_PER_SECOND,
        )
    }
)  # fmt: skip


def field_unit_of(field_name: str) -> FieldUnit | None:
    """Find the unit that a field's name ends in, the longest ending first; none: no quantity.

    ``floor_rating_kpa`` is the one name whose ending means two things: a load, not a pressure.
    """
    if field_name == "floor_rating_kpa":
        return KILOPASCALS_OF_LOAD
    parts = field_name.split("_")
    endings = ("_".join(parts[start:]) for start in range(1, len(parts)))
    return next((FIELD_UNITS[ending] for ending in endings if ending in FIELD_UNITS), None)


def read_number(text: str) -> float:
    """Read a bare number: no unit, no thousands separator, finite."""
    number, rest = _split(text)
    if rest:
        raise UnitRefused("number-expected", "A number without a unit or a separator is expected.")
    return _finite(number)


def read_quantity(text: str, field: FieldUnit) -> Reading:
    """Read a number with its unit, in the unit of the field."""
    number, spelling = _split(text)
    if not spelling:
        raise UnitRefused(
            "unit-missing",
            "A number in quotes needs a unit; a bare number needs no quotes.",
            field.accepted,
        )
    unit = find_unit(spelling, field)
    return Reading(_finite(_converted(number, unit, field)), unit.name, unit.note)


def find_unit(spelling: str, field: FieldUnit) -> Unit:
    """Find a unit by its spelling among those that the field takes."""
    unit = field.dimension.find(spelling)
    if unit is not None:
        return unit
    tidy = _tidy(spelling).casefold()
    for text, hint in field.dimension.hints.items():
        if _tidy(text).casefold() == tidy:
            raise UnitRefused("unit-refused", hint, field.accepted)
    if tidy in {name.casefold() for name in field.dimension.exact}:
        raise UnitRefused(
            "unit-unknown", "Upper and lower case matter in this unit.", field.accepted
        )
    other = next((known.name for known in DIMENSIONS if known.find(spelling)), None)
    if other is not None:
        detail = f"That is a unit of {other}; this field takes {field.dimension.name}."
        raise UnitRefused("unit-of-other-kind", detail, field.accepted)
    raise UnitRefused("unit-unknown", "The unit is not known here.", field.accepted)


def convert(value: float, unit: Unit, field: FieldUnit) -> float:
    """Take a number in a unit to the unit of the field."""
    return _finite(_converted(_exact(value), unit, field))


def _exact(value: float) -> Fraction:
    try:
        # By its shortest decimal form: 0.1 in a file means a tenth, not the double nearest to it.
        return Fraction(repr(float(value)))
    except (ValueError, OverflowError):
        raise UnitRefused("number-expected", "A finite number is expected.") from None


def _converted(number: Fraction, unit: Unit, field: FieldUnit) -> Fraction:
    to = field.unit
    return (number * unit.factor + unit.offset - to.offset) / to.factor


def _finite(number: Fraction) -> float:
    try:
        value = float(number)
    except OverflowError:
        raise UnitRefused("out-of-range", "The number is too large.") from None
    if value == 0.0 and number != 0:
        raise UnitRefused("out-of-range", "The number is too small to be told from zero.")
    return value


def _split(text: str) -> tuple[Fraction, str]:
    """Part a text into its number and what follows."""
    if len(text) > LONGEST_TEXT:
        raise UnitRefused("too-long", f"A quantity has at most {LONGEST_TEXT} characters.")
    stripped = text.strip().replace("\N{MINUS SIGN}", "-", 1)
    found = NUMBER.match(stripped)
    if found is None:
        raise UnitRefused("number-expected", "A number comes first, such as 1000.5.")
    rest = stripped[found.end() :]
    if SEPARATED.match(rest):
        raise UnitRefused(
            "separator-refused",
            "Write 1000.5, with a point and without separators between thousands.",
        )
    if re.match(r"\s*/\s*[0-9]", rest):
        raise UnitRefused("separator-refused", "Write a fraction as a decimal, such as 0.5.")
    if re.match(r"[eE]?[+-]?[0-9]", rest):
        raise UnitRefused("out-of-range", "The exponent has at most three digits.")
    return Fraction(found.group()), rest.strip()
