"""Areal recharge on a polygon."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import shapely
from numpy.typing import NDArray

from .polyline import check_polyline

Ring = tuple[NDArray[np.float64], NDArray[np.float64]]


@dataclass(frozen=True)
class RechargeArea:
    """Uniform recharge rate (m/d) inside the ring x, y (n,) (m), less its holes, plus further separate rings."""

    name: str
    x: NDArray[np.float64]
    y: NDArray[np.float64]
    rate: float
    holes: tuple[Ring, ...] = ()
    others: tuple[Ring, ...] = ()

    def __post_init__(self) -> None:
        x, y = check_polyline(f"recharge {self.name!r}", self.x, self.y, closed=True)
        object.__setattr__(self, "x", x)
        object.__setattr__(self, "y", y)
        holes = tuple(check_polyline(f"hole of recharge {self.name!r}", *h, closed=True) for h in self.holes)
        others = tuple(check_polyline(f"ring of recharge {self.name!r}", *h, closed=True) for h in self.others)
        object.__setattr__(self, "holes", holes)
        object.__setattr__(self, "others", others)
        if not np.isfinite(self.rate):
            raise ValueError(f"rate of recharge {self.name!r} must be finite (m/d)")

    def rings(self) -> list[Ring]:
        """Exterior counter-clockwise, holes clockwise, so that the ground lies to the left of every edge."""
        exteriors = [_turned(x, y, 1.0) for x, y in ((self.x, self.y), *self.others)]
        return exteriors + [_turned(x, y, -1.0) for x, y in self.holes]

    def area(self) -> float:
        """Area (m2) that receives the recharge."""
        return float(sum(signed_area(x, y) for x, y in self.rings()))


def on_land(area: RechargeArea, waters: Sequence[Ring], limits: Sequence[Ring]) -> RechargeArea | None:
    """The part of an area outside every water ring and inside every limit ring (m); None if nothing is left.

    Recharge under a lake would not reach the aquifer, and the outer flow that it would need makes every convex
    corner of a shore singular.
    """
    shape = shapely.Polygon(np.stack([area.x, area.y], axis=1), [np.stack(h, axis=1) for h in area.holes])
    shape = shapely.union_all([shape, *(shapely.Polygon(np.stack(r, axis=1)) for r in area.others)])
    for ring in waters:
        shape = shapely.difference(shape, shapely.Polygon(np.stack(ring, axis=1)))
    for ring in limits:
        shape = shapely.intersection(shape, shapely.Polygon(np.stack(ring, axis=1)))
    parts = [p for p in shapely.get_parts(shape) if isinstance(p, shapely.Polygon) and p.area > 1e-6]
    if not parts:
        return None
    exteriors = [_ring_of(p.exterior) for p in parts]
    holes = tuple(_ring_of(h) for p in parts for h in p.interiors)
    return RechargeArea(area.name, *exteriors[0], area.rate, holes, tuple(exteriors[1:]))


def _ring_of(line: shapely.LinearRing) -> Ring:
    xy = shapely.get_coordinates(line)[:-1]
    return xy[:, 0].copy(), xy[:, 1].copy()


def signed_area(x: NDArray[np.float64], y: NDArray[np.float64]) -> float:
    """Area (m2) of a ring (n,), positive if it runs counter-clockwise (shoelace formula)."""
    dx, dy = x - x[0], y - y[0]
    return float(0.5 * np.sum(dx * np.roll(dy, -1) - dy * np.roll(dx, -1)))


def _turned(x: NDArray[np.float64], y: NDArray[np.float64], sign: float) -> Ring:
    return (x, y) if signed_area(x, y) * sign > 0 else (x[::-1].copy(), y[::-1].copy())
