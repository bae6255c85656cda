"""Water balance of a solved field: what every feature gives to the aquifer and takes from it."""

from dataclasses import dataclass

import numpy as np

from ..elements.field_arrays import Floats
from ..elements.kernels_line import N_COEF
from ..elements.outline import Outline
from .network import BED, WALL
from .panels import TIP, Mesh, bounded_basis
from .setting import Places
from .state import State, source_supply
from .system import panel_strengths, source_strengths

BEYOND = "beyond the map"
_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(48)
_U, _W = 0.5 * (_NODES + 1.0), 0.5 * _WEIGHTS


@dataclass(frozen=True)
class BalanceRow:
    """Water (m3/d) that enters the aquifer through a feature, and that leaves it there."""

    feature: str
    kind: str
    inflow: float
    outflow: float


def balance_rows(places: Places, state: State) -> tuple[BalanceRow, ...]:
    """A row for every well, recharge area, line, and for what comes from or goes beyond the map."""
    rows = [_row(w.name, "well", -float(r)) for w, r in zip(places.wells, state.setting.well_rates, strict=True)]
    for area, rate in zip(places.areas, state.setting.recharge_rates, strict=True):
        rows.append(_row(area.name, "recharge", float(rate) * area.area()))
    mesh = state.system.mesh
    gain, loss = panel_exchange(mesh, state.x)
    supply = source_supply(state.system)[-len(places.lines) :] if places.lines else np.zeros(0)
    for k, line in enumerate(places.lines):
        mine = mesh.edges.line[mesh.edge] == k
        if isinstance(line, Outline):
            rows.append(_row(line.name, "outline", float(state.setting.inflows[k] * supply[k])))
        else:
            kind = type(line).__name__.lower().replace("lakeedge", "lake")
            rows.append(BalanceRow(line.name, kind, float(loss[mine].sum()), float(gain[mine].sum())))
    # what the strengths take out and nothing on the map brings in comes from afar
    far = float(state.system.take @ state.x - source_supply(state.system) @ source_strengths(state.setting))
    rows.append(_row(BEYOND, "beyond", 0.0 if places.reference is None else far))
    return tuple(rows)


def _row(name: str, kind: str, into: float) -> BalanceRow:
    return BalanceRow(name, kind, max(into, 0.0), max(-into, 0.0))


def panel_exchange(mesh: Mesh, x: Floats) -> tuple[Floats, Floats]:
    """Water (m3/d) that each panel takes out (gain of a stream) and lets in, by quadrature of the strength: (p,)."""
    flux = _flux_at(mesh, x, _U) * mesh.lengths()[:, None]
    flux[mesh.condition == WALL] = 0.0
    return np.maximum(flux, 0.0) @ _W, np.maximum(-flux, 0.0) @ _W


def _flux_at(mesh: Mesh, x: Floats, u: Floats) -> Floats:
    """sum_n a_n P_n per du (m2/d) of each panel at u (k,): (p, k)."""
    coef, _ = panel_strengths(mesh, x)
    plain = np.polynomial.legendre.legvander(2.0 * u - 1.0, N_COEF - 1)
    even = np.polynomial.legendre.legvander(u, 2 * N_COEF - 2)[:, ::2]
    return np.where((mesh.kind == TIP)[:, None], coef @ even.T, coef @ plain.T)


def exchange_pieces(mesh: Mesh, x: Floats, pieces: int = 8) -> tuple[np.ndarray, np.ndarray, Floats]:
    """Short pieces of every line that exchanges water: both ends (local complex m) and the mean strength (m2/d)."""
    u = np.linspace(0.0, 1.0, pieces + 1)
    z, _ = mesh.points(u)
    flux = np.zeros((mesh.edge.size, pieces))
    for k in range(pieces):
        inner = u[k] + (u[k + 1] - u[k]) * _U
        flux[:, k] = _flux_at(mesh, x, inner) @ _W * (u[k + 1] - u[k]) * mesh.lengths()
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = flux / abs(np.diff(z, axis=1))
    return z[:, :-1], z[:, 1:], mean


def upstream_take(mesh: Mesh, line: int, distance: float) -> Floats:
    """Row (n + 1,) whose product with x is the water (m3/d) that a line takes out up to ``distance`` (m) along it."""
    n = mesh.n_unknown // max(mesh.edge.size, 1)
    row = np.zeros(mesh.n_unknown + 1)
    edges, lengths = mesh.edges, mesh.lengths()
    for p in np.flatnonzero(edges.line[mesh.edge] == line):
        e = mesh.edge[p]
        ends = [edges.s1[e] + t * (edges.s2[e] - edges.s1[e]) for t in (mesh.t1[p], mesh.t2[p])]
        share = float(np.clip((distance - ends[0]) / (ends[1] - ends[0]), 0.0, 1.0))
        power = 2 if mesh.kind[p] == TIP else max(int(mesh.kind[p]), 1)
        edge_u = share ** (1.0 / power)
        # the upstream part lies at small u when the panel runs with the line, else at large u
        low, high = (0.0, edge_u) if ends[1] > ends[0] else (edge_u, 1.0)
        u = low + (high - low) * _U
        if mesh.kind[p] == TIP:
            basis = np.polynomial.legendre.legvander(u, 2 * n - 2)[:, ::2]
        else:
            basis = np.polynomial.legendre.legvander(2.0 * u - 1.0, N_COEF - 1)
            basis = basis @ bounded_basis(int(mesh.kind[p])).T if mesh.condition[p] == BED else basis[:, :n]
        row[p * n : p * n + n] = (high - low) * lengths[p] * (_W @ basis)
    return row
