"""From answers to the map of a case: what stands on it, its footer, its files."""

import os
import signal
import sys
import time
from dataclasses import dataclass
from pathlib import Path

import matplotlib as mpl
import numpy as np

from ..elements.lake import LakeEdge
from ..elements.outline import Outline
from .answering import Answers
from .context import BASE
from .map_content import LevelMark, MapContent, WellMark
from .maps import STYLE, draw_map
from .summary import residual_rows

DPI = 160
PATIENCE = 120.0  # s for the maps of all cases


@dataclass(frozen=True)
class CaseMap:
    """A map ready to be saved."""

    content: MapContent

    def save(self, stem: Path) -> None:
        """Write stem.png and stem.svg; the same bytes for the same content."""
        figure = draw_map(self.content)
        with mpl.rc_context({**STYLE, "svg.hashsalt": stem.name}):
            figure.savefig(stem.with_suffix(".svg"), metadata={"Date": None, "Title": self.content.title})
        figure.savefig(stem.with_suffix(".png"), dpi=DPI, metadata={"Software": None})


def save_maps(maps: list[tuple[CaseMap, Path]], second_process: bool = False) -> None:
    """Save maps to their stems.

    second_process: the first one here, the others beside it in a forked process (Linux). For a program of which we
    know the threads: those of the kernels are idle by now, and drawing starts none. What the second process could
    not save is drawn here, where an error is raised as usual.
    """
    first, others = maps[:1], maps[1:]
    child = os.fork() if second_process and others and sys.platform == "linux" else None
    if child == 0:
        code = 1
        try:
            for drawn, stem in others:
                drawn.save(stem)
            code = 0
        finally:
            os._exit(code)
    saved = False
    try:
        for drawn, stem in first:
            drawn.save(stem)
    finally:
        if child is not None:
            saved = _ended_well(child)
    for drawn, stem in [] if saved else others:
        drawn.save(stem)


def _ended_well(child: int) -> bool:
    """Whether a process ends with code 0; one that hangs is stopped."""
    end = time.monotonic() + PATIENCE
    while time.monotonic() < end:
        found, status = os.waitpid(child, os.WNOHANG)
        if found:
            return status == 0
        time.sleep(0.01)
    os.kill(child, signal.SIGKILL)
    os.waitpid(child, 0)
    return False


def map_of(answers: Answers, case_name: str) -> CaseMap:
    """The map of a case with every answer given for it."""
    case = answers.cases[case_name]
    scenario, site = case.scenario, case.scenario.site
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
    streams = [(s.name, np.stack([s.x, s.y], axis=1)) for s in scenario.streams]
    wells = [WellMark(w.name, w.x, w.y, float(r)) for w, r in zip(places.wells, setting.well_rates, strict=True)]
    levels = []
    if case_name == BASE:
        levels = [
            LevelMark(r["name"], r["x"], r["y"], r["observed"], r["residual"], r["left_out"] is not None)
            for r in residual_rows(answers.scenario, answers.model, answers.fitted)
            if r["kind"] == "level"
        ]
    empty = np.zeros(0)
    failed = tuple(c.name for c in answers.checks if not c.passed)
    content = MapContent(
        scenario.title, "" if case_name == BASE else f"Case: {case_name}", (site.x0, site.x1, site.y0, site.y1),
        site.crs, site.heights, _footer(answers, case_name, failed), empty, empty, np.zeros((0, 0)), 1.0, tuple(lakes),
        tuple(streams + shores), outline, wells=tuple(wells), levels=tuple(levels), incomplete=failed,
    )  # fmt: skip
    for result in answers.results:
        if result.case == case_name:
            content = result.on_map(content)
    return CaseMap(content)


def _footer(answers: Answers, case_name: str, failed: tuple[str, ...]) -> tuple[str, ...]:
    """What must be read with the map: assumptions, rates, datum, what was assumed, where it comes from."""
    from .. import __version__

    case = answers.cases[case_name]
    scenario, site = answers.scenario, answers.scenario.site
    places, setting = case.model.places, case.solution.state.setting
    rates = ", ".join(
        f"{w.name} {'pumps' if r > 0 else 'injects'} {abs(r):.4g} m3/d"
        for w, r in zip(places.wells, setting.well_rates, strict=True)
    )
    unknown = len(answers.model.parameters) + (answers.model.porosity.kind != "known")
    fitted = answers.fitted.result is not None
    told = sum(answers.fitted.result.informed > 0.5) if answers.fitted.result is not None else 0
    how = f"{unknown - told} of {unknown} uncertain numbers rest mainly on their estimates" if fitted else (
        f"all {unknown} uncertain numbers are estimates: no level was fitted"
    )  # fmt: skip
    lines = [
        f"Steady, one layer, no vertical resistance; drawn at {rates or 'no pumping'}; heights in m, {site.heights}; "
        f"{how}.",
        "Times are means and first arrival is earlier; a line is not a wall. Protection zones follow local codes and "
        "the judgement of a licensed professional.",
        f"Coordinates {site.crs}, m. {'Period ' + site.period + '. ' if site.period else ''}Boundary conditions met to "
        f"{1000 * case.solution.boundary.max_misfit:.2g} mm. wellshed {__version__}, scenario {scenario.file.name} "
        f"{scenario.sha256[:12]}, seed {scenario.seed}.",
    ]
    doubts = [w for w in answers.fitted.warnings if w.startswith("The readings' own errors")]
    lines = [*doubts, *lines]
    if failed:
        lines.insert(0, "INCOMPLETE, failed checks: " + "; ".join(failed[:3]) + ("; ..." if len(failed) > 3 else ""))
    return tuple(lines)
