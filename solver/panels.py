"""Edges cut into panels: singular end first, collocation points, check points, splitting (recipe of the solve)."""

from dataclasses import dataclass
from functools import cache

import numpy as np

from ..elements.field_arrays import Floats, Ints, Panels, make_panels
from ..elements.kernels_line import N_COEF
from .network import BED, WALL, Edges

ORDER = 8  # Legendre order of every panel
MAP = 3  # power of the map at a vertex: absorbs r^(-1 + k/3), whatever the angle
TIP = 0
PLAIN = 1
N_ROW = -(-3 * (ORDER + 1) // 2)  # collocation points a panel


@dataclass(frozen=True)
class Mesh:
    """Panels (p,) on edges: edge index, t1 and t2 the shares of the edge at the singular and at the other end."""

    edges: Edges
    edge: Ints
    t1: Floats
    t2: Floats
    kind: Ints

    @property
    def n_unknown(self) -> int:
        """Number of unknown strengths."""
        return self.edge.size * (ORDER + 1)

    @property
    def condition(self) -> Ints:
        """Condition (HEAD, BED, WALL) of each panel."""
        return self.edges.condition[self.edge]

    def panels(self) -> Panels:
        """Geometry for the kernels; bounded (BED) panels take all N_COEF coefficients."""
        z1, z2 = self._place(self.t1), self._place(self.t2)
        n_coef = np.where(self.condition == BED, np.where(self.kind == PLAIN, ORDER + 1, ORDER + MAP), ORDER + 1)
        return make_panels(z1, z2, self.kind, self.condition == WALL, n_coef)

    def points(self, u: Floats) -> tuple[np.ndarray, Floats]:
        """Places (p, k) in local complex m and shares of the edge (p, k) at the mapped coordinates u (k,)."""
        power = np.where(self.kind == TIP, 2, np.maximum(self.kind, 1))
        tau = u[None, :] ** power[:, None]
        z1, z2 = self._place(self.t1), self._place(self.t2)
        # from the singular end, so that places next to a vertex keep their digits
        return z1[:, None] + tau * (z2 - z1)[:, None], self.t1[:, None] + tau * (self.t2 - self.t1)[:, None]

    def lengths(self) -> Floats:
        """Length (m) of each panel."""
        return abs(self._place(self.t2) - self._place(self.t1))

    def _place(self, t: Floats) -> np.ndarray:
        z1, z2 = self.edges.z1[self.edge], self.edges.z2[self.edge]
        return np.where(t < 0.5, z1 + t * (z2 - z1), z2 - (1.0 - t) * (z2 - z1))


def first_mesh(edges: Edges) -> Mesh:
    """Every edge in two halves, each from its own vertex or tip to the middle."""
    n = edges.z1.size
    which = np.repeat(np.arange(n), 2)
    free = np.stack([edges.free1, edges.free2], axis=1).ravel()
    tip = free & (edges.condition[which] != BED)
    return Mesh(edges, which, np.tile([0.0, 1.0], n), np.full(2 * n, 0.5), np.where(tip, TIP, MAP))


def split(mesh: Mesh, bad: np.ndarray) -> Mesh:
    """Split the panels marked in ``bad`` (p,): an end panel at a quarter, an inner one in the middle."""
    cut = mesh.t1 + np.where(mesh.kind == PLAIN, 0.5, 0.25) * (mesh.t2 - mesh.t1)
    new = np.flatnonzero(bad)
    return Mesh(
        mesh.edges,
        np.concatenate([mesh.edge, mesh.edge[new]]),
        np.concatenate([mesh.t1, cut[new]]),
        np.concatenate([np.where(bad, cut, mesh.t2), mesh.t2[new]]),
        np.concatenate([mesh.kind, np.full(new.size, PLAIN)]),
    )


def row_coordinates() -> Floats:
    """Collocation points in u: Chebyshev points of the first kind on (0, 1), (N_ROW,)."""
    return 0.5 - 0.5 * np.cos(np.pi * (np.arange(N_ROW) + 0.5) / N_ROW)


def check_coordinates(between: int = 1) -> Floats:
    """Check points in u: evenly ``between`` the collocation points (one: midway), and both ends."""
    u = row_coordinates()
    inner = [u[:-1] + k / (between + 1) * (u[1:] - u[:-1]) for k in range(1, between + 1)]
    return np.concatenate([[0.0], np.sort(np.concatenate(inner)), [1.0]])


@cache
def bounded_basis(kind: int) -> Floats:
    """Matrix (ORDER + 1, N_COEF): the strength P_n(2u - 1) per unit length in terms of the panel's P_m(2u - 1) du.

    dl/du = L q u^(q-1), so that sigma dl = L sum_m B[n, m] P_m du; exact, a product of polynomials.
    """
    nodes, weights = np.polynomial.legendre.leggauss(32)
    u = 0.5 * (nodes + 1.0)
    basis = np.polynomial.legendre.legvander(nodes, N_COEF - 1)
    density = basis[:, : ORDER + 1] * (kind * u ** (kind - 1))[:, None]
    projected = density.T @ (weights[:, None] * basis) * (2 * np.arange(N_COEF) + 1)[None, :] / 2.0
    projected[abs(projected) < 1e-14] = 0.0
    return projected


def densities(u: Floats, kind: int, bounded: bool) -> Floats:
    """Strength per length (m2/d) of each unit coefficient at u (k,): (k, ORDER + 1); infinite at u = 0 if singular."""
    if bounded:
        return np.asarray(np.polynomial.legendre.legvander(2.0 * u - 1.0, ORDER), dtype=float)
    if kind == TIP:
        values = np.polynomial.legendre.legvander(u, 2 * ORDER)[:, ::2]
        return values / (2.0 * u)[:, None]
    values = np.polynomial.legendre.legvander(2.0 * u - 1.0, ORDER)
    return values / (kind * u ** (kind - 1))[:, None]
