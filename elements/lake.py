"""The edge of a lake: a line of constant head."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from .polyline import check_polyline


@dataclass(frozen=True)
class LakeEdge:
    """A shore of constant stage (m) along x, y (n,) (m).

    A closed edge is a ring (last vertex not repeated) with water inside, or land inside (``land_inside``: the
    shore round an island). An open edge is a line of shore.
    """

    name: str
    x: NDArray[np.float64]
    y: NDArray[np.float64]
    stage: float
    closed: bool = True
    land_inside: bool = False

    def __post_init__(self) -> None:
        x, y = check_polyline(f"lake {self.name!r}", self.x, self.y, closed=self.closed)
        object.__setattr__(self, "x", x)
        object.__setattr__(self, "y", y)
        if not np.isfinite(self.stage):
            raise ValueError(f"stage of lake {self.name!r} must be finite (m)")
