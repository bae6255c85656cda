"""From the answers of a case to the content of its map: what stands on it, and what must be read with it."""

import numpy as np

from ..elements.lake import LakeEdge
from ..elements.outline import Outline
from .building import Model
from .cases import CaseAnswer
from .context import BASE, Check, Result
from .fitting import Fitted
from .map_content import LevelMark, MapContent, WellMark
from .scenario import Scenario
from .summary import residual_rows


def case_map(
    case: CaseAnswer, scenario: Scenario, model: Model, fitted: Fitted, results: list[Result], checks: list[Check]
) -> MapContent:
    """The map of a case with every answer given for it; checks: those that its numbers rest on.

    scenario, model, fitted: of the base, which the levels belong to.
    """
    site = case.scenario.site
    places, setting = case.model.places, case.solution.state.setting
    lakes, outline = [], None
    for k, line in enumerate(places.lines):
        xy = np.stack([line.x, line.y], axis=1)
        if isinstance(line, LakeEdge) and line.closed and not line.land_inside:
            lakes.append((line.name, float(line.stage + setting.shifts[k]), xy))
        elif isinstance(line, Outline):
            outline = np.concatenate([xy, xy[:1]]) if line.closed else xy
    shores = [
        (e.name, np.stack([e.x, e.y], axis=1))
        for e in places.lines
        if isinstance(e, LakeEdge) and not (e.closed and not e.land_inside)
    ]
    streams = [(s.name, np.stack([s.x, s.y], axis=1)) for s in case.scenario.streams]
    wells = [WellMark(w.name, w.x, w.y, float(r)) for w, r in zip(places.wells, setting.well_rates, strict=True)]
    levels = []
    if case.name == BASE:
        levels = [
            LevelMark(r["name"], r["x"], r["y"], r["observed"], r["residual"], r["left_out"] is not None)
            for r in residual_rows(scenario, model, fitted)
            if r["kind"] == "level"
        ]
    empty = np.zeros(0)
    failed = tuple(c.name for c in checks if not c.passed)
    content = MapContent(
        scenario.title, "" if case.name == BASE else f"Case: {case.name}", (site.x0, site.x1, site.y0, site.y1),
        site.crs, site.heights, _footer(case, model, fitted, failed), empty, empty, np.zeros((0, 0)), 1.0, tuple(lakes),
        tuple(streams + shores), outline, wells=tuple(wells), levels=tuple(levels), incomplete=failed,
    )  # fmt: skip
    for result in results:
        content = result.on_map(content)
    return content


def _footer(case: CaseAnswer, model: Model, fitted: Fitted, failed: tuple[str, ...]) -> tuple[str, ...]:
    """What must be read with the map: assumptions, rates, datum, what was assumed, where it comes from."""
    from .. import __version__

    scenario, site = case.scenario, case.scenario.site
    places, setting = case.model.places, case.solution.state.setting
    rates = ", ".join(
        f"{w.name} {'pumps' if r > 0 else 'injects'} {abs(r):.4g} m3/d"
        for w, r in zip(places.wells, setting.well_rates, strict=True)
    )
    unknown = len(model.parameters) + (model.porosity.kind != "known")
    told = sum(fitted.result.informed > 0.5) if fitted.result is not None else 0
    if fitted.result is not None:
        how = f"{unknown - told} of {unknown} uncertain numbers rest mainly on their estimates"
    else:
        how = f"all {unknown} uncertain numbers are estimates: no level was fitted"
    lines = [
        f"Steady, one layer, no vertical resistance; drawn at {rates or 'no pumping'}; heights in m, {site.heights}; "
        f"{how}.",
        "Times are means and first arrival is earlier; a line is not a wall. Protection zones follow local codes and "
        "the judgement of a licensed professional.",
        f"Coordinates {site.crs}, m. {'Period ' + site.period + '. ' if site.period else ''}Boundary conditions met to "
        f"{1000 * case.solution.boundary.max_misfit:.2g} mm. wellshed {__version__}, scenario {scenario.file.name} "
        f"{scenario.sha256[:12]}, seed {scenario.seed}.",
    ]
    doubts = [w for w in fitted.warnings if w.startswith("The readings' own errors")]
    lines = [*doubts, *lines]
    if failed:
        lines.insert(0, "INCOMPLETE, failed checks: " + "; ".join(failed[:3]) + ("; ..." if len(failed) > 3 else ""))
    return tuple(lines)
