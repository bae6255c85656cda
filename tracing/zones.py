"""Capture zone and time zones of a well: below which places some water, at some depth, goes to the well.

Pathlines are followed against the flow from a circle round the screen. Neighbours that part are joined by further
pathlines between them, until they stay close or start closer than rounding tells apart: those part at a dividing
line (a stagnation point lies between them). The zone is the ground swept by the neighbours that stay together; its
border is the front of their ends and, at every parting, the two pathlines on both sides of the dividing line.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray

from ..elements.flow_field import FlowField
from ..elements.local_tree import LocalArrays
from .apart import farthest
from .endings import Ending
from .obstacles import Obstacles
from .pathlines import Pathlines, series_of, trace

Floats = NDArray[np.float64]
FIRST_PATHS = 144
MOST_PATHS = 1500
PARTED = 1e-7  # rad: neighbours that start this close and still part have a dividing line between them
WIDE = 0.05  # of the zone's width: neighbouring pathlines farther apart get others between them
TOGETHER = 1e-3  # of the zone's width: neighbours that stay this close run along the same line
FRONT = 0.03  # of a front's size: neighbouring places on it farther apart get others between them
STEP_ERROR = 1e-4  # m of position a step
CLOSE = 1e-5  # of a ring's size: vertices that move its line by less are left out
CUT = 1e-6  # of the area: more than this outside the clip makes a zone open
SLIVER = 1e-6  # of the area: smaller parts and holes come from rounding
SAMPLES = 24  # places on a pathline at which its distance to the next one is taken
SPARSE = 8  # one in so many points of the pathlines tells how wide the zone is
STRETCH = 1.0001  # start on a circle just outside the screen


@dataclass(frozen=True)
class TimeZone:
    """Ground from which water reaches the well within ``days``."""

    days: float
    polygon: shapely.Geometry
    area: float


@dataclass(frozen=True)
class CaptureZone:
    """Zone of one well.

    polygon, area (m2): the whole zone inside the clip; open: it leaves the area in which water was followed;
    supply: share of the rate by source ("recharge", each line's name, "beyond the map"); times: as asked; endings:
    how many pathlines ended why; parted: number of dividing lines met; settled: False where more pathlines were
    wanted than are allowed, so that the border is coarser than it should be.
    """

    polygon: shapely.Geometry
    area: float
    open: bool
    supply: dict[str, float]
    times: tuple[TimeZone, ...]
    endings: dict[str, int]
    parted: int
    settled: bool
    paths: Pathlines


def capture_zone(
    flow: FlowField,
    well: int,
    obstacles: Obstacles,
    times: Sequence[float] = (),
    clip: shapely.Geometry | None = None,
    tree: LocalArrays | None = None,
) -> CaptureZone:
    """Zone of well number ``well`` of the field, and its time zones (d).

    obstacles: lines at which water can come from, and the box in which it is followed; clip: what the polygons are
    cut to (the drawn area); tree: ``series_of`` the field and the obstacles, if at hand.
    Raises ValueError for a well that does not pump.
    """
    wx, wy, rate, radius = flow.arrays.wells[well]
    if rate <= 0.0:
        raise ValueError("only a pumping well has a capture zone")
    centre = np.array([wx + flow.origin[0], wy + flow.origin[1]])
    circle = radius * STRETCH
    marks = np.unique(np.asarray(times, dtype=float))
    angles = 2.0 * np.pi * (np.arange(FIRST_PATHS) + 0.5) / FIRST_PATHS
    tree = series_of(flow, obstacles) if tree is None else tree
    paths = _follow(flow, centre, circle, angles, obstacles, marks, tree)
    gaps: dict[tuple[float, float], tuple[float, float]] = {}
    while True:
        steps = _steps(angles)
        near, far = _gaps(angles, paths, gaps)
        size = _size(paths)
        wide = far > WIDE * size
        # one of two paths along the same divide may be spent before the other: they do not part
        spent = wide & (near <= TOGETHER * size) & _first_is_spent(paths)
        apart = wide & ~spent & (steps <= PARTED)
        between = _between(angles, steps, wide & ~spent & ~apart, _stretched(paths) & (steps > PARTED))
        if between.size == 0 or angles.size > MOST_PATHS:
            break
        more = _follow(flow, centre, circle, between, obstacles, marks, tree)
        angles, paths = _merged(angles, paths, between, more)
    whole = _polygon(paths, apart, spent, None)
    asked = []
    for days in times:
        k = int(np.flatnonzero(marks == days)[0])
        ground = _clipped(_polygon(paths, apart, spent, k), clip)
        asked.append(TimeZone(float(days), ground, float(ground.area)))
    leaves = bool(np.any(paths.endings == Ending.DRAWN_AREA))
    clipped = _clipped(whole, clip)
    is_open = leaves or clipped.area < whole.area * (1.0 - CUT)
    supply = _supply(flow, centre, circle, angles, paths)
    return CaptureZone(
        clipped, float(clipped.area), is_open, supply, tuple(asked), paths.counts(), int(apart.sum()),
        between.size == 0, paths,
    )  # fmt: skip


def _follow(
    flow: FlowField,
    centre: Floats,
    circle: float,
    angles: Floats,
    obstacles: Obstacles,
    marks: Floats,
    tree: LocalArrays,
) -> Pathlines:
    x, y = centre[0] + circle * np.cos(angles), centre[1] + circle * np.sin(angles)
    return trace(flow, x, y, direction=-1, lines=obstacles, times=marks, tolerance=STEP_ERROR, tree=tree)


def _steps(angles: Floats) -> Floats:
    """Angle from each path to the next, the last to the first."""
    return np.diff(angles, append=angles[0] + 2.0 * np.pi)


def _gaps(
    angles: Floats, paths: Pathlines, known: dict[tuple[float, float], tuple[float, float]]
) -> tuple[Floats, Floats]:
    """How far (m) each path and the next one come apart, wherever along them; ``known`` keeps what was found.

    The distance of the shorter one's places from the longer one, and the larger of this and its reverse.
    """
    key = [(float(a), float(b)) for a, b in zip(angles, np.roll(angles, -1), strict=True)]
    new = np.array([i for i, pair in enumerate(key) if pair not in known], dtype=np.int64)
    after = (new + 1) % angles.size
    there, back = farthest(paths.points, new, after, SAMPLES), farthest(paths.points, after, new, SAMPLES)
    for i, one, other in zip(new, there, back, strict=True):
        known[key[i]] = float(min(one, other)), float(max(one, other))
    near, far = np.array([known[pair] for pair in key]).T
    return near, far


def _first_is_spent(paths: Pathlines) -> NDArray[np.bool_]:
    """Whether, of each path and the next, the one that is followed for less time came to rest."""
    lasted = np.array([p[-1, 2] for p in paths.points])
    rests = paths.endings == Ending.STAGNATION
    return np.asarray(np.where(lasted <= np.roll(lasted, -1), rests, np.roll(rests, -1)))


def _size(paths: Pathlines) -> float:
    """Width (m) of the ground that the paths cover: the area of their hull over its length."""
    some = [part for p in paths.points for part in (p[::SPARSE, :2], p[-1:, :2])]
    hull = shapely.convex_hull(shapely.LineString(np.concatenate(some)))
    x0, y0, x1, y1 = shapely.bounds(hull)
    return float(hull.area / max(np.hypot(x1 - x0, y1 - y0), 1e-9))


def _stretched(paths: Pathlines) -> NDArray[np.bool_]:
    """Paths that are far from the next one on any of the asked fronts, by the size of that front."""
    at = paths.at_marks
    if at.shape[1] == 0:
        return np.zeros(len(at), dtype=bool)
    step = np.hypot(*np.moveaxis(np.roll(at, -1, axis=0) - at, -1, 0))
    size = np.hypot(np.ptp(at[:, :, 0], axis=0), np.ptp(at[:, :, 1], axis=0))
    return np.asarray((step > FRONT * size).any(axis=1))


def _between(angles: Floats, steps: Floats, wide: NDArray[np.bool_], stretched: NDArray[np.bool_]) -> Floats:
    """New angles: three between neighbours that part, so that a dividing line is closed in on quickly; else one."""
    three = [(angles + share * steps)[wide] for share in (0.25, 0.5, 0.75)]
    return np.concatenate([*three, (angles + 0.5 * steps)[stretched & ~wide]])


def _merged(angles: Floats, paths: Pathlines, between: Floats, more: Pathlines) -> tuple[Floats, Pathlines]:
    every = np.concatenate([angles, between])
    order = np.argsort(every, kind="stable")
    points = paths.points + more.points
    both: list[Any] = [np.concatenate(pair)[order] for pair in (
        (paths.endings, more.endings), (paths.named, more.named), (paths.at_marks, more.at_marks),
        (paths.share, more.share), (paths.tried, more.tried),
    )]  # fmt: skip
    merged = Pathlines(
        [points[i] for i in order], both[0], both[1], paths.marks, both[2], both[3], both[4], paths.line_names
    )
    return every[order], merged


def _polygon(
    paths: Pathlines, apart: NDArray[np.bool_], spent: NDArray[np.bool_], mark: int | None
) -> shapely.Geometry:
    """Ground swept up to the time of a mark, or in all (None)."""
    ring: list[Floats] = []
    n = len(paths.points)
    limit = np.inf if mark is None else paths.marks[mark]
    for i in range(n):
        j = (i + 1) % n
        ring.append(_end(paths, i, mark)[None, :])
        if apart[i] or spent[i]:
            out, back = _swept(paths, j, mark, limit), _swept(paths, i, mark, limit)
            ring += _round_divide(back, out) if apart[i] else _between_ends(back, out)
    return _valid(np.concatenate(ring))


def _end(paths: Pathlines, i: int, mark: int | None) -> Floats:
    return np.asarray(paths.points[i][-1, :2] if mark is None else paths.at_marks[i, mark])


def _swept(paths: Pathlines, i: int, mark: int | None, limit: float) -> Floats:
    path = paths.points[i]
    return np.concatenate([path[path[:, 2] < limit, :2], _end(paths, i, mark)[None, :]])


def _round_divide(back: Floats, out: Floats) -> list[Floats]:
    """From the end of one path back to where the two part, and out along the other: no slit to the well is left."""
    together = 1e-6 * max(float(np.ptp(back[:, 0])), float(np.ptp(back[:, 1])), 1e-9)
    gap_back = shapely.distance(shapely.points(back), shapely.LineString(out))
    gap_out = shapely.distance(shapely.points(out), shapely.LineString(back))
    first_back = int(np.argmax(gap_back > together)) if np.any(gap_back > together) else len(back) - 1
    first_out = int(np.argmax(gap_out > together)) if np.any(gap_out > together) else len(out) - 1
    return [back[first_back:][::-1], back[max(first_back - 1, 0)][None, :], out[first_out:]]


def _between_ends(back: Floats, out: Floats) -> list[Floats]:
    """From the end of one path to that of another that runs along it, on the longer one."""
    to_out = np.hypot(*(back[-1] - out).T)
    to_back = np.hypot(*(out[-1] - back).T)
    if to_out.min() <= to_back.min():
        return [out[int(np.argmin(to_out)) :]]
    return [back[int(np.argmin(to_back)) :][::-1]]


def _valid(ring: Floats) -> shapely.Geometry:
    """The polygon of a ring, without the vertices that its curve does not need, made valid."""
    least = CLOSE * float(np.hypot(*np.ptp(ring, axis=0)))
    thin = shapely.get_coordinates(shapely.LineString(ring).simplify(least, preserve_topology=False))
    if len(thin) < 4:
        return shapely.Polygon()
    polygon = shapely.Polygon(thin)
    return polygon if polygon.is_valid else shapely.make_valid(polygon)


def _clipped(polygon: shapely.Geometry, clip: shapely.Geometry | None) -> shapely.Geometry:
    """The part inside the clip, without the slivers and pinholes that rounding leaves along dividing lines."""
    shape = polygon if clip is None else shapely.intersection(polygon, clip)
    least = SLIVER * shape.area
    whole = [
        shapely.Polygon(p.exterior, [r for r in p.interiors if shapely.Polygon(r).area > least])
        for p in shapely.get_parts(shape)
        if isinstance(p, shapely.Polygon) and p.area > least
    ]
    return whole[0] if len(whole) == 1 else shapely.MultiPolygon(whole)


def _supply(flow: FlowField, centre: Floats, circle: float, angles: Floats, paths: Pathlines) -> dict[str, float]:
    """Share of the well's rate by source: the shares of the pathlines weighted with the flow into the screen."""
    x, y = centre[0] + circle * np.cos(angles), centre[1] + circle * np.sin(angles)
    qx, qy = flow.discharge(x, y)
    inward = np.maximum(-(qx * np.cos(angles) + qy * np.sin(angles)), 0.0)
    steps = _steps(angles)
    weight = inward * 0.5 * (steps + np.roll(steps, 1))
    share = (weight @ paths.share) / weight.sum()
    gone = np.isin(paths.endings, [int(Ending.DRAWN_AREA)])
    beyond = float(weight[gone] @ paths.share[gone, -1] / weight.sum())
    out = {name: float(s) for name, s in zip(paths.line_names, share[:-1], strict=True) if s > 0.0}
    injected = np.isin(paths.endings, [int(Ending.WELL)])
    if injected.any():
        out["injected"] = float(weight[injected] @ paths.share[injected, -1] / weight.sum())
    unknown = float(weight @ paths.share[:, -1] / weight.sum()) - beyond - out.get("injected", 0.0)
    out["beyond the map"] = beyond
    out["not traced to its source"] = max(unknown, 0.0)
    out["recharge"] = 1.0 - sum(out.values())
    return out
