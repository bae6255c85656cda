"""The water table of a case: heads on a grid, contours, flow arrows, summits and basins, gaining and losing reaches."""

from dataclasses import replace
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray

from ..elements.flow_field import FlowField
from ..elements.lake import LakeEdge
from ..elements.outline import Outline
from ..solver.balance import exchange_pieces
from ..solver.network import Line
from ..tracing.pathlines import trace
from .cases import CaseAnswer
from .context import Check, Context, Result, Row, obstacles_of
from .contours import contour_interval, contour_levels, contour_lines
from .map_content import MapContent, Reach

Floats = NDArray[np.float64]
Place = tuple[float, float, float]  # x, y, head (m)
GRID = 170  # cells along the longer side of the drawn area
STILL = 1e-3  # of the largest strength on the lines: less exchange than this is none
REACH = 3  # cells: a summit is higher than all ground within
ARROWS = 7  # arrows along the longer side


def water_table(case: CaseAnswer, context: Context, interval: float | None) -> Result:
    """Answer ``water_table`` for a case; interval (m), None = by the rule of ``contours``."""
    context.progress(f"contouring {case.name}")
    x, y, head, dry = head_grid(case)
    low, high = (float(np.nanmin(head)), float(np.nanmax(head))) if np.isfinite(head).any() else (0.0, 0.0)
    if interval is None:
        interval = contour_interval(low, high) if high > low else 1.0
    lines = contour_lines(x, y, head, contour_levels(low, high, interval))
    reaches = reaches_of(case)
    summits, basins = _extremes(case, x, y, head)
    arrows = _arrows(case, x, y, head)
    entry: dict[str, Any] = {
        "question": "water_table",
        "case": case.name,
        "interval": interval,
        "lowest": low,
        "highest": high,
        "summits": [dict(zip(("x", "y", "head"), s, strict=True)) for s in summits],
        "basins": [dict(zip(("x", "y", "head"), b, strict=True)) for b in basins],
        "drawdown": case.drawdown,
        "exchange_change": case.exchange_change,
    }
    layers = {
        "head_contours": [Row(shapely.LineString(line), {"case": case.name, "head_m": h}) for h, line in lines],
        "water_paths": [Row(shapely.LineString(a[:, :2]), {"case": case.name}) for a in arrows],
        "exchange": [
            Row(shapely.LineString(r.line), {"case": case.name, "feature": name, "state": r.state, "into_m2_d": into})
            for name, into, r in reaches
        ],
    }

    near = REACH * float(x[1] - x[0])

    def on_map(content: MapContent) -> MapContent:
        return replace(
            content, x=x, y=y, head=head, interval=interval, arrows=tuple(arrows),
            reaches=tuple(r for _, _, r in reaches), summits=tuple(_away_from_wells(case, summits, near)),
            basins=tuple(_away_from_wells(case, basins, near)),
        )  # fmt: skip

    words = f"Water table {low:.2f} to {high:.2f} m, contours every {interval:g} m."
    if dry:
        words += f" {dry} of {np.isfinite(head).sum() + dry} grid cells are dry."
    check = Check(f"no dry ground in {case.name} (cells)", dry == 0, float(dry), 0.0)
    return Result("water_table", case.name, entry, words, layers, checks=(check,), on_map=on_map)


def head_grid(case: CaseAnswer) -> tuple[Floats, Floats, Floats, int]:
    """Grid x (nx,), y (ny,), heads (ny, nx) in the drawn area (NaN off the aquifer or dry); number of dry cells."""
    site = case.scenario.site
    step = max(site.x1 - site.x0, site.y1 - site.y0) / GRID
    x = np.linspace(site.x0, site.x1, max(2, round((site.x1 - site.x0) / step) + 1))
    y = np.linspace(site.y0, site.y1, max(2, round((site.y1 - site.y0) / step) + 1))
    at_x, at_y = np.meshgrid(x, y)
    ground = on_ground(case, at_x, at_y)
    potential = np.full(at_x.shape, np.nan)
    potential[ground] = case.solution.flow.potential(at_x[ground], at_y[ground])
    dry = ground & ~(potential > 0.0)
    head = case.solution.flow.aquifer.head(potential)
    head[dry] = np.nan
    return x, y, head, int(dry.sum())


def on_ground(case: CaseAnswer, x: Floats, y: Floats) -> NDArray[np.bool_]:
    """Where the aquifer is: outside lakes, inside closed outlines and island shores."""
    keep = np.ones(x.shape, dtype=bool)
    for line in case.model.places.lines:
        if not getattr(line, "closed", False):
            continue
        ring = shapely.Polygon(np.stack([line.x, line.y], axis=1))
        shapely.prepare(ring)
        inside = shapely.contains_xy(ring, x, y)
        land_inside = isinstance(line, Outline) or (isinstance(line, LakeEdge) and line.land_inside)
        keep &= inside if land_inside else ~inside
    return keep


def reaches_of(case: CaseAnswer) -> list[tuple[str, float, Reach]]:
    """Stretches of streams and shores in one state: name, water that enters the aquifer there (m2/d), the stretch."""
    state = case.solution.state
    mesh, places = state.system.mesh, case.model.places
    if mesh.edge.size == 0:
        return []
    a, b, strength = exchange_pieces(mesh, state.x)
    names = [line.name for line in places.lines]
    line = mesh.edges.line[mesh.edge]
    walls = np.array([isinstance(element, Outline) for element in places.lines])[line]
    largest = float(np.nanmedian(abs(strength[~walls]))) if np.any(~walls) else 0.0
    out = []
    for p in np.flatnonzero(~walls):
        mean = np.nan_to_num(strength[p])
        states = np.where(abs(mean) <= STILL * largest, "still", np.where(mean > 0, "gains", "loses"))
        start = 0
        for k in range(1, len(mean) + 1):
            if k == len(mean) or states[k] != states[start]:
                places_z = np.append(a[p, start:k], b[p, k - 1]) + complex(*places.origin)
                stretch = np.stack([places_z.real, places_z.imag], axis=1)
                length = abs(np.diff(places_z))
                into = -float(np.sum(mean[start:k] * length) / max(length.sum(), 1e-12))
                out.append((names[line[p]], into, Reach(stretch, str(states[start]))))
                start = k
    return out


def _extremes(case: CaseAnswer, x: Floats, y: Floats, head: Floats) -> tuple[list[Place], list[Place]]:
    """Summits and basins: cells higher or lower than all cells within REACH of them, all on ground, off the waters.

    At a stream's end or beside a lake the head is prescribed; a highest or lowest place there is no news.
    """
    window = 2 * REACH + 1
    if min(head.shape) < window:
        return [], []
    around = np.lib.stride_tricks.sliding_window_view(head, (window, window)).reshape(
        head.shape[0] - 2 * REACH, head.shape[1] - 2 * REACH, -1
    )
    here = head[REACH:-REACH, REACH:-REACH]
    alone = np.isfinite(around).all(axis=2) & (np.sum(around == here[..., None], axis=2) == 1)
    waters = [line for line in case.model.places.lines if not isinstance(line, Outline)]
    lines = shapely.multilinestrings([_closed_line(line) for line in waters]) if waters else None
    found = []
    for extreme in (around.max(axis=2), around.min(axis=2)):
        j, i = np.nonzero(alone & (here == extreme))
        at = [(float(x[REACH + a]), float(y[REACH + b]), float(here[b, a])) for b, a in zip(j, i, strict=True)]
        near = REACH * float(x[1] - x[0])
        found.append([p for p in at if lines is None or shapely.distance(shapely.Point(p[:2]), lines) > near])
    return found[0], found[1]


def _closed_line(line: Line) -> shapely.LineString:
    places = np.stack([line.x, line.y], axis=1)
    return shapely.LineString(np.concatenate([places, places[:1]]) if getattr(line, "closed", False) else places)


def _away_from_wells(case: CaseAnswer, places: list[Place], reach: float) -> list[Place]:
    """Places that no well's own mark stands on."""
    wells = case.model.places.wells
    return [p for p in places if all(np.hypot(p[0] - w.x, p[1] - w.y) > reach for w in wells)]


def _arrows(case: CaseAnswer, x: Floats, y: Floats, head: Floats) -> list[Floats]:
    """Short pathlines from an even scatter of places, all of one travel time, so that length shows speed."""
    step = max(np.ptp(x), np.ptp(y)) / ARROWS
    at_x, at_y = np.meshgrid(np.arange(x[0] + 0.5 * step, x[-1], step), np.arange(y[0] + 0.5 * step, y[-1], step))
    at_x = at_x + np.where(np.arange(at_x.shape[0]) % 2 == 1, 0.25, -0.25)[:, None] * step
    ground = on_ground(case, at_x, at_y)
    start_x, start_y = at_x[ground], at_y[ground]
    if start_x.size == 0:
        return []
    flow: FlowField = case.solution.flow
    wet = flow.potential(start_x, start_y) > 0.0
    start_x, start_y = start_x[wet], start_y[wet]
    if start_x.size == 0:
        return []
    speed = np.hypot(*flow.velocity(start_x, start_y))
    moving = speed[speed > 0]
    if moving.size == 0:
        return []
    days = 0.5 * step / float(np.median(moving))
    paths = trace(flow, start_x, start_y, lines=obstacles_of(case, 0.0), t_max=days)
    out = []
    for points in paths.points:
        length = float(np.hypot(*np.diff(points[:, :2], axis=0).T).sum())
        if length > 0.08 * step:
            out.append(_within(points, 0.8 * step))
    return out


def _within(points: Floats, most: float) -> Floats:
    """The first stretch of a path, at most ``most`` (m) long."""
    along = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(points[:, :2], axis=0).T))])
    if along[-1] <= most:
        return points
    keep = points[along < most]
    end = np.array([np.interp(most, along, points[:, k]) for k in range(3)])
    return np.concatenate([keep, end[None, :]])
