"""Regional uniform flow."""

from dataclasses import dataclass


@dataclass(frozen=True)
class RegionalFlow:
    """Uniform discharge qx, qy (m2/d): Phi = -qx (x - x0) - qy (y - y0), zero at x0, y0 (m)."""

    qx: float
    qy: float
    x0: float = 0.0
    y0: float = 0.0
