"""The lines of a site made into edges: crossings inserted, ends joined, streams clipped at shores, one stage a point.

A stage that two full-contact lines would give twice at one point is an infinite flux; it is refused here, before
anything is solved. Where a stream ends on a shore or on another stream, the point takes the other's stage.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import shapely

from ..elements.field_arrays import Floats, Ints
from ..elements.lake import LakeEdge
from ..elements.outline import Outline
from ..elements.stream import Stream

Line = Stream | LakeEdge | Outline
HEAD, BED, WALL = 0, 1, 2  # conditions an edge can carry
MOST_STEP = 1.0  # m: a stream that ends on another water may differ from its stage by this and adopts it
SAME_STAGE = 1e-3  # m


class GeometryError(ValueError):
    """Lines that cannot stand together; the message names the features and the place."""


@dataclass(frozen=True)
class Edges:
    """Straight edges (e,) of all lines, in local coordinates (m).

    z1, z2: ends (complex). stage1, stage2: stage (m) of each end without shifts; owner1, owner2: index of the line
    whose shift that stage follows. line: index of the line the edge belongs to; s1, s2: distance (m) along it.
    condition: HEAD, BED or WALL. free1, free2: the end touches nothing else.
    """

    z1: np.ndarray
    z2: np.ndarray
    stage1: Floats
    stage2: Floats
    owner1: Ints
    owner2: Ints
    line: Ints
    s1: Floats
    s2: Floats
    condition: Ints
    free1: np.ndarray
    free2: np.ndarray
    notes: tuple[str, ...]


def make_edges(lines: Sequence[Line], origin: tuple[float, float]) -> Edges:
    """Edges of the lines, local to ``origin`` (m).

    Raises GeometryError where two lines run on top of each other, or give one point two stages.
    """
    notes: list[str] = []
    rows: list[list] = []
    for k, line in enumerate(lines):
        for z, stage, s in _pieces(k, line, lines, origin, notes):
            ends = range(len(z) - 1)
            rows += [[z[i], z[i + 1], stage[i], stage[i + 1], k, s[i], s[i + 1], _condition(line)] for i in ends]
    if not rows:  # wells and recharge alone: nothing to cut
        z, real, whole, mark = (np.zeros(0, dtype=t) for t in (complex, float, np.int64, bool))
        return Edges(z, z, real, real, whole, whole, whole, real, real, whole, mark, mark, ())
    rows = _split_at_crossings(rows, lines, origin)
    return _join(rows, lines, origin, notes)


def _condition(line: Line) -> int:
    if isinstance(line, Outline):
        return WALL
    return BED if isinstance(line, Stream) and line.resistance is not None else HEAD


def _pieces(k: int, line: Line, lines: Sequence[Line], origin: tuple[float, float], notes: list[str]) -> list:
    """Vertices, stages and distances of the parts of a line that lie outside the water of closed lakes."""
    z = (line.x - origin[0]) + 1j * (line.y - origin[1])
    if isinstance(line, Stream):
        stage = line.stage
    else:
        stage = np.full(z.shape, line.stage if isinstance(line, LakeEdge) else np.nan)
    if not isinstance(line, Stream) and line.closed:
        z, stage = np.append(z, z[0]), np.append(stage, stage[0])
    s = np.concatenate([[0.0], np.cumsum(abs(np.diff(z)))])
    if not isinstance(line, Stream):
        return [(z, stage, s)]
    course = shapely.LineString(np.stack([z.real, z.imag], axis=1))
    kept = course
    for other in lines:
        if isinstance(other, LakeEdge) and other.closed and not other.land_inside:
            water = shapely.Polygon(np.stack([other.x - origin[0], other.y - origin[1]], axis=1))
            if kept.intersects(water):
                shorter = kept.difference(water)
                if shorter.length < kept.length - 1e-6:
                    notes.append(f"{kept.length - shorter.length:.0f} m of {line.name} in {other.name} left out")
                kept = shorter
    if kept.equals(course):
        return [(z, stage, s)]
    pieces = []
    for part in shapely.get_parts(kept):
        if part.length <= 1e-6:
            continue
        xy = shapely.get_coordinates(part)
        along = np.sort(shapely.line_locate_point(course, shapely.points(xy)))
        pieces.append((xy[:, 0] + 1j * xy[:, 1], np.interp(along, s, stage), along))
    if not pieces:
        raise GeometryError(f"stream {line.name!r} lies wholly inside a lake")
    return pieces


def _split_at_crossings(rows: list[list], lines: Sequence[Line], origin: tuple[float, float]) -> list[list]:
    """Cut every edge where another one crosses or ends on it."""
    z1 = np.array([r[0] for r in rows])
    z2 = np.array([r[1] for r in rows])
    size = float(abs(z2 - z1).max())
    tol = 1e-7 * size
    cuts: list[set[float]] = [set() for _ in rows]
    for i in range(len(rows) - 1):
        d, e = z2[i] - z1[i], z2[i + 1 :] - z1[i + 1 :]
        gap = z1[i + 1 :] - z1[i]
        cross = (np.conj(d) * e).imag
        with np.errstate(divide="ignore", invalid="ignore"):
            t = (np.conj(gap) * e).imag / cross
            u = (np.conj(gap) * d).imag / cross
        length = abs(d)
        parallel = abs(cross) < 1e-12 * length * abs(e)
        tt, uu = tol / length, tol / abs(e)
        meets = ~parallel & (t > -tt) & (t < 1 + tt) & (u > -uu) & (u < 1 + uu)
        for j in np.flatnonzero(meets):
            if tt < t[j] < 1 - tt:
                cuts[i].add(float(t[j]))
            if uu[j] < u[j] < 1 - uu[j]:
                cuts[i + 1 + j].add(float(u[j]))
        _refuse_overlap(i, d, gap, e, parallel, tol, rows, lines, origin)
    out = []
    for row, places in zip(rows, cuts, strict=True):
        marks = [0.0, *sorted(places), 1.0]
        for a, b in pairwise(marks):
            at = [lo + (hi - lo) * t for t in (a, b) for lo, hi in ((row[0], row[1]), (row[2], row[3]), row[5:7])]
            out.append([at[0], at[3], at[1], at[4], row[4], at[2], at[5], row[7]])
    return out


def _refuse_overlap(
    i: int,
    d: complex,
    gap: np.ndarray,
    e: np.ndarray,
    parallel: np.ndarray,
    tol: float,
    rows: list,
    lines: Sequence[Line],
    origin: tuple[float, float],
) -> None:
    """Raise where a later, parallel edge lies on edge i over more than a point."""
    unit = d / abs(d)
    for j in np.flatnonzero(parallel & (abs((np.conj(unit) * gap).imag) < tol)):
        a = (np.conj(unit) * gap[j]).real
        b = (np.conj(unit) * (gap[j] + e[j])).real
        if min(max(a, b), abs(d)) - max(min(a, b), 0.0) > tol:
            names = lines[rows[i][4]].name, lines[rows[i + 1 + j][4]].name
            at = rows[i + 1 + j][0]
            raise GeometryError(
                f"{names[0]!r} and {names[1]!r} run on top of each other near x {at.real + origin[0]:.1f}, "
                f"y {at.imag + origin[1]:.1f}"
            )


def _join(rows: list[list], lines: Sequence[Line], origin: tuple[float, float], notes: list[str]) -> Edges:
    """Give every point that edges share one place and one stage, and say which ends are free."""
    n = len(rows)
    ends = np.array([r[0] for r in rows] + [r[1] for r in rows])
    stages = np.array([r[2] for r in rows] + [r[3] for r in rows], dtype=float)
    line = np.array([r[4] for r in rows] * 2)
    condition = np.array([r[7] for r in rows] * 2)
    tol = 1e-6 * float(abs(ends[:n] - ends[n:]).max())
    owner = line.copy()
    free = np.ones(2 * n, dtype=bool)
    seen = np.zeros(2 * n, dtype=bool)
    for k in range(2 * n):
        if seen[k]:
            continue
        here = np.flatnonzero(abs(ends - ends[k]) < tol)
        seen[here] = True
        ends[here] = ends[k]
        free[here] = here.size == 1
        heads = here[condition[here] == HEAD]
        if np.unique(line[heads]).size > 1:
            _one_stage(heads, ends[k], stages, owner, line, lines, origin, notes)
    s1, s2 = (np.array([r[i] for r in rows], dtype=float) for i in (5, 6))
    return Edges(
        ends[:n], ends[n:], stages[:n], stages[n:], owner[:n], owner[n:], line[:n], s1, s2, condition[:n],
        free[:n], free[n:], tuple(notes),
    )  # fmt: skip


def _one_stage(
    heads: np.ndarray,
    at: complex,
    stages: Floats,
    owner: np.ndarray,
    line: np.ndarray,
    lines: Sequence[Line],
    origin: tuple[float, float],
    notes: list[str],
) -> None:
    """Let the lake, else the stream that passes through, decide the stage of a point shared by several lines."""
    members, counts = np.unique(line[heads], return_counts=True)
    rank = [(not isinstance(lines[m], LakeEdge), -c, m) for m, c in zip(members, counts, strict=True)]
    decides = min(rank)[2]
    stage = float(stages[heads[line[heads] == decides][0]])
    place = f"x {at.real + origin[0]:.1f}, y {at.imag + origin[1]:.1f}"
    for m, count in zip(members, counts, strict=True):
        own = float(stages[heads[line[heads] == m][0]])
        gap = abs(own - stage)
        ends_here = count == 1 and isinstance(lines[m], Stream)
        if gap > (MOST_STEP if ends_here else SAME_STAGE):
            raise GeometryError(
                f"{lines[m].name!r} ({own:.3f} m) and {lines[decides].name!r} ({stage:.3f} m) give one point two "
                f"stages at {place}; an infinite flux would run between them"
            )
        if gap > SAME_STAGE:
            notes.append(
                f"{lines[m].name} takes the stage of {lines[decides].name} ({stage:.2f} m) where it ends on it"
            )
    stages[heads] = stage
    owner[heads] = decides
