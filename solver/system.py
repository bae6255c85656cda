"""The boundary conditions of a mesh as matrices: what unit strengths and unit sources do at every row.

Unknowns: the strengths of all panels (m2/d), then the constant of the potential (m3/d). Given sources, in order:
wells (1 m3/d), recharge areas (1 m/d), uniform flow qx and qy (1 m2/d), inflow along each line (1 m2/d).
"""

from dataclasses import dataclass

import numpy as np

from ..elements.aquifer import Aquifer
from ..elements.blocks import in_blocks
from ..elements.field_arrays import Floats, Ints, Panels, make_panels
from ..elements.flow_field import FlowField, superpose
from ..elements.kernels_basis import basis_normal_flows, basis_potentials, doublets
from ..elements.kernels_line import N_COEF, moment_table
from ..elements.outline import Outline
from .network import BED, WALL
from .panels import MAP, ORDER, TIP, Mesh, bounded_basis, densities
from .setting import Places, Setting, elements_at

N = ORDER + 1
UNIT = Aquifer(1.0, 0.0)


@dataclass(frozen=True)
class Rows:
    """Places on the boundary: local points (m,), panel, mapped coordinate u, stage and whose shift it follows."""

    z: np.ndarray
    panel: Ints
    u: Floats
    stage: Floats
    shift_share: Floats  # (m, l)
    normal: np.ndarray  # unit vector (complex) to the right of the line's direction: outward on a ring
    stretch: Floats  # dl/du (m)


@dataclass(frozen=True)
class System:
    """A mesh with its matrices at the collocation rows."""

    places: Places
    mesh: Mesh
    panels: Panels
    rows: Rows
    basis: Floats  # (m, n + 1): potential at HEAD and BED rows, flow along the normal times dl/du at WALL rows
    sources: Floats  # (m, s) the same of the unit sources
    density: Floats  # (m, n + 1) strength per length (m2/d) at BED rows, zero elsewhere
    take: Floats  # (n + 1,) water (m3/d) that each unit strength takes out
    circulation: Floats  # (k, n + 1) circulation of each outline's vortices


def assemble(places: Places, mesh: Mesh, u: Floats) -> System:
    """Matrices of the mesh at the mapped coordinates u (k,) of every panel."""
    panels = mesh.panels()
    rows = make_rows(places, mesh, u)
    x, y = np.ascontiguousarray(rows.z.real), np.ascontiguousarray(rows.z.imag)
    wall = mesh.condition[rows.panel] == WALL
    basis = np.empty((x.size, mesh.n_unknown + 1))
    basis[~wall] = potential_matrix(places, mesh, x[~wall], y[~wall])
    sources = np.empty((x.size, n_sources(places)))
    sources[~wall] = source_potentials(places, mesh, x[~wall], y[~wall])
    if wall.any():
        basis[wall] = _wall_rows(mesh, panels, rows, wall)
        sources[wall] = _source_flows(places, mesh, rows, wall)
    density = np.zeros_like(basis)
    for p in np.flatnonzero(mesh.condition == BED):
        here = np.flatnonzero(rows.panel == p)
        density[np.ix_(here, np.arange(p * N, p * N + N))] = densities(rows.u[here], int(mesh.kind[p]), bounded=True)
    take, circulation = _totals(places, mesh)
    return System(places, mesh, panels, rows, basis, sources, density, take, circulation)


def make_rows(places: Places, mesh: Mesh, u: Floats) -> Rows:
    """The rows at mapped coordinates u (k,) of every panel, panel by panel."""
    z, t = mesh.points(u)
    which = np.repeat(np.arange(mesh.edge.size), u.size)
    edges, edge = mesh.edges, mesh.edge[which]
    share = t.ravel()
    stage = (1 - share) * edges.stage1[edge] + share * edges.stage2[edge]
    shift_share = np.zeros((which.size, len(places.lines)))
    np.add.at(shift_share, (np.arange(which.size), edges.owner1[edge]), 1 - share)
    np.add.at(shift_share, (np.arange(which.size), edges.owner2[edge]), share)
    along = edges.z2[edge] - edges.z1[edge]
    power = np.where(mesh.kind == TIP, 2, np.maximum(mesh.kind, 1))[which]
    stretch = mesh.lengths()[which] * power * np.tile(u, mesh.edge.size) ** (power - 1)
    normal = -1j * along / abs(along) * _outward(places, mesh)[which]
    return Rows(z.ravel(), which, np.tile(u, mesh.edge.size), stage, shift_share, normal, stretch)


def _outward(places: Places, mesh: Mesh) -> Floats:
    """1 where the right of the line is its outer side, -1 where the left is (clockwise rings)."""
    out = np.ones(len(places.lines))
    for k, line in enumerate(places.lines):
        if line_is_ring(line):
            dx, dy = line.x - line.x[0], line.y - line.y[0]
            out[k] = 1.0 if np.sum(dx * np.roll(dy, -1) - dy * np.roll(dx, -1)) > 0 else -1.0
    return out[mesh.edges.line[mesh.edge]]


def line_is_ring(line: object) -> bool:
    """True for closed lake edges and closed outlines."""
    return bool(getattr(line, "closed", False))


def n_sources(places: Places) -> int:
    """Number of given unit sources."""
    return len(places.wells) + len(places.areas) + 2 + len(places.lines)


def source_strengths(setting: Setting) -> Floats:
    """Strengths (s,) of the given sources in their order."""
    return np.concatenate([setting.well_rates, setting.recharge_rates, setting.flow, setting.inflows])


def potential_matrix(places: Places, mesh: Mesh, x: Floats, y: Floats) -> Floats:
    """Potential of every unit strength, and 1 for the constant, at local points: (m, n + 1)."""
    panels = mesh.panels()
    m = x.size
    first = np.arange(panels.kind.size, dtype=np.int64) * N_COEF
    full = np.zeros((m, panels.kind.size * N_COEF))
    tables = np.stack([moment_table(k, N_COEF) for k in range(MAP + 1)])
    log_scale = float(np.log(places.scale))
    in_blocks(lambda s: basis_potentials(x[s], y[s], panels, first, tables, log_scale, full[s]), m)
    out = np.ones((m, mesh.n_unknown + 1))
    blocks = full.reshape(m, panels.kind.size, N_COEF)
    view = out[:, :-1].reshape(m, panels.kind.size, N)
    view[:] = blocks[:, :, :N]
    for p in np.flatnonzero(mesh.condition == BED):
        view[:, p] = blocks[:, p] @ bounded_basis(int(mesh.kind[p])).T
    wall = np.flatnonzero(mesh.condition == WALL)
    if wall.size:
        angle = np.empty((m, panels.kind.size))
        in_blocks(lambda s: doublets(x[s], y[s], panels, angle[s]), m)
        view[:, :, 0] += angle @ (jump_matrix(mesh) * mesh.lengths()[None, :])
    return out


def jump_matrix(mesh: Mesh) -> Floats:
    """Jump carried along each wall panel per unit circulation of every panel: (p, p), zero for other panels."""
    out = np.zeros((mesh.edge.size, mesh.edge.size))
    for line in np.unique(mesh.edges.line[mesh.edge[mesh.condition == WALL]]):
        members = np.flatnonzero(mesh.edges.line[mesh.edge] == line)
        edge = mesh.edge[members]
        middle = 0.5 * (mesh.t1 + mesh.t2)[members]
        s = mesh.edges.s1[edge] + middle * (mesh.edges.s2[edge] - mesh.edges.s1[edge])
        chain = members[np.argsort(s)]
        for k, p in enumerate(chain):
            if mesh.t2[p] > mesh.t1[p]:
                out[p, chain[:k]] = 1.0
            else:  # the panel runs against its line: see the doublet form in kernels_line
                out[p, chain[: k + 1]] = -1.0
    return out


def _wall_rows(mesh: Mesh, panels: Panels, rows: Rows, wall: np.ndarray) -> Floats:
    z, normal = rows.z[wall], rows.normal[wall]
    first = np.arange(panels.kind.size, dtype=np.int64) * N_COEF
    full = np.zeros((z.size, panels.kind.size * N_COEF))
    parts = [np.ascontiguousarray(a) for a in (z.real, z.imag, normal.real, normal.imag)]
    in_blocks(lambda s: basis_normal_flows(*(a[s] for a in parts), panels, first, full[s]), z.size)
    blocks = full.reshape(z.size, panels.kind.size, N_COEF)
    out = np.zeros((z.size, mesh.n_unknown + 1))
    view = out[:, :-1].reshape(z.size, panels.kind.size, N)
    view[:] = blocks[:, :, :N]
    for p in np.flatnonzero(mesh.condition == BED):
        view[:, p] = blocks[:, p] @ bounded_basis(int(mesh.kind[p])).T
    return out * rows.stretch[wall][:, None]


def unit_field(places: Places, mesh: Mesh, k: int) -> FlowField:
    """Field of the k-th given source at unit strength (local origin)."""
    n_wells, n_areas = len(places.wells), len(places.areas)
    unit = np.zeros(n_sources(places))
    unit[k] = 1.0
    rates, areas, flow = unit[:n_wells], unit[n_wells : n_wells + n_areas], unit[n_wells + n_areas :][:2]
    at = Setting(UNIT, rates, areas, flow, np.zeros(0), np.zeros(0), unit[n_wells + n_areas + 2 :], np.nan)
    uniform, wells, fields = elements_at(places, at)
    sheets, coef = inflow_sheets(places, mesh, at.inflows)
    wells = [w for w in wells if w.rate != 0.0]
    fields = [a for a in fields if a.rate != 0.0]
    return superpose(
        UNIT,
        origin=places.origin,
        scale=places.scale,
        flow=uniform,
        wells=wells,
        areas=fields,
        panels=sheets,
        coef=coef,
    )


def inflow_sheets(places: Places, mesh: Mesh, inflows: Floats) -> tuple[Panels, Floats]:
    """Plain panels of known strength -inflow along outlines that let water in: panels and coef (p, N_COEF)."""
    edges = mesh.edges
    use = np.flatnonzero(inflows[edges.line] != 0.0) if edges.line.size else np.zeros(0, dtype=int)
    ones = np.ones(use.size)
    coef = np.zeros((use.size, N_COEF))
    coef[:, 0] = -inflows[edges.line[use]]
    return make_panels(edges.z1[use], edges.z2[use], ones, 0 * ones, ones), coef


def source_potentials(places: Places, mesh: Mesh, x: Floats, y: Floats) -> Floats:
    """Potential of every unit source at local points: (m, s)."""
    out = np.zeros((x.size, n_sources(places)))
    for k in _acting(places):
        out[:, k] = unit_field(places, mesh, k).potential(x + places.origin[0], y + places.origin[1])
    return out


def _acting(places: Places) -> list[int]:
    """Indices of sources that exist (only outlines can have an inflow)."""
    base = len(places.wells) + len(places.areas) + 2
    return [*range(base), *(base + k for k, line in enumerate(places.lines) if isinstance(line, Outline))]


def _source_flows(places: Places, mesh: Mesh, rows: Rows, wall: np.ndarray) -> Floats:
    """Flow of every unit source along the normals of the wall rows times dl/du, mean of both sides."""
    out = np.zeros((int(wall.sum()), n_sources(places)))
    for k in _acting(places):
        flow = normal_flow(unit_field(places, mesh, k), rows, wall)
        out[:, k] = flow * rows.stretch[wall]
    return out


def normal_flow(field: FlowField, rows: Rows, which: np.ndarray) -> Floats:
    """Flow (m2/d) of a field along the normals of some rows, mean of both sides of the line."""
    z, normal = rows.z[which], rows.normal[which]
    step = 1e-7 * np.maximum(rows.stretch[which], 1e-3) * normal
    total = 0.0
    for at in (z + step, z - step):
        qx, qy = field.discharge(at.real + field.origin[0], at.imag + field.origin[1])
        total = total + 0.5 * (qx * normal.real + qy * normal.imag)
    return np.asarray(total)


def _totals(places: Places, mesh: Mesh) -> tuple[Floats, Floats]:
    """Water taken out by each unit strength, and the circulation of each outline's vortices."""
    take = np.zeros(mesh.n_unknown + 1)
    lengths = mesh.lengths()
    outlines = [k for k, line in enumerate(places.lines) if isinstance(line, Outline)]
    circulation = np.zeros((len(outlines), mesh.n_unknown + 1))
    for p in range(mesh.edge.size):
        columns = slice(p * N, p * N + N)
        if mesh.condition[p] == WALL:
            circulation[outlines.index(int(mesh.edges.line[mesh.edge[p]])), p * N] = lengths[p]
        elif mesh.condition[p] == BED:
            take[columns] = lengths[p] * bounded_basis(int(mesh.kind[p]))[:, 0]
        else:
            take[p * N] = lengths[p]
    return take, circulation


def panel_strengths(mesh: Mesh, x: Floats) -> tuple[Floats, Floats]:
    """Kernel coefficients (p, N_COEF) and jumps (p,) of the unknowns x (n + 1,)."""
    a = x[:-1].reshape(mesh.edge.size, N)
    coef = np.zeros((mesh.edge.size, N_COEF))
    coef[:, :N] = a
    for p in np.flatnonzero(mesh.condition == BED):
        coef[p] = a[p] @ bounded_basis(int(mesh.kind[p]))
    if not np.any(mesh.condition == WALL):
        return coef, np.zeros(mesh.edge.size)
    return coef, jump_matrix(mesh) @ (mesh.lengths() * a[:, 0])
