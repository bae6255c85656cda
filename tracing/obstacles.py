"""What a pathline can end at: wells, streams, shores and outlines as arrays for the integrator."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from ..elements.lake import LakeEdge
from ..elements.outline import Outline
from ..elements.stream import Stream
from .endings import Ending

Floats = NDArray[np.float64]
WALL = -1  # code of an impermeable segment: nothing ends there, water slides along it
Line = Stream | LakeEdge | Outline


class ObstacleArrays(NamedTuple):
    """Local coordinates (m): segments (s, 4) x1, y1, x2, y2; line (s,) index; ending (s,) code; box x0, x1, y0, y1."""

    segment: Floats
    line: NDArray[np.int64]
    ending: NDArray[np.int64]
    box: Floats


@dataclass(frozen=True)
class Obstacles:
    """Lines by name, and the box (x0, x1, y0, y1; m, map coordinates) in which water is followed."""

    names: tuple[str, ...]
    lines: tuple[Line, ...]
    box: tuple[float, float, float, float]

    def arrays(self, origin: tuple[float, float]) -> ObstacleArrays:
        """The same for the integrator, local to an origin (m)."""
        x0, y0 = origin
        segments, index, ending = [np.zeros((0, 4))], [], []
        for k, line in enumerate(self.lines):
            x, y = line.x - x0, line.y - y0
            if getattr(line, "closed", False):
                x, y = np.append(x, x[0]), np.append(y, y[0])
            segments.append(np.stack([x[:-1], y[:-1], x[1:], y[1:]], axis=1))
            index += [k] * (x.size - 1)
            ending += [_ending(line)] * (x.size - 1)
        a, b, c, d = self.box
        box = np.array([a - x0, b - x0, c - y0, d - y0])
        ints = (np.array(index, dtype=np.int64), np.array(ending, dtype=np.int64))
        return ObstacleArrays(np.ascontiguousarray(np.concatenate(segments)), *ints, box)


def make_obstacles(lines: Sequence[Line], box: tuple[float, float, float, float]) -> Obstacles:
    """Obstacles of some elements within a box (x0, x1, y0, y1) in m."""
    return Obstacles(tuple(line.name for line in lines), tuple(lines), box)


def _ending(line: Line) -> int:
    if isinstance(line, Outline):
        return int(Ending.OUTLINE) if line.inflow != 0.0 else WALL
    return int(Ending.LAKE if isinstance(line, LakeEdge) else Ending.STREAM)
