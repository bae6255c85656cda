"""What every line of vertices must satisfy before it becomes an element."""

import numpy as np
from numpy.typing import ArrayLike, NDArray


def check_polyline(
    what: str, x: ArrayLike, y: ArrayLike, *, closed: bool
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Vertices (n,) in m as contiguous floats; a ring loses its repeated last vertex.

    Raises ValueError, naming ``what``, for too few or unequal numbers of vertices, values that are not finite,
    and two consecutive vertices at one place.
    """
    xs = np.array(x, dtype=float).ravel()
    ys = np.array(y, dtype=float).ravel()
    if xs.size != ys.size:
        raise ValueError(f"{what}: {xs.size} x and {ys.size} y coordinates")
    if not (np.all(np.isfinite(xs)) and np.all(np.isfinite(ys))):
        raise ValueError(f"{what}: coordinates must be finite")
    if closed and xs.size > 1 and xs[0] == xs[-1] and ys[0] == ys[-1]:
        xs, ys = xs[:-1].copy(), ys[:-1].copy()
    least = 3 if closed else 2
    if xs.size < least:
        raise ValueError(f"{what}: needs at least {least} different vertices; has {xs.size}")
    dx = np.diff(xs, append=xs[0]) if closed else np.diff(xs)
    dy = np.diff(ys, append=ys[0]) if closed else np.diff(ys)
    still = np.flatnonzero((dx == 0) & (dy == 0))
    if still.size:
        raise ValueError(f"{what}: vertex {still[0] + 1} is repeated")
    return xs, ys
