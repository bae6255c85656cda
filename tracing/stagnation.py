"""Stagnation points: places where the discharge vanishes, saddles told from summits and basins."""

from dataclasses import dataclass
from typing import Literal

import numpy as np
import shapely
from numpy.typing import NDArray

from ..elements.flow_field import FlowField
from ..elements.lake import LakeEdge
from ..elements.outline import Outline
from .obstacles import Obstacles
from .pathlines import typical_discharge

Floats = NDArray[np.float64]
SETTLED = 1e-10  # of the typical discharge


@dataclass(frozen=True)
class StagnationPoint:
    """A zero of the discharge at x, y (m); a summit sends water all ways, a basin draws it from all sides."""

    x: float
    y: float
    kind: Literal["saddle", "summit", "basin"]
    downstream: tuple[float, float]  # unit vector along which water leaves a saddle, both ways


def stagnation_points(flow: FlowField, obstacles: Obstacles, n_grid: int = 90) -> list[StagnationPoint]:
    """Zeros of the discharge inside the obstacles' box, off the lines, by Newton from a grid and from rings at wells.

    Seeds are the grid cells in whose corners both components take both signs, and eight points round every well
    at the distance Q/(2 pi q) where it balances the field of the others.
    """
    x0, x1, y0, y1 = obstacles.box
    typical = typical_discharge(flow, obstacles.box)
    if typical == 0.0:
        return []
    x, y = np.meshgrid(np.linspace(x0, x1, n_grid), np.linspace(y0, y1, n_grid))
    qx, qy = flow.discharge(x, y)
    both = _changes(qx) & _changes(qy)
    step = (x1 - x0) / (n_grid - 1)
    seeds = [np.stack([x[:-1, :-1][both] + 0.5 * step, y[:-1, :-1][both] + 0.5 * (y1 - y0) / (n_grid - 1)], axis=1)]
    angles = 2.0 * np.pi * np.arange(8) / 8
    for wx, wy, rate, _ in flow.arrays.wells:
        if rate != 0.0:
            r = abs(rate) / (2.0 * np.pi * typical)
            for f in (0.3, 1.0, 3.0):
                seeds.append(
                    np.stack([wx + f * r * np.cos(angles), wy + f * r * np.sin(angles)], axis=1) + np.array(flow.origin)
                )
    start = _in_ground(np.concatenate(seeds), obstacles)  # within a lake there is no flow, only rounding
    found = _newton(flow, start, typical, obstacles.box)
    out: list[StagnationPoint] = []
    wells = flow.arrays.wells[:, :2] + np.array(flow.origin)
    for place in _in_ground(found, obstacles):
        # within a screen the discharge is made to fall to zero: no stagnation of the ground water
        if np.any(np.hypot(*(wells - place).T) <= 2.0 * flow.arrays.wells[:, 3]):
            continue
        if all(np.hypot(place[0] - p.x, place[1] - p.y) > 1e-3 for p in out):
            out.append(_classified(flow, place))
    return out


def _changes(q: Floats) -> NDArray[np.bool_]:
    """Cells (corners given) in which q takes both signs."""
    corners = np.stack([q[:-1, :-1], q[1:, :-1], q[:-1, 1:], q[1:, 1:]])
    return (corners.min(axis=0) <= 0.0) & (corners.max(axis=0) >= 0.0)


def _slopes(flow: FlowField, place: Floats, h: float) -> Floats:
    """Jacobian of the discharge at places (n, 2) by central differences: (n, 2, 2)."""
    x, y = place[:, 0], place[:, 1]
    at_x = np.concatenate([x + h, x - h, x, x])
    at_y = np.concatenate([y, y, y + h, y - h])
    q = np.stack(flow.discharge(at_x, at_y)).reshape(2, 4, -1)
    return np.stack([(q[:, 0] - q[:, 1]) / (2 * h), (q[:, 2] - q[:, 3]) / (2 * h)], axis=-1).transpose(1, 0, 2)


def _newton(flow: FlowField, place: Floats, typical: float, box: tuple[float, float, float, float]) -> Floats:
    """Zeros that Newton's method finds from places (n, 2); a place that leaves the box is given up."""
    place = place.copy()
    x0, x1, y0, y1 = box
    most_step = 0.02 * max(x1 - x0, y1 - y0)
    done = np.zeros(len(place), dtype=bool)
    for _ in range(25):
        inside = (place[:, 0] >= x0) & (place[:, 0] <= x1) & (place[:, 1] >= y0) & (place[:, 1] <= y1)
        active = np.flatnonzero(~done & inside)
        if active.size == 0:
            break
        q = np.stack(flow.discharge(place[active, 0], place[active, 1]), axis=1)
        small = np.hypot(q[:, 0], q[:, 1]) < SETTLED * typical
        done[active[small]] = True
        go = active[~small]
        if go.size == 0:
            break
        slopes = _slopes(flow, place[go], 1e-2)
        singular = abs(np.linalg.det(slopes)) < 1e-300
        slopes[singular] = np.eye(2)
        move = -np.linalg.solve(slopes, q[~small][:, :, None])[:, :, 0]
        length = np.hypot(move[:, 0], move[:, 1])
        place[go] += move * np.minimum(1.0, most_step / np.maximum(length, 1e-300))[:, None]
    return place[done]


def _in_ground(place: Floats, obstacles: Obstacles) -> Floats:
    """Places inside the box, outside lakes, inside outlines, and off every line."""
    if len(place) == 0:
        return place
    x0, x1, y0, y1 = obstacles.box
    keep = (place[:, 0] > x0) & (place[:, 0] < x1) & (place[:, 1] > y0) & (place[:, 1] < y1)
    points = shapely.points(place)
    for line in obstacles.lines:
        ring = getattr(line, "closed", False)
        xy = np.stack([line.x, line.y], axis=1)
        course = shapely.LinearRing(xy) if ring else shapely.LineString(xy)
        keep &= shapely.distance(points, course) > 1e-2
        if ring:
            inside = shapely.contains(shapely.Polygon(xy), points)
            land_inside = isinstance(line, Outline) or (isinstance(line, LakeEdge) and line.land_inside)
            keep &= inside if land_inside else ~inside
    return place[keep]


def _classified(flow: FlowField, place: Floats) -> StagnationPoint:
    slopes = _slopes(flow, place[None, :], 1e-2)[0]
    values, vectors = np.linalg.eig(slopes)
    values, vectors = values.real, vectors.real
    k = int(np.argmax(values))
    way = float(vectors[0, k]), float(vectors[1, k])
    if values.min() < 0.0 < values.max():
        return StagnationPoint(float(place[0]), float(place[1]), "saddle", way)
    return StagnationPoint(float(place[0]), float(place[1]), "summit" if values.max() > 0 else "basin", way)
