"""Areal recharge on a polygon."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from .polyline import check_polyline

Ring = tuple[NDArray[np.float64], NDArray[np.float64]]


@dataclass(frozen=True)
class RechargeArea:
    """Uniform recharge rate (m/d) inside the ring x, y (n,) (m) and outside its holes (rings that cut out lakes)."""

    name: str
    x: NDArray[np.float64]
    y: NDArray[np.float64]
    rate: float
    holes: tuple[Ring, ...] = ()

    def __post_init__(self) -> None:
        x, y = check_polyline(f"recharge {self.name!r}", self.x, self.y, closed=True)
        object.__setattr__(self, "x", x)
        object.__setattr__(self, "y", y)
        holes = tuple(check_polyline(f"hole of recharge {self.name!r}", *h, closed=True) for h in self.holes)
        object.__setattr__(self, "holes", holes)
        if not np.isfinite(self.rate):
            raise ValueError(f"rate of recharge {self.name!r} must be finite (m/d)")

    def rings(self) -> list[Ring]:
        """Exterior counter-clockwise, holes clockwise, so that the ground lies to the left of every edge."""
        rings = [_turned(self.x, self.y, 1.0)]
        return rings + [_turned(x, y, -1.0) for x, y in self.holes]

    def area(self) -> float:
        """Area (m2) that receives the recharge."""
        return float(sum(signed_area(x, y) for x, y in self.rings()))


def signed_area(x: NDArray[np.float64], y: NDArray[np.float64]) -> float:
    """Area (m2) of a ring (n,), positive if it runs counter-clockwise (shoelace formula)."""
    dx, dy = x - x[0], y - y[0]
    return float(0.5 * np.sum(dx * np.roll(dy, -1) - dy * np.roll(dx, -1)))


def _turned(x: NDArray[np.float64], y: NDArray[np.float64], sign: float) -> Ring:
    return (x, y) if signed_area(x, y) * sign > 0 else (x[::-1].copy(), y[::-1].copy())
