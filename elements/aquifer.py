"""The aquifer: from head to discharge potential and back (Strack 1989, chapter 8).

Phi = K (h - b)^2 / 2 where the water table lies below the confining bed (h - b < H), and
Phi = K H (h - b) - K H^2 / 2 where it does not: one continuous function of h with slope K times the saturated
thickness. Phi < 0 means that the aquifer is dry; it is kept as a negative number so that it can be reported.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray


@dataclass(frozen=True)
class Aquifer:
    """One layer: conductivity (m/d), base (m), top (m; None = water table throughout), effective porosity (-)."""

    conductivity: float
    base: float
    top: float | None = None
    porosity: float = 0.25

    def __post_init__(self) -> None:
        if not self.conductivity > 0:
            raise ValueError(f"conductivity must be positive (m/d); instead received {self.conductivity}")
        if self.top is not None and not self.top > self.base:
            raise ValueError(f"top ({self.top} m) must lie above base ({self.base} m)")
        if not 0 < self.porosity < 1:
            raise ValueError(f"porosity must lie between 0 and 1; instead received {self.porosity}")

    @property
    def thickness(self) -> float:
        """Thickness H (m) of the confined aquifer; infinite for a water table throughout."""
        return np.inf if self.top is None else self.top - self.base

    def potential(self, head: ArrayLike) -> NDArray[np.float64]:
        """Discharge potential (m3/d) of a head (m), any shape; heads below the base give -K (b - h)^2 / 2."""
        depth = np.asarray(head, dtype=float) - self.base
        full = self.thickness
        wet = np.clip(depth, 0.0, full)
        above = np.maximum(depth - full, 0.0) * full if np.isfinite(full) else 0.0
        below = np.minimum(depth, 0.0)
        return self.conductivity * (0.5 * wet * wet + above - 0.5 * below * below)

    def head(self, potential: ArrayLike) -> NDArray[np.float64]:
        """Head (m) of a discharge potential (m3/d), any shape; negative potentials give the base (dry)."""
        u = np.maximum(np.asarray(potential, dtype=float), 0.0) / self.conductivity
        full = self.thickness
        if not np.isfinite(full):
            return self.base + np.sqrt(2.0 * u)
        return self.base + np.where(u < 0.5 * full * full, np.sqrt(2.0 * u), u / full + 0.5 * full)

    def saturated_thickness(self, potential: ArrayLike) -> NDArray[np.float64]:
        """Saturated thickness (m) at a discharge potential (m3/d), any shape; 0 where dry."""
        u = np.maximum(np.asarray(potential, dtype=float), 0.0) / self.conductivity
        return np.minimum(np.sqrt(2.0 * u), self.thickness)

    def potential_change(
        self, head: ArrayLike, conductivity: float = 0.0, base: float = 0.0, top: float = 0.0
    ) -> NDArray[np.float64]:
        """Derivative of the potential at fixed head (m, any shape) along changes of conductivity, base and top."""
        depth = np.maximum(np.asarray(head, dtype=float) - self.base, 0.0)
        change = conductivity / self.conductivity * self.potential(head) - base * self.conductivity * depth
        if self.top is not None:
            change = change + top * self.conductivity * np.maximum(depth - self.thickness, 0.0)
        return change
