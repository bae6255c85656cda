"""How far pathlines come apart: compiled, since every pair of neighbours of a zone is asked."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from ..elements.blocks import in_blocks
from ..elements.jit import driver

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
FEW = 8  # pairs: fewer are not worth a thread


@driver
def _farthest(points: Floats, first: Ints, one: Ints, other: Ints, samples: int, out: Floats) -> None:
    """Into out (k,): largest distance (m) of ``samples`` places on path ``one`` from path ``other``, by indices (k,).

    points (m, 3): all paths, one after the other; first (n + 1,): where each begins.
    """
    for i in range(one.size):
        start = first[one[i]]
        count = first[one[i] + 1] - start
        taken = min(samples, count)
        farthest2 = 0.0
        for s in range(taken):
            at = start + (s * (count - 1)) // max(taken - 1, 1)
            x = points[at, 0]
            y = points[at, 1]
            least2 = np.inf
            for k in range(first[other[i]], first[other[i] + 1] - 1):
                ex = points[k + 1, 0] - points[k, 0]
                ey = points[k + 1, 1] - points[k, 1]
                dx = x - points[k, 0]
                dy = y - points[k, 1]
                t = min(max((dx * ex + dy * ey) / max(ex * ex + ey * ey, 1e-300), 0.0), 1.0)
                least2 = min(least2, (dx - t * ex) ** 2 + (dy - t * ey) ** 2)
            farthest2 = max(farthest2, least2)
        out[i] = np.sqrt(farthest2)


def farthest(paths: Sequence[Floats], one: Ints, other: Ints, samples: int) -> Floats:
    """Largest distance (m) of places evenly spread over the points of path ``one`` from path ``other``, by index (k,).

    paths: arrays (m, 3) of two points or more.
    """
    points = np.concatenate(list(paths))
    first = np.concatenate([[0], np.cumsum([len(p) for p in paths])]).astype(np.int64)
    out = np.empty(one.size)
    in_blocks(lambda part: _farthest(points, first, one[part], other[part], samples, out[part]), one.size, FEW, 1)
    return out
