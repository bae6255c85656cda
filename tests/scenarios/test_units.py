"""The closed table of units against an independent one, and what is refused."""

import math

import pint
import pytest
from wellshed.scenarios.units import UNITS, YEAR, Bare, UnitError, quantity

# our spelling in pint's; a year there is 365.25 d as well
PINT = {
    "m": "meter", "km": "kilometer", "cm": "centimeter", "mm": "millimeter", "ft": "foot", "ft_us": "survey_foot",
    "in": "inch", "d": "day", "h": "hour", "min": "minute", "s": "second", "yr": "year", "a": "year", "m3": "meter**3",
    "L": "liter", "ML": "megaliter", "ft3": "foot**3", "gal": "gallon", "gpm": "gallon/minute", "cfs": "foot**3/second",
    "mgd": "1e6*gallon/day", "m2": "meter**2", "ft2": "foot**2", "deg": "degree", "%": "percent",
}  # fmt: skip
MODEL = {
    "length": "meter", "time": "day", "speed": "meter/day", "rate": "meter**3/day", "discharge": "meter**2/day",
    "angle": "degree", "number": "dimensionless",
}  # fmt: skip
EVERY = [(dimension, unit) for dimension, table in UNITS.items() for unit in table]


@pytest.fixture(scope="module")
def registry():
    return pint.UnitRegistry()


@pytest.mark.parametrize(("dimension", "unit"), EVERY, ids=[f"{d}:{u}" for d, u in EVERY])
def test_factor_is_that_of_an_independent_table(registry, dimension, unit):
    theirs = "/".join(f"({PINT[part]})" for part in unit.split("/"))
    expected = registry.parse_expression(theirs).to(MODEL[dimension]).magnitude
    assert quantity(f"1 {unit}", dimension) == pytest.approx(expected, rel=1e-9)


def test_year_has_365_and_a_quarter_days():
    assert YEAR == 365.25
    assert quantity("2 yr", "time") == 730.5


@pytest.mark.parametrize(
    ("text", "dimension", "value"),
    [
        ("450 m3/d", "rate", 450.0),
        ("450m3/d", "rate", 450.0),
        ("450 m³/d", "rate", 450.0),
        ("1e-4 m/s", "speed", 8.64),
        ("-3 mm/d", "speed", -0.003),
        (".5 m", "length", 0.5),
        (7, "length", 7.0),
        ("6%", "number", 0.06),
        ("41 L/s", "rate", 3542.4),
        ("3 m3 / d", "rate", 3.0),
    ],
)
def test_quantities(text, dimension, value):
    assert quantity(text, dimension) == pytest.approx(value, rel=1e-12)


def test_bare_lengths_take_the_unit_of_the_site():
    assert quantity(100, "length", Bare(0.3048)) == pytest.approx(30.48)
    assert quantity("100", "length", Bare(0.3048)) == pytest.approx(30.48)
    assert quantity("100 m", "length", Bare(0.3048)) == 100.0


@pytest.mark.parametrize(
    ("text", "dimension", "words"),
    [
        (450, "rate", "450 needs a unit; write '450 m3/d'"),
        ("450", "rate", "needs a unit"),
        ("450 m3/day", "rate", "did you mean 'm3/d'"),
        ("450 m/d", "rate", "length per time"),
        ("18", "speed", "18 needs a unit; write '18 m/d' (allowed: m/d, mm/yr"),
        ("2,5 m", "length", "write '2.5 m'"),
        ("12:30", "number", "not a number"),
        ("yes", "number", "'yes' stands where a number"),
        (True, "number", "'true' stands where a number"),
        (None, "length", "received nothing"),
        (".nan", "length", "is not a number"),
        ("nan", "length", "is not a number"),
        (math.nan, "length", "not a finite"),
        (math.inf, "number", "not a finite"),
        ("1e999 m", "length", "not a finite"),
        ("dry", "length", "is not a number"),
        ("<12.3", "length", "is not a number"),
        ([1], "length", "expected a number"),
        (1e300, "length", "longer than anything on Earth"),
        ("1e9 km", "length", "longer than anything on Earth"),
        ("1 000 m3/d", "rate", "is not a number"),
    ],
)
def test_refusals_say_what_is_allowed(text, dimension, words):
    with pytest.raises(UnitError) as caught:
        quantity(text, dimension)
    assert words in f"{caught.value}; {caught.value.help}"
