"""What every question is given, and what it gives back."""

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import shapely

from ..tracing.obstacles import Obstacles, make_obstacles
from .cases import CaseAnswer
from .fitting import Fitted
from .map_content import MapContent
from .scenario import Scenario

BASE = "base"
Progress = Callable[[str], None]


@dataclass(frozen=True)
class Check:
    """Something computed that must hold: its value and the bound it must not pass."""

    name: str
    passed: bool
    value: float
    bound: float


@dataclass(frozen=True)
class Row:
    """A feature of a GIS layer or a row of a table: a geometry (or None) and its columns."""

    geometry: shapely.Geometry | None
    columns: dict[str, Any]


@dataclass(frozen=True)
class Result:
    """The answer to one question in one case: its entry in answers.json, layers, tables, checks, map additions.

    ``on_map`` takes the map of the case and returns it with this answer on it; ``files`` are single geometries by
    file name; ``words`` is the answer in a sentence.
    """

    question: str
    case: str
    entry: dict[str, Any]
    words: str
    layers: dict[str, list[Row]] = field(default_factory=dict)
    tables: dict[str, list[dict[str, Any]]] = field(default_factory=dict)
    files: dict[str, Row] = field(default_factory=dict)
    checks: tuple[Check, ...] = ()
    on_map: Callable[[MapContent], MapContent] = field(default=lambda content: content)


@dataclass(frozen=True)
class Context:
    """The fitted site and its cases by name ("base" first)."""

    scenario: Scenario
    fitted: Fitted
    cases: dict[str, CaseAnswer]
    progress: Progress = lambda _: None


def drawn_area(scenario: Scenario) -> shapely.Geometry:
    """The drawn box as a polygon (m)."""
    site = scenario.site
    return shapely.box(site.x0, site.y0, site.x1, site.y1)


def obstacles_of(case: CaseAnswer, margin: float = 1.0) -> Obstacles:
    """Lines at which water can end, and a box wider than the drawn area by ``margin`` times its size on every side.

    Water that leaves the drawn area may come back into it; it is followed until it leaves the wider box.
    """
    site = case.scenario.site
    dx, dy = margin * (site.x1 - site.x0), margin * (site.y1 - site.y0)
    box = site.x0 - dx, site.x1 + dx, site.y0 - dy, site.y1 + dy
    return make_obstacles(case.model.places.lines, box)
