"""Uneven ground: the correlated error that a smooth model of patchy ground makes at the levels.

First-order perturbation theory of flow in heterogeneous ground (Dagan 1989; Kitanidis): with ln K = ln K0 + f, the
potential at a level changes by the integral of f times grad G . Q0 over the site, G the response to a unit source
there with all boundary conditions homogeneous. So the covariance of the heads is s^2 J R J' with J over cells, R the
exponential correlation between cell means at the patch length, s the standard deviation of ln K.
"""

from dataclasses import dataclass

import numpy as np
import shapely

from ..elements.field_arrays import Floats
from ..elements.flow_field import FlowField, superpose
from ..elements.lake import LakeEdge
from ..elements.outline import Outline
from ..elements.recharge import RechargeArea
from .sensitivity import unit_source_fields
from .setting import Places
from .state import State, flow_of
from .system import UNIT

MOST_CELLS = 2600
UNSURE = (0.25, 0.5, 0.25)


@dataclass(frozen=True)
class Cells:
    """Square cells (c,) that carry the unevenness: middles in map coordinates (m), side (m), grid indices."""

    x: Floats
    y: Floats
    side: float
    column: np.ndarray
    row: np.ndarray


def make_cells(places: Places, x: Floats, y: Floats, patch: float) -> Cells:
    """Cells over the levels x, y (m) and the lines, on land and inside outlines; at most MOST_CELLS of them.

    Side: a quarter of a patch, or as much more as the size of the site asks for (R then holds for cell means).
    """
    xs = np.concatenate([x, *(line.x for line in places.lines)])
    ys = np.concatenate([y, *(line.y for line in places.lines)])
    rings = [line for line in places.lines if getattr(line, "closed", False)]
    limits = [r for r in rings if isinstance(r, Outline) or (isinstance(r, LakeEdge) and r.land_inside)]
    margin = 0.0 if limits else max(2.0 * patch, 0.1 * max(float(np.ptp(xs)), float(np.ptp(ys))))
    x0, x1, y0, y1 = xs.min() - margin, xs.max() + margin, ys.min() - margin, ys.max() + margin
    side = max(0.25 * patch, float(np.sqrt((x1 - x0) * (y1 - y0) / MOST_CELLS)))
    nx, ny = max(1, round((x1 - x0) / side)), max(1, round((y1 - y0) / side))
    column, row = (a.ravel() for a in np.meshgrid(np.arange(nx), np.arange(ny)))
    cx = x0 + 0.5 * ((x1 - x0) - nx * side) + (column + 0.5) * side
    cy = y0 + 0.5 * ((y1 - y0) - ny * side) + (row + 0.5) * side
    keep = np.ones(cx.size, dtype=bool)
    points = shapely.points(cx, cy)
    for ring in rings:
        inside = shapely.contains(shapely.Polygon(np.stack([ring.x, ring.y], axis=1)), points)
        keep &= inside if any(ring is r for r in limits) else ~inside
    return Cells(cx[keep], cy[keep], side, column[keep], row[keep])


def cell_correlation(cells: Cells, patch: float) -> Floats:
    """Correlation exp(-r / patch) averaged over pairs of cells: (c, c).

    The mean over two equal squares is the integral of the correlation over their difference with triangular weight.
    """
    nodes, weights = np.polynomial.legendre.leggauss(12)
    s = 0.5 * (nodes + 1.0)
    half, half_weight = s * s, 0.5 * weights * 2.0 * s  # dense near zero, where the correlation has its cusp
    d = np.concatenate([-half[::-1], half]) * cells.side
    w = np.concatenate([half_weight[::-1], half_weight]) * (1.0 - abs(d) / cells.side)
    n_col, n_row = int(np.ptp(cells.column)) + 1, int(np.ptp(cells.row)) + 1
    table = np.empty((n_col, n_row))
    dy = np.arange(n_row)[:, None] * cells.side + d
    for i in range(n_col):
        dx = i * cells.side + d
        r = np.sqrt(dx[None, :, None] ** 2 + dy[:, None, :] ** 2)
        table[i] = np.einsum("x,jxy,y->j", w, np.exp(-r / patch), w, optimize=True)
    di = abs(cells.column[:, None] - cells.column[None, :])
    dj = abs(cells.row[:, None] - cells.row[None, :])
    return table[di, dj]


def cell_responses(places: Places, state: State, x: Floats, y: Floats, cells: Cells) -> Floats:
    """J (k, c): change of the head (m) at levels x, y (k,) per unit ln K in each cell.

    Of the product of both discharges the singular parts of the level's source and of the wells are means over the
    cell in closed form, the rest is taken near the middle.
    """
    flow = flow_of(places, state)
    at_x, at_y = _sample_points(places, cells)
    q0x, q0y = flow.discharge(at_x, at_y)
    square = _unit_square(cells.side)
    for well, rate in zip(places.wells, state.setting.well_rates, strict=True):
        # at a point the pull of a well has no bound: by reciprocity its mean is the pull of the square on the well
        dx, dy = well.x - at_x, well.y - at_y
        mean_x, mean_y = square.discharge(well.x - cells.x, well.y - cells.y)
        reach = np.maximum(dx * dx + dy * dy, well.radius**2)
        q0x += rate * (mean_x / cells.side**2 - dx / (2.0 * np.pi * reach))
        q0y += rate * (mean_y / cells.side**2 - dy / (2.0 * np.pi * reach))
    fields = unit_source_fields(places, state, x, y)
    phi = flow.potential(x, y)
    thick = np.maximum(flow.aquifer.saturated_thickness(phi), 1e-3)
    slope = flow.aquifer.conductivity * thick
    out = np.empty((x.size, cells.x.size))
    for k, field in enumerate(fields):
        gx, gy = field.discharge(at_x, at_y)
        sx, sy = square.discharge(x[k] - cells.x, y[k] - cells.y)
        # grad G = -discharge of the regular part, plus the exact integral of the source's own gradient
        out[k] = ((sx - gx * cells.side**2) * q0x + (sy - gy * cells.side**2) * q0y) / slope[k]
    return out


def _sample_points(places: Places, cells: Cells) -> tuple[Floats, Floats]:
    """Middles of the cells (c,), moved off the vertices of lines, where the discharge has no bound.

    At a tip both discharges grow as r^(-1/2): their product has its mean over a square round it at r = 0.28 side.
    """
    if not places.lines:
        return cells.x, cells.y
    z = cells.x + 1j * cells.y
    vertices = np.concatenate([line.x + 1j * line.y for line in places.lines])
    gap = z[:, None] - vertices
    nearest = np.argmin(abs(gap), axis=1)
    away = gap[np.arange(z.size), nearest]
    distance = abs(away)
    towards = np.where(distance > 0, away / np.where(distance > 0, distance, 1.0), 1.0 + 0.0j)
    moved = np.where(distance < 0.28 * cells.side, vertices[nearest] + 0.28 * cells.side * towards, z)
    return np.ascontiguousarray(moved.real), np.ascontiguousarray(moved.imag)


def _unit_square(side: float) -> FlowField:
    half = 0.5 * side
    ring = np.array([-half, half, half, -half]), np.array([-half, -half, half, half])
    return superpose(UNIT, areas=[RechargeArea("cell", *ring, 1.0)])


@dataclass(frozen=True)
class Ground:
    """Cells of a site and the correlation (c, c) of ln K between them, for one ground whatever flows through it."""

    cells: Cells
    correlation: Floats

    def covariance(self, places: Places, state: State, x: Floats, y: Floats) -> Floats:
        """Covariance (m2) of the heads at map points x, y (k,) where sd(ln K) = 1: J R J', (k, k)."""
        response = cell_responses(places, state, x, y, self.cells)
        return response @ self.correlation @ response.T


def make_ground(places: Places, x: Floats, y: Floats, patch: float, factor: float = 1.0) -> Ground:
    """Ground of a patch length (m) under the levels x, y (k,), known within a factor.

    R is then its mean over patch / factor, patch and patch x factor with the weights UNSURE. Long patches make the
    errors that all levels share, and these decide how well the conductivity is known.
    """
    cells = make_cells(places, x, y, patch)
    if factor == 1.0:
        return Ground(cells, cell_correlation(cells, patch))
    lengths = (patch / factor, patch, patch * factor)
    parts = [w * cell_correlation(cells, p) for w, p in zip(UNSURE, lengths, strict=True)]
    return Ground(cells, np.sum(parts, axis=0))
