"""Pathlines: many particles followed with or against the flow, each ending with a stated reason."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from ..elements.blocks import in_blocks
from ..elements.flow_field import FlowField
from ..elements.local_arrays import DEEPEST, local_arrays
from ..elements.local_tree import LocalArrays
from .endings import Ending
from .integrator import follow_all
from .obstacles import Line, Obstacles, make_obstacles

TOLERANCE = 1e-5  # m of position a step; a relative one would mean nothing on map coordinates
MOST_POINTS = 6000
CHUNK = 192
FEW = 4  # particles: fewer are followed by one thread
CHEAP, PAYS = 30, 2700  # a tree of series pays for so many particles times the panels beyond CHEAP
REST = 1e-7  # of the typical discharge: slower water has come to rest

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Pathlines:
    """Followed particles (n,).

    points: list of (m, 3) arrays x, y (m, map coordinates) and time (d) since the start; endings (n,); named (n,):
    index of the well or line reached, -1 if none; names: what ``named`` means by ending. at_marks (n, k, 2): places
    at the asked times (the end for a particle that ended before); share (n, l + 1): of the water that arrives at
    the start what each line gave and, last, what had not entered the ground by the end (against the flow only).
    """

    points: list[Floats]
    endings: NDArray[np.int64]
    named: NDArray[np.int64]
    marks: Floats
    at_marks: Floats
    share: Floats
    tried: NDArray[np.int64]
    line_names: tuple[str, ...]

    def reached(self, k: int) -> str:
        """Why particle k ended, in words, with the line's name."""
        ending = Ending(int(self.endings[k]))
        name = self.line_names[self.named[k]] if ending in (Ending.STREAM, Ending.LAKE, Ending.OUTLINE) else ""
        return f"{ending.words} {name}".strip()

    def counts(self) -> dict[str, int]:
        """How many particles ended for each reason."""
        codes, numbers = np.unique(self.endings, return_counts=True)
        return {Ending(int(c)).words: int(n) for c, n in zip(codes, numbers, strict=True)}


def trace(
    flow: FlowField,
    x: ArrayLike,
    y: ArrayLike,
    *,
    direction: int = 1,
    lines: Sequence[Line] | Obstacles = (),
    box: tuple[float, float, float, float] | None = None,
    t_max: float = np.inf,
    times: ArrayLike = (),
    tolerance: float = TOLERANCE,
    most_points: int = MOST_POINTS,
    tree: LocalArrays | None = None,
) -> Pathlines:
    """Follow water from x, y (n,) in m for at most t_max (d); direction +1 with the flow, -1 against it.

    tree: the field's series in the box, where it is traced often (``series_of``); made here if many start.
    lines: the streams, lakes and outlines at which water can end, or prepared obstacles; box: x0, x1, y0, y1 (m)
    within which water is followed (needed unless obstacles are given); times (k,): ascending (d), at which places
    are wanted. A stream ends a pathline where its other bank sends water towards it too; else some water passes.
    """
    if isinstance(lines, Obstacles):
        obstacles = lines
    elif box is not None:
        obstacles = make_obstacles(lines, box)
    else:
        raise ValueError("a box (x0, x1, y0, y1) in m must be given to follow water in")
    if direction not in (1, -1):
        raise ValueError(f"direction must be 1 or -1; instead received {direction}")
    local_x = np.ascontiguousarray(np.atleast_1d(np.asarray(x, dtype=float)) - flow.origin[0])
    local_y = np.ascontiguousarray(np.atleast_1d(np.asarray(y, dtype=float)) - flow.origin[1])
    phi = np.ascontiguousarray(flow.potential(local_x + flow.origin[0], local_y + flow.origin[1]))
    marks = np.ascontiguousarray(np.atleast_1d(np.asarray(times, dtype=float)))
    arrays = obstacles.arrays(flow.origin)
    n, n_lines = local_x.size, len(obstacles.names)
    field = tree or series_of(flow, obstacles, DEEPEST if n * (len(flow.arrays.kind) - CHEAP) > PAYS else 0)
    aquifer = flow.aquifer
    medium = np.array([aquifer.conductivity, aquifer.thickness, aquifer.porosity])
    q_rest = REST * typical_discharge(flow, obstacles.box)
    at_marks, share = np.zeros((n, marks.size, 2)), np.zeros((n, n_lines + 1))
    result = np.zeros((n, 4), dtype=np.int64)
    points: list[Floats] = []
    buffer = np.empty((min(n, CHUNK), most_points, 3))
    for start in range(0, n, CHUNK):
        size = min(CHUNK, n - start)

        def work(part: slice, start: int = start) -> None:
            at = slice(start + part.start, start + part.stop)
            follow_all(
                local_x[at], local_y[at], phi[at], float(direction), field, medium, arrays, float(t_max),
                float(tolerance), q_rest, marks, at_marks[at], buffer[part], share[at], result[at],
            )  # fmt: skip

        in_blocks(work, size, FEW, 1)
        for i in range(size):
            path = buffer[i, : result[start + i, 0]].copy()
            path[:, 0] += flow.origin[0]
            path[:, 1] += flow.origin[1]
            points.append(path)
    at_marks += np.array(flow.origin)
    return Pathlines(points, result[:, 1], result[:, 2], marks, at_marks, share, result[:, 3], obstacles.names)


def series_of(flow: FlowField, obstacles: Obstacles, deepest: int = DEEPEST) -> LocalArrays:
    """Tree of series for following much water within the obstacles' box; ``deepest`` 0 is direct summation."""
    x0, x1, y0, y1 = (float(c) for c in obstacles.arrays(flow.origin).box)
    return local_arrays(flow.arrays, (x0, x1, y0, y1), deepest)


def typical_discharge(flow: FlowField, box: tuple[float, float, float, float]) -> float:
    """Median discharge (m2/d) over a grid of the box: what "slow" is measured against."""
    x, y = np.meshgrid(np.linspace(box[0], box[1], 12)[1:-1], np.linspace(box[2], box[3], 12)[1:-1])
    q = np.hypot(*flow.discharge(x, y))
    moving = q[q > 0]
    return float(np.median(moving)) if moving.size else 0.0
