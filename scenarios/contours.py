"""Contour interval and contour lines of heads."""

import contourpy
import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


def contour_interval(low: float, high: float) -> float:
    """Interval 1, 2 or 5 x 10^n (in the unit of low and high) that splits the range into 5 to 8 steps.

    Where none does, the one whose number of steps is nearest to that (4 to 10 steps). Common practice, no source.
    Raises ValueError when there is no range.
    """
    span = high - low
    if not (np.isfinite(span) and span > 0.0):
        raise ValueError(f"no range of heads to contour: {low} to {high}")
    power = int(np.floor(np.log10(span)))
    candidates = [float(f"{f}e{n}") for n in range(power - 2, power + 1) for f in (1, 2, 5)]
    steps = [span / c for c in candidates]
    away = [max(5.0 / s, s / 8.0, 1.0) for s in steps]
    # of several that fit, the one with fewer lines
    return min(zip(away, steps, candidates, strict=True))[2]


def contour_levels(low: float, high: float, interval: float) -> Floats:
    """Multiples of the interval within the range."""
    first, last = np.ceil(low / interval - 1e-9), np.floor(high / interval + 1e-9)
    return np.asarray(np.arange(first, last + 1) * interval)


def contour_lines(x: Floats, y: Floats, head: Floats, levels: Floats) -> list[tuple[float, Floats]]:
    """Lines (level, (n, 2) places) of a grid of heads (ny, nx); cells with NaN carry no line."""
    generator = contourpy.contour_generator(x, y, np.ma.masked_invalid(head))
    found = [(float(level), np.asarray(line)) for level in levels for line in generator.lines(float(level))]
    return [(level, line) for level, line in found if len(line) > 1]
