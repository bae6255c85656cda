"""How far two pathlines come apart: compiled, since every pair of neighbours of a zone is asked."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from ..elements.jit import driver

Floats = NDArray[np.float64]


@driver
def _farthest(x: Floats, y: Floats, other: Floats) -> Any:
    """Largest of the distances (m) of places x, y (n,) from the line through the rows of other (m, 3)."""
    farthest2 = 0.0
    for i in range(x.size):
        least2 = (x[i] - other[0, 0]) ** 2 + (y[i] - other[0, 1]) ** 2
        for k in range(other.shape[0] - 1):
            ex = other[k + 1, 0] - other[k, 0]
            ey = other[k + 1, 1] - other[k, 1]
            dx = x[i] - other[k, 0]
            dy = y[i] - other[k, 1]
            s = min(max((dx * ex + dy * ey) / max(ex * ex + ey * ey, 1e-300), 0.0), 1.0)
            least2 = min(least2, (dx - s * ex) ** 2 + (dy - s * ey) ** 2)
        farthest2 = max(farthest2, least2)
    return np.sqrt(farthest2)


def farthest(path: Floats, other: Floats, samples: int) -> float:
    """Largest distance (m) of places evenly spread over the points of a path (n, 3) from another path (m, 3)."""
    at = path[np.unique(np.linspace(0, len(path) - 1, samples).astype(np.int64))]
    return float(_farthest(np.ascontiguousarray(at[:, 0]), np.ascontiguousarray(at[:, 1]), other))
