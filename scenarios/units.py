"""Units at the edge of the program: a closed table, converted to metres and days; checked in the tests against pint.

Only lengths, elevations, coordinates and pure numbers may be bare. 1 yr = 365.25 d.
"""

import math
import re
from dataclasses import dataclass

from .messages import nearest

YEAR = 365.25
FOOT = 0.3048
SURVEY_FOOT = 1200.0 / 3937.0
GALLON = 231 * 0.0254**3  # US liquid gallon

_LENGTH = {"m": 1.0, "km": 1000.0, "cm": 0.01, "mm": 0.001, "ft": FOOT, "ft_us": SURVEY_FOOT, "in": 0.0254}
_TIME = {"d": 1.0, "h": 1 / 24, "min": 1 / 1440, "s": 1 / 86400, "yr": YEAR, "a": YEAR}
_VOLUME = {"m3": 1.0, "L": 1e-3, "ML": 1e3, "ft3": FOOT**3, "gal": GALLON}

UNITS: dict[str, dict[str, float]] = {
    "length": _LENGTH,
    "time": _TIME,
    "speed": {f"{a}/{t}": fa / ft for a, fa in _LENGTH.items() for t, ft in _TIME.items()},
    "rate": {f"{v}/{t}": fv / ft for v, fv in _VOLUME.items() for t, ft in _TIME.items()}
    | {"gpm": GALLON * 1440, "cfs": FOOT**3 * 86400, "mgd": 1e6 * GALLON},
    "discharge": {f"m2/{t}": 1 / ft for t, ft in _TIME.items()} | {f"ft2/{t}": FOOT**2 / ft for t, ft in _TIME.items()},
    "angle": {"deg": 1.0},
    "number": {"%": 0.01},
}
MODEL_UNIT = {
    "length": "m", "time": "d", "speed": "m/d", "rate": "m3/d", "discharge": "m2/d", "angle": "deg", "number": "1",
}  # fmt: skip
_COMMON = {
    "length": ["m", "ft", "km"],
    "time": ["d", "yr", "h"],
    "speed": ["m/d", "mm/yr", "mm/d", "m/s", "ft/d"],
    "rate": ["m3/d", "L/s", "m3/h", "gpm", "m3/yr", "ft3/d"],
    "discharge": ["m2/d", "ft2/d"],
    "angle": ["deg"],
    "number": ["%"],
}
_LONGEST = 1e8  # m; coordinates with the zone in front reach 6e7
_NUMBER = r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?"
_RAISED = str.maketrans("²³", "23")
_QUANTITY = re.compile(rf"^\s*({_NUMBER})\s*([^\s\d].*?)?\s*$")


class UnitError(ValueError):
    """A quantity that cannot be understood; ``rule`` names the fault, ``help`` says what to write instead."""

    def __init__(self, rule: str, text: str, help: str | None = None) -> None:
        super().__init__(text)
        self.rule = rule
        self.help = help


@dataclass(frozen=True)
class Bare:
    """What a bare length means: the factor (m) of ``site.length``."""

    length: float = 1.0


def quantity(text: object, dimension: str, bare: Bare | None = None) -> float:
    """A quantity in model units (m, d, m3/d, ...) from what a person wrote.

    dimension: a key of UNITS. Raises UnitError for a missing, unknown or wrong unit and for what is no number.
    """
    bare = bare or Bare()
    common = _COMMON[dimension][0]
    if isinstance(text, bool):
        raise UnitError("truth-value", f"'{str(text).lower()}' stands where a number belongs", _example(dimension))
    if isinstance(text, int | float):
        if not math.isfinite(text):
            raise UnitError("number", f"{text} is not a finite number")
        if dimension == "length":
            return _on_earth(float(text) * bare.length)
        if dimension == "number":
            return float(text)
        raise UnitError("unit", f"{text:g} needs a unit", f"write '{text:g} {common}' (allowed: {allowed(dimension)})")
    if not isinstance(text, str):
        raise UnitError("number", f"expected a number, instead received {_shown(text)}", _example(dimension))
    text = text.translate(_RAISED)
    if text.strip().lower() in ("yes", "no", "on", "off", "y", "n", "true", "false"):
        raise UnitError("truth-value", f"{text!r} stands where a number belongs", _example(dimension))
    if re.match(r"^\s*[+-]?\d+,\d+(\s|$)", text):
        raise UnitError("decimal-comma", f"decimal comma in {text!r}", f"write {text.replace(',', '.', 1)!r}")
    if re.match(r"^\s*\d+:\d+", text):
        raise UnitError("number", f"{text!r} is a time of day or a ratio, not a number", _example(dimension))
    found = _QUANTITY.match(text)
    if not found:
        raise UnitError("number", f"{text!r} is not a number", _example(dimension))
    number, unit = float(found.group(1)), (found.group(2) or "").replace(" ", "")
    if not unit:
        return quantity(number, dimension, bare)
    table = UNITS[dimension]
    if unit in table:
        value = quantity(number * table[unit], "number")  # refuses what has grown beyond all numbers
        return _on_earth(value) if dimension == "length" else value
    help = f"allowed: {allowed(dimension)}"
    for other, units in UNITS.items():
        if unit in units and other != dimension:
            raise UnitError("unit", f"{text!r} is a {_word(other)}, but a {_word(dimension)} belongs here", help)
    near = nearest(unit, table)
    raise UnitError("unit", f"unknown unit {unit!r}", f"did you mean {near!r}? ({help})" if near else help)


def _on_earth(length: float) -> float:
    """A length (m) that a place on Earth can have: geometry overflows on what is far beyond."""
    if abs(length) > _LONGEST:
        raise UnitError("number", f"{length:g} m is longer than anything on Earth")
    return length


def _example(dimension: str) -> str:
    return "write a number" if dimension in ("length", "number") else f"write it like '10 {_COMMON[dimension][0]}'"


def _shown(thing: object) -> str:
    return {list: "a list", dict: "a map", type(None): "nothing"}.get(type(thing), repr(thing))


def allowed(dimension: str) -> str:
    """The common units of a dimension, as an error lists them."""
    return ", ".join(_COMMON[dimension])


def _word(dimension: str) -> str:
    return {
        "speed": "length per time", "rate": "volume per time", "discharge": "flow per width", "number": "pure number"
    }.get(dimension, dimension)  # fmt: skip
