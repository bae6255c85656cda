"""Numbers as a scenario states them: bare, with a unit, estimated, free, with a source; checked as they are read."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Literal

from pydantic import GetCoreSchemaHandler, GetJsonSchemaHandler, ValidationInfo
from pydantic_core import CoreSchema, PydanticCustomError, core_schema

from .messages import comma_help, meant
from .scenario import Value
from .units import MODEL_UNIT, Bare, UnitError, allowed, quantity


@dataclass(frozen=True)
class Stated:
    """A number in model units with what is known about it (see ``scenario.Value``), not yet tied to its path."""

    value: float
    unit: str
    kind: Literal["known", "estimate", "free"] = "known"
    factor: float | None = None
    sd: float | None = None
    source: str | None = None

    def at(self, path: str, sign: float = 1.0) -> Value:
        """The value that stands at a path, times a sign."""
        return Value(path, sign * self.value, self.unit, self.kind, self.factor, self.sd, self.source)


def refuse(rule: str, text: str, help: str | None = None, at: tuple[str | int, ...] = (), key: bool = False) -> Any:
    """Raise a problem at the value that is being read, or at a part of it."""
    raise PydanticCustomError(
        "wellshed", "{text}", {"rule": rule, "text": text, "help": help, "at": at, "key": key}
    )  # fmt: skip


@dataclass(frozen=True)
class Plain:
    """A number known exactly, as a float in model units; bounds are in model units too."""

    dimension: str
    above: float | None = None
    least: float | None = None
    most: float | None = None
    below: float | None = None

    def read(self, raw: object, info: ValidationInfo, at: tuple[str | int, ...] = ()) -> float:
        """The number, or a refusal that names unit and range."""
        bare = (info.context or {}).get("bare", Bare())
        try:
            value = quantity(raw, self.dimension, bare)
        except UnitError as error:
            refuse(error.rule, str(error), error.help, at)
        self.check(value, raw, at)
        return value

    def check(self, value: float, raw: object, at: tuple[str | int, ...] = ()) -> None:
        """Refuse a value (model units) out of range."""
        bad = (
            (self.above is not None and not value > self.above)
            or (self.least is not None and not value >= self.least)
            or (self.most is not None and not value <= self.most)
            or (self.below is not None and not value < self.below)
        )
        if bad:
            help = None
            if self.dimension == "number" and 1.0 < value <= 100.0 and (self.most == 1.0 or self.below == 1.0):
                help = f"{value:g} per cent is {value / 100:g} or '{value:g}%'"
            refuse("range", f"must be {self.range()}; received {raw}", help, at)

    def range(self) -> str:
        """The range in words."""
        unit = MODEL_UNIT[self.dimension]
        unit = "" if unit == "1" else f" {unit}"
        parts = [
            None if self.above is None else f"above {self.above:g}{unit}",
            None if self.least is None else f"at least {self.least:g}{unit}",
            None if self.most is None else f"at most {self.most:g}{unit}",
            None if self.below is None else f"below {self.below:g}{unit}",
        ]
        return " and ".join(p for p in parts if p)

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.with_info_plain_validator_function(self.read)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> dict[str, Any]:
        bare = self.dimension in ("length", "number")
        said = f"Units: {allowed(self.dimension)}." + (f" Range: {self.range()}." if self.range() else "")
        return {"type": ["number", "string"] if bare else "string", "description": said}


_KEYS = ("value", "estimate", "free", "factor", "sd", "source")


@dataclass(frozen=True)
class Takes(Plain):
    """A number that may carry its spread and its source; ``fitted`` False for one that no level can speak about."""

    fitted: bool = True

    def read(self, raw: object, info: ValidationInfo, at: tuple[str | int, ...] = ()) -> Any:
        """The number with what is known about it."""
        unit = MODEL_UNIT[self.dimension]
        if not isinstance(raw, Mapping):
            return Stated(super().read(raw, info, at), unit)
        for key in raw:
            if key not in _KEYS:
                help = comma_help(key, raw[key]) or meant(key, _KEYS)
                refuse("unknown-key", f"{key!r} is not a key of a number", help, (*at, key), key=True)
        given = [k for k in ("value", "estimate", "free") if k in raw]
        if len(given) != 1:
            refuse("form", "a number's map has one of 'value', 'estimate' and 'free'", at=at)
        kind = given[0]
        if kind != "value" and not self.fitted:
            refuse("form", "this number is not fitted: state its value", "write the number alone",
                   (*at, kind), key=True)  # fmt: skip
        value = super().read(raw[kind], info, (*at, kind))
        factor = sd = None
        spreads = [k for k in ("factor", "sd") if k in raw]
        if kind == "estimate":
            if len(spreads) != 1:
                refuse("spread", "an estimate needs one of 'factor' and 'sd'",
                       "two chances in three lie within estimate/factor .. estimate x factor, or within estimate +- sd",
                       at)  # fmt: skip
        elif spreads:
            refuse(
                "spread", f"{spreads[0]!r} goes with 'estimate', not with {kind!r}", None, (*at, spreads[0]), key=True
            )
        if "factor" in raw:
            factor = Plain("number", above=1.0).read(raw["factor"], info, (*at, "factor"))
            if value == 0.0:
                refuse("spread", "an estimate of 0 has no factor: state its 'sd'", None, (*at, "factor"), key=True)
        if "sd" in raw:
            sd = Plain(self.dimension, above=0.0).read(raw["sd"], info, (*at, "sd"))
        source = raw.get("source")
        said: Any = "known" if kind == "value" else kind
        return Stated(value, unit, said, factor, sd, None if source is None else str(source))

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> dict[str, Any]:
        number = super().__get_pydantic_json_schema__(schema, handler)
        just = {"type": number["type"]}
        ways = [{"required": ["value"], "properties": {"value": just, "source": {"type": "string"}}}]
        if self.fitted:
            kept = {"sd": just, "factor": {"type": "number", "exclusiveMinimum": 1}, "source": {"type": "string"}}
            ways.append({"required": ["estimate"], "properties": {"estimate": just, **kept}})
            ways.append({"required": ["free"], "properties": {"free": just, "source": {"type": "string"}}})
        maps = [{"type": "object", "additionalProperties": False, **way} for way in ways]
        return {"anyOf": [just, *maps], "description": number["description"]}
