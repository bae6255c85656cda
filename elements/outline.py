"""An impermeable side of the aquifer, or one with a given inflow."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from .polyline import check_polyline


@dataclass(frozen=True)
class Outline:
    """A side along x, y (n,) (m), closed ring or open line; ``inflow`` (m2/d) enters on the inner side.

    The inner side of a ring is its inside; of an open line it is the left when one walks along it.
    """

    name: str
    x: NDArray[np.float64]
    y: NDArray[np.float64]
    closed: bool = True
    inflow: float = 0.0

    def __post_init__(self) -> None:
        x, y = check_polyline(f"outline {self.name!r}", self.x, self.y, closed=self.closed)
        object.__setattr__(self, "x", x)
        object.__setattr__(self, "y", y)
