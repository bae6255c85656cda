"""A flow field as the kernels see it: contiguous arrays in local coordinates (m from the field's origin)."""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from .kernels_line import N_COEF, N_MOMENT, moment_table
from .recharge import RechargeArea, signed_area

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

N_RING_MOMENT = 36  # a ring is far beyond three of its radii


class FieldArrays(NamedTuple):
    """All that a point evaluation needs. Lengths m, rates m3/d, discharges m2/d, coordinates local."""

    uniform: Floats  # (6,) qx, qy, x0, y0, constant, ln R (R: the length inside every logarithm)
    wells: Floats  # (n, 4) x, y, rate, radius
    panel: Floats  # (p, 9) x1, y1, x2, y2, middle x, y, half vector x, y, length
    kind: Ints  # (p,) map of the panel, see kernels_line
    vortex: Ints  # (p,) 1 for a vortex panel
    n_coef: Ints  # (p,) coefficients in use
    coef: Floats  # (p, N_COEF) strengths a_n (m2/d)
    jump: Floats  # (p,) vortex: potential jump (m3/d) carried along the whole panel
    moment: Floats  # (p, N_MOMENT) far moments times L/(2 pi)
    log_moment: Floats  # (p, N_MOMENT) the same over their order, 0 for order 0: the series of the potential
    edge: Floats  # (e, 7) x1, y1, x2, y2, unit vector along, length of the edges of recharge rings
    ring_start: Ints  # (r + 1,) first edge of each ring
    ring: Floats  # (r, 5) middle x, y, radius, rate, signed area
    ring_moment: NDArray[np.complex128]  # (r, N_RING_MOMENT) int ((z - c)/radius)^k dA


class Panels(NamedTuple):
    """Geometry of panels without strengths: what the boundary solve cuts and assembles."""

    panel: Floats  # (p, 9) as in FieldArrays
    kind: Ints
    vortex: Ints
    n_coef: Ints


def make_panels(z1: np.ndarray, z2: np.ndarray, kind: np.ndarray, vortex: np.ndarray, n_coef: np.ndarray) -> Panels:
    """Panels from complex end points (p,) in local m, singular end first."""
    middle, half = 0.5 * (z1 + z2), 0.5 * (z2 - z1)
    columns = [
        z1.real,
        z1.imag,
        z2.real,
        z2.imag,
        middle.real,
        middle.imag,
        half.real,
        half.imag,
        abs(z2 - z1),
    ]
    geometry = np.ascontiguousarray(np.stack(columns, axis=1), dtype=float).reshape(-1, 9)
    ints = [np.ascontiguousarray(a, dtype=np.int64) for a in (kind, vortex, n_coef)]
    return Panels(geometry, *ints)


def no_panels() -> Panels:
    """An empty set of panels."""
    empty = np.zeros(0)
    return make_panels(empty + 0j, empty + 0j, empty, empty, empty)


def panel_moments(panels: Panels, coef: Floats) -> Floats:
    """Far moments (p, N_MOMENT) of panels with strengths coef (p, N_COEF), times L/(2 pi)."""
    out = np.zeros((len(panels.kind), N_MOMENT))
    for kind in np.unique(panels.kind):
        rows = np.flatnonzero(panels.kind == kind)
        out[rows] = coef[rows] @ moment_table(int(kind), N_COEF)
    return out * (panels.panel[:, 8] / (2.0 * np.pi))[:, None]


def log_moments(moment: Floats) -> Floats:
    """Moments (p, N_MOMENT) over their order, for the potential; that of order 0 goes with the logarithm."""
    order = np.arange(N_MOMENT, dtype=float)
    return np.ascontiguousarray(moment[:, :] / np.maximum(order, 1.0) * (order > 0))


def ring_arrays(areas: list[RechargeArea], x0: float, y0: float) -> tuple[Floats, Ints, Floats, np.ndarray]:
    """Edges, first edges, ring rows and ring moments of recharge areas, local to the origin x0, y0 (m)."""
    edges, starts, rings, moments = [np.zeros((0, 7))], [0], [], []
    for area in areas:
        for rx, ry in area.rings():
            x, y = rx - x0, ry - y0
            dx, dy = np.roll(x, -1) - x, np.roll(y, -1) - y
            length = np.hypot(dx, dy)
            columns = [x, y, np.roll(x, -1), np.roll(y, -1), dx / length, dy / length, length]
            edges.append(np.stack(columns, axis=1))
            starts.append(starts[-1] + x.size)
            cx, cy = 0.5 * (x.min() + x.max()), 0.5 * (y.min() + y.max())
            radius = float(np.hypot(x - cx, y - cy).max())
            rings.append([cx, cy, radius, area.rate, signed_area(x, y)])
            moments.append(_ring_moments((x - cx + 1j * (y - cy)) / radius) * radius**2)
    ring = np.array(rings, dtype=float).reshape(-1, 5)
    moment = np.array(moments, dtype=complex).reshape(-1, N_RING_MOMENT)
    return np.ascontiguousarray(np.concatenate(edges)), np.array(starts, dtype=np.int64), ring, moment


def _ring_moments(z: np.ndarray) -> np.ndarray:
    """Int z^k dA over the polygon z (n,) = (1/2i) contour integral of conj(z) z^k dz, exact by Gauss rule."""
    nodes, weights = np.polynomial.legendre.leggauss(N_RING_MOMENT // 2 + 2)
    step = np.roll(z, -1) - z
    at = z[:, None] + step[:, None] * 0.5 * (nodes + 1.0)
    f = np.conj(at) * step[:, None] * 0.5 * weights
    return np.array([np.sum(f * at**k) for k in range(N_RING_MOMENT)]) / 2j
