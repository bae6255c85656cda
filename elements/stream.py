"""A stream: line sinks along a polyline, in full contact with the ground water or through a bed."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from .polyline import check_polyline


@dataclass(frozen=True)
class Stream:
    """A stream from source to mouth.

    x, y, stage: (n,) vertices and water levels (m), the stage linear along each edge. ``resistance`` (d) of the
    bed, None for full contact; ``width`` (m); ``bottom``: underside of the clogged layer, m below the stage.
    """

    name: str
    x: NDArray[np.float64]
    y: NDArray[np.float64]
    stage: NDArray[np.float64]
    width: float = 1.0
    resistance: float | None = None
    bottom: float | None = None

    def __post_init__(self) -> None:
        x, y = check_polyline(f"stream {self.name!r}", self.x, self.y, closed=False)
        stage = np.broadcast_to(np.asarray(self.stage, dtype=float), x.shape).copy()
        object.__setattr__(self, "x", x)
        object.__setattr__(self, "y", y)
        object.__setattr__(self, "stage", stage)
        if not np.all(np.isfinite(stage)):
            raise ValueError(f"stages of stream {self.name!r} must be finite (m)")
        if self.resistance is not None and not self.resistance > 0:
            raise ValueError(f"bed resistance of stream {self.name!r} must be positive (d) or None")
        if not self.width > 0:
            raise ValueError(f"width of stream {self.name!r} must be positive (m); received {self.width}")
