"""The ground whose water reaches a well, and how soon."""

from typing import TYPE_CHECKING, Annotated

from pydantic import BeforeValidator, Field

from ..block import Block
from ..messages import meant
from ..quantities import Plain
from ..scenario import Scenario, WellInput
from ._shared import Fault, Names, as_list, unknown_cases

if TYPE_CHECKING:
    from ..cases import CaseAnswer
    from ..context import Context, Result

Days = Annotated[float, Plain("time", above=0.0)]


class Options(Block):
    """Capture zones of wells and the zones of given travel times."""

    wells: Names = Field(default_factory=list)
    """Pumping wells; none listed = all of them."""
    times: Annotated[list[Days], BeforeValidator(as_list)] = Field(default_factory=list)
    """Travel times whose zones are drawn, such as [50 d, 2 yr]."""
    cases: Names = Field(default_factory=list)
    """Cases that are delineated too, beside the field as it is."""


def problems(options: Options, scenario: Scenario) -> list[Fault]:
    """Faults of the options against the scenario."""
    found = unknown_cases(options.cases, scenario)
    pumping: set[str] = set()
    injecting: set[str] = set()
    for well in _wells(options, scenario):
        (injecting if well.rate.path.endswith(".injects") else pumping).add(well.name)
    for i, name in enumerate(options.wells):
        if name in pumping:
            continue
        text = f"well {name!r} injects: it has no capture zone" if name in injecting else f"well {name!r} is not known"
        found.append((("wells", i), text, meant(name, sorted(pumping), "pumping wells")))
    if not options.wells and not pumping:
        found.append(((), "no well pumps: there is no capture zone", "add a well with 'pumps', or drop the question"))
    return found


def _wells(options: Options, scenario: Scenario) -> list[WellInput]:
    """Wells of the base and those that an asked case adds."""
    wells = list(scenario.wells)
    for case in scenario.cases:
        if case.name in options.cases:
            wells += [c.feature for c in case.changes if c.verb == "add" and isinstance(c.feature, WellInput)]
    return wells


def answer(options: Options, case: "CaseAnswer", context: "Context") -> "list[Result]":
    """Zones of the asked wells in a case."""
    from ..capture import zones_of

    return zones_of(case, context, options)
