"""The water table: contours, flow arrows, summits and basins, gaining and losing reaches."""

from typing import TYPE_CHECKING, Annotated

from pydantic import Field, PlainValidator, ValidationInfo

from ..block import Block
from ..quantities import Plain
from ..scenario import Scenario
from ._shared import Fault, Names, unknown_cases

if TYPE_CHECKING:
    from ..cases import CaseAnswer
    from ..context import Context, Result


def _interval(raw: object, info: ValidationInfo) -> float | None:
    return None if raw == "auto" else Plain("length", above=0.0).read(raw, info)


class Options(Block):
    """A map of the water table."""

    interval: Annotated[float | None, PlainValidator(_interval, json_schema_input_type=float | str)] = None
    """Contour interval (length); `auto` gives 5 to 8 steps of 1, 2 or 5 x 10^n."""
    cases: Names = Field(default_factory=list)
    """Cases that are mapped too, beside the field as it is."""


def problems(options: Options, scenario: Scenario) -> list[Fault]:
    """Faults of the options against the scenario."""
    return unknown_cases(options.cases, scenario)


def answer(options: Options, case: "CaseAnswer", context: "Context") -> "list[Result]":
    """The water table of a case."""
    from ..water_table import water_table

    return [water_table(case, context, options.interval)]
