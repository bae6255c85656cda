"""A small graded triangle mesher for the finite-element truth of the tests.

Points come from a quadtree that follows a size function and from the lines of the map; scipy's Delaunay joins them.
A line piece that the triangulation does not contain is halved until it does (Ruppert 1995); if that does not end,
the mesh is refused. Lines may touch at vertices or end on each other; lines that cross are refused.
"""

from dataclasses import dataclass, field

import numpy as np
import shapely
from scipy.spatial import Delaunay, cKDTree


@dataclass
class Line:
    """A polyline that the mesh keeps: points (n, 2) in m; ``grade``: whether corners are singular there."""

    name: str
    points: np.ndarray
    closed: bool
    grade: bool = True
    share: np.ndarray = field(default_factory=lambda: np.empty(0))  # place of each point, in vertices of the input

    def __post_init__(self):
        self.points = np.asarray(self.points, dtype=float)
        if self.closed:
            self.points = np.vstack([self.points, self.points[:1]])
        if self.share.size == 0:
            self.share = np.arange(len(self.points), dtype=float)


@dataclass(frozen=True)
class Mesh:
    """Points (n, 2), triangles (m, 3), the pieces (k, 2) of each line and their place on it, and a locator."""

    points: np.ndarray
    triangles: np.ndarray
    pieces: dict
    shares: dict
    locator: Delaunay
    element_of_simplex: np.ndarray  # -1 outside the domain


def build(outer, holes, lines, wells, *, size, tip, slope):
    """Mesh the ring ``outer`` (n, 2) without ``holes``; ``lines`` holds every Line, ``wells`` rows x, y, radius.

    ``size``: largest edge (m); ``tip``: edge (m) at the free end of a line; ``slope``: growth of the edge with
    distance from a singular point.
    """
    _join_touching(lines)
    _refuse_crossing(lines)
    spacing = _size_function(lines, wells, size, tip, slope)
    pieces = [_sample(line, spacing) for line in lines]
    points, index = _merge(pieces)
    inside = shapely.Polygon(outer, [np.asarray(hole) for hole in holes])
    shapely.prepare(inside)
    cloud = _quadtree(np.asarray(outer), spacing, size)
    cloud = cloud[shapely.contains_xy(inside, cloud[:, 0], cloud[:, 1])]
    near, _ = cKDTree(points).query(cloud)
    cloud = cloud[near > 0.75 * spacing(cloud)]
    shares = [place for _, place in pieces]
    for _ in range(12):
        everything = np.vstack([points, cloud])
        locator = Delaunay(everything)
        missing = [_missing(locator, chain) for chain in index]
        if not any(m.any() for m in missing):
            break
        points, index, shares = _halve(points, index, shares, missing)
    else:
        raise ValueError("the mesh cannot follow its lines: " + _names(lines, missing))
    triangles = locator.simplices
    corners = everything[triangles]
    centre = corners.mean(axis=1)
    d1, d2 = corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0]
    area = 0.5 * np.abs(d1[:, 0] * d2[:, 1] - d1[:, 1] * d2[:, 0])
    # three points of one straight shore make a triangle without area: it is no land
    longest = np.max(np.sum((corners - np.roll(corners, 1, axis=1)) ** 2, axis=2), axis=1)
    keep = shapely.contains_xy(inside, centre[:, 0], centre[:, 1]) & (area > 1e-7 * longest)
    if abs(area[keep].sum() - inside.area) > 1e-9 * inside.area or np.any(
        ~np.isin(np.concatenate(index), locator.simplices[keep])
    ):
        raise ValueError("the triangles do not cover the land")
    used = np.unique(triangles[keep])
    new = np.full(len(everything), -1)
    new[used] = np.arange(len(used))
    element = np.where(keep, np.cumsum(keep) - 1, -1)
    chains = {line.name: new[np.column_stack([c[:-1], c[1:]])] for line, c in zip(lines, index)}
    places = {line.name: place for line, place in zip(lines, shares)}
    return Mesh(everything[used], new[triangles[keep]], chains, places, locator, element)


def _join_touching(lines, reach=1e-6):
    """Insert a vertex of one line that lies on an edge of another, so that both share it."""
    for line in lines:
        others = np.vstack([o.points for o in lines if o is not line] or [np.empty((0, 2))])
        new_points, new_share = [line.points[:1]], [line.share[:1]]
        for k in range(len(line.points) - 1):
            a, b = line.points[k], line.points[k + 1]
            length = np.hypot(*(b - a))
            t = (others - a) @ (b - a) / length**2
            gap = np.hypot(*(a + t[:, None] * (b - a) - others).T) if len(others) else np.empty(0)
            t_on = np.unique(np.round(t[(gap < reach) & (t * length > reach) & ((1 - t) * length > reach)], 12))
            new_points += [a + t_on[:, None] * (b - a), b[None]]
            new_share += [line.share[k] + t_on * (line.share[k + 1] - line.share[k]), line.share[k + 1 : k + 2]]
        line.points, line.share = np.vstack(new_points), np.concatenate(new_share)


def _refuse_crossing(lines):
    shapes = [shapely.LineString(line.points) for line in lines]
    for i, a in enumerate(shapes):
        for j in range(i):
            if a.crosses(shapes[j]) and not _meet_at_vertices(a, shapes[j]):
                raise ValueError(f"{lines[i].name!r} crosses {lines[j].name!r}: split them at the crossing")


def _meet_at_vertices(a, b):
    met = shapely.get_coordinates(a.intersection(b))
    corners = np.vstack([shapely.get_coordinates(a), shapely.get_coordinates(b)])
    return bool(np.all(cKDTree(corners).query(met)[0] < 1e-5))


def _size_function(lines, wells, size, tip, slope):
    """Edge length as a function of place: min over singular points of max(edge there, slope x distance)."""
    centre, edge = [], []
    for line in lines:
        p, closed = line.points, line.closed
        n = len(p) - 1 if closed else len(p)
        step = np.hypot(*np.diff(p, axis=0).T)
        for k in range(n):
            free = not closed and k in (0, n - 1)
            before = p[k] - p[k - 1] if k else (p[0] - p[-2] if closed else p[1] - p[0])
            after = p[k + 1] - p[k] if k + 1 < len(p) else before
            turn = abs(np.angle(complex(*after) / complex(*before)))
            adjacent = min(step[max(k - 1, 0)], step[min(k, len(step) - 1)], step[-1] if closed and k == 0 else np.inf)
            here = adjacent
            if line.grade:
                here = tip if free else tip * (10 if turn > 0.35 else 40) if turn > 0.05 else adjacent
            centre.append(p[k])
            edge.append(min(here, adjacent, size))
    for x, y, radius in wells:
        centre.append((x, y))
        edge.append(0.26 * radius)
    centre, edge = np.array(centre), np.array(edge)
    groups = [(value, cKDTree(centre[edge == value])) for value in np.unique(edge)]

    def spacing(points):
        best = np.full(len(points), float(size))
        for value, tree in groups:
            distance, _ = tree.query(points, distance_upper_bound=size / slope)
            best = np.minimum(best, np.maximum(value, slope * distance))
        return best

    return spacing


def _sample(line, spacing):
    """Points along a line at the local spacing, with every vertex kept, and their places."""
    points, place = [line.points[:1]], [line.share[:1]]
    for k in range(len(line.points) - 1):
        a, b = line.points[k], line.points[k + 1]
        length = np.hypot(*(b - a))
        # stations crowd towards both ends, where the size is smallest
        half = np.concatenate([[0.0], np.geomspace(1e-6, 0.5, 160)])
        s = np.unique(np.concatenate([half, 1 - half]))
        density = 1.0 / spacing(a + s[:, None] * (b - a))
        count = np.concatenate([[0.0], np.cumsum(0.5 * (density[1:] + density[:-1]) * np.diff(s) * length)])
        n = max(1, int(np.ceil(count[-1])))
        t = np.interp(np.arange(1, n) * count[-1] / n, count, s)
        points += [a + t[:, None] * (b - a), b[None]]
        place += [line.share[k] + t * (line.share[k + 1] - line.share[k]), line.share[k + 1 : k + 2]]
    return np.vstack(points), np.concatenate(place)


def _merge(pieces, reach=1e-6):
    """One numbering for all sampled points; points that coincide become one."""
    stacked = np.vstack([points for points, _ in pieces])
    tree = cKDTree(stacked)
    first = np.array([min(group) for group in tree.query_ball_point(stacked, reach)])
    unique, inverse = np.unique(first, return_inverse=True)
    cuts = np.cumsum([len(points) for points, _ in pieces])[:-1]
    return stacked[unique], np.split(inverse, cuts)


def _quadtree(outer, spacing, size):
    """Centres of quadtree cells no larger than the size function, slightly shaken so that no four share a circle."""
    low, high = outer.min(axis=0), outer.max(axis=0)
    n = np.ceil((high - low) / size).astype(int)
    gx, gy = np.meshgrid(np.arange(n[0]) + 0.5, np.arange(n[1]) + 0.5)
    cells, side, done = low + size * np.column_stack([gx.ravel(), gy.ravel()]), float(size), []
    random = np.random.default_rng(5)
    while len(cells):
        fine = spacing(cells) >= 0.999 * side
        done.append(cells[fine] + random.uniform(-0.08, 0.08, (fine.sum(), 2)) * side)
        side /= 2
        shift = 0.5 * side * np.array([[-1, -1], [1, -1], [-1, 1], [1, 1]])
        cells = (cells[~fine][:, None, :] + shift).reshape(-1, 2)
    return np.vstack(done)


def _missing(locator, chain):
    """Which pieces of a chain of point numbers are not edges of the triangulation."""
    t, n = locator.simplices, len(locator.points)
    edges = np.vstack([t[:, [0, 1]], t[:, [1, 2]], t[:, [2, 0]]])
    keys = np.unique(edges.min(axis=1).astype(np.int64) * n + edges.max(axis=1))
    a, b = chain[:-1], chain[1:]
    return ~np.isin(np.minimum(a, b).astype(np.int64) * n + np.maximum(a, b), keys)


def _halve(points, index, shares, missing):
    """Insert the middle of each missing piece; a piece that two lines share gets one middle."""
    made, extra, chains, places = {}, [], [], []
    for chain, place, lost in zip(index, shares, missing):
        at = np.flatnonzero(lost)
        numbers = []
        for k in at:
            pair = (min(chain[k], chain[k + 1]), max(chain[k], chain[k + 1]))
            if pair not in made:
                made[pair] = len(points) + len(extra)
                extra.append(0.5 * (points[pair[0]] + points[pair[1]]))
            numbers.append(made[pair])
        chains.append(np.insert(chain, at + 1, numbers) if len(at) else chain)
        places.append(np.insert(place, at + 1, 0.5 * (place[at] + place[at + 1])))
    return np.vstack([points, np.array(extra).reshape(-1, 2)]), chains, places


def _names(lines, missing):
    return ", ".join(line.name for line, lost in zip(lines, missing) if lost.any())
