"""What the options of several questions share."""

from typing import Annotated

from pydantic import BeforeValidator, Field

from ..messages import meant
from ..scenario import Scenario

Fault = tuple[tuple[str | int, ...], str, str]  # path within the options, what is wrong, how to mend it


def as_list(raw: object) -> object:
    """One word or number in place of a list of one."""
    return [raw] if isinstance(raw, str | int | float) and not isinstance(raw, bool) else raw


Names = Annotated[list[str], BeforeValidator(as_list), Field(json_schema_extra={"items": {"type": "string"}})]


def unknown_cases(cases: list[str], scenario: Scenario) -> list[Fault]:
    """A fault for every asked case that the scenario does not have."""
    known = [case.name for case in scenario.cases]
    return [
        (("cases", i), f"case {name!r} is not in the scenario", meant(name, known, "cases"))
        for i, name in enumerate(cases)
        if name not in known
    ]
