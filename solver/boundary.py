"""The boundary solve: cut, assemble, solve, check between the collocation points, split what misses, report.

The misfit of a head is a harmonic function's boundary value, so the largest one on the boundary bounds the head
error everywhere (maximum principle); it does not bound the flux per edge.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ..elements.aquifer import Aquifer
from ..elements.field_arrays import Floats
from ..elements.flow_field import FlowField
from .balance import BalanceRow, balance_rows
from .network import BED, HEAD, WALL, GeometryError, make_edges
from .panels import Mesh, check_coordinates, densities, first_mesh, row_coordinates, split
from .setting import Element, Places, Setting, sort_elements
from .state import NotSolvedError, State, bed_depths, flow_of, row_stages, row_weights, solve_state
from .system import Rows, System, assemble, make_rows, normal_flow

CAUTION = 1.3  # the largest misfit seen at the check points was 0.78 to 1.00 of the true largest one
AT_KINKS = 9  # check points between two collocation points where a leakage that stops growing makes a kink
MOST_ROUNDS = 8
MOST_UNKNOWNS = 12_000
SHORTEST = 1e-7  # of its edge: a failing panel this short is a fault of the data


@dataclass(frozen=True)
class BoundaryReport:
    """How well the boundary conditions are met: the largest misfit (m of head), where (m) and on which feature."""

    max_misfit: float
    at: tuple[float, float]
    feature: str
    tolerance: float
    met: bool
    unknowns: int
    rounds: int
    notes: tuple[str, ...]


@dataclass(frozen=True)
class Solution:
    """A solved site: the field, how well it meets its conditions, and the water balance."""

    flow: FlowField
    boundary: BoundaryReport
    balance: tuple[BalanceRow, ...]
    places: Places
    state: State

    def feature_flow(self, name: str) -> float:
        """Net water (m3/d) from a feature into the aquifer (> 0) or out of it (< 0); KeyError for an unknown name."""
        for row in self.balance:
            if row.feature == name:
                return row.inflow - row.outflow
        raise KeyError(name)


def solve(
    aquifer: Aquifer,
    elements: Sequence[Element],
    *,
    reference: tuple[tuple[float, float], float] | None = None,
    tolerance: float = 1e-3,
) -> Solution:
    """Flow field of elements in an aquifer, all boundary conditions met to ``tolerance`` (m of head).

    reference: ((x, y), head) in m fixes the head at a place, water may come from or go beyond the map; None means
    no net exchange with afar, the take of all lines balancing recharge and wells exactly.

    Raises GeometryError for lines that cannot stand together, NotSolvedError where the conditions do not fix the field.
    A tolerance that is missed is not an error: ``boundary.met`` says so.
    """
    places, setting = sort_elements(aquifer, elements, reference)
    return solve_places(places, setting, tolerance=tolerance)


def solve_places(places: Places, setting: Setting, *, tolerance: float, mesh: Mesh | None = None) -> Solution:
    """Solve a setting, refining ``mesh`` (or the first one of the lines) until the tolerance is met."""
    _refuse_touching_wells(places)
    if mesh is None:
        mesh = first_mesh(make_edges(places.lines, places.origin))
    if mesh.edge.size == 0 and places.reference is None:
        raise NotSolvedError("no lake, stream or reference head fixes the level of the water table")
    rounds = 0
    while True:
        rounds += 1
        system = assemble(places, mesh, row_coordinates())
        state = solve_state(system, setting)
        rows, misfit = check_misfit(places, state)
        worst = np.zeros(mesh.edge.size)
        np.maximum.at(worst, rows.panel, CAUTION * abs(misfit))
        bad = worst > tolerance
        if not bad.any() or rounds == MOST_ROUNDS or mesh.n_unknown * (1 + bad.mean()) > MOST_UNKNOWNS:
            break
        _refuse_endless(places, mesh, bad)
        mesh = split(mesh, bad)
    report = _report(places, rows, misfit, tolerance, mesh, rounds)
    return Solution(flow_of(places, state), report, balance_rows(places, state), places, state)


def solution_of(places: Places, state: State, tolerance: float) -> Solution:
    """The solution of a state on the mesh it has, checked; ``boundary.met`` tells whether the mesh serves."""
    rows, misfit = check_misfit(places, state)
    report = _report(places, rows, misfit, tolerance, state.system.mesh, 1)
    return Solution(flow_of(places, state), report, balance_rows(places, state), places, state)


def check_misfit(places: Places, state: State, u: Floats | None = None) -> tuple[Rows, Floats]:
    """Misfit (m of head) of a state at mapped coordinates u of every panel (the check points unless given)."""
    system, setting = state.system, state.setting
    mesh = system.mesh
    if u is None:
        kinks = bool(np.isfinite(bed_depths(places)).any())
        u = check_coordinates(AT_KINKS if kinks else 1)
    rows = make_rows(places, mesh, u)
    if rows.z.size == 0:
        return rows, np.zeros(0)
    probe = System(places, mesh, system.panels, rows, system.basis, system.sources, system.density, system.take,
                   system.circulation)  # fmt: skip
    field = flow_of(places, state)
    stage = row_stages(probe, setting)
    condition = mesh.condition[rows.panel]
    weight = row_weights(probe, setting, stage, condition)
    misfit = np.zeros(rows.z.size)
    head_rows = condition != WALL
    phi = field.potential(rows.z.real[head_rows] + field.origin[0], rows.z.imag[head_rows] + field.origin[1])
    prescribed = setting.aquifer.potential(stage[head_rows])
    misfit[head_rows] = (phi - prescribed) * weight[head_rows]
    bed = condition == BED
    if bed.any():
        misfit[bed] = _bed_misfit(places, state, rows, bed, phi[condition[head_rows] == BED], stage[bed])
    if not head_rows.all():
        wall = ~head_rows
        flow = normal_flow(field, rows, wall)
        line = mesh.edges.line[mesh.edge[rows.panel[wall]]]
        misfit[wall] = (flow + 0.5 * setting.inflows[line]) * rows.stretch[wall] * weight[wall]
    return rows, misfit


def _bed_misfit(places: Places, state: State, rows: Rows, bed: np.ndarray, phi: Floats, stage: Floats) -> Floats:
    mesh, setting = state.system.mesh, state.setting
    panel, u = rows.panel[bed], rows.u[bed]
    line = mesh.edges.line[mesh.edge[panel]]
    n = mesh.n_unknown // mesh.edge.size
    strength = np.sum(densities(u, 1, bounded=True) * state.x[:-1].reshape(-1, n)[panel], axis=1)
    depth = bed_depths(places)[line]
    head = np.maximum(setting.aquifer.head(phi), stage - depth)
    return head - stage - strength / setting.conductances[line]


def _report(places: Places, rows: Rows, misfit: Floats, tolerance: float, mesh: Mesh, rounds: int) -> BoundaryReport:
    if misfit.size == 0:
        return BoundaryReport(0.0, places.origin, "", tolerance, True, 0, rounds, mesh.edges.notes)
    k = int(np.argmax(abs(misfit)))
    at = float(rows.z[k].real + places.origin[0]), float(rows.z[k].imag + places.origin[1])
    worst = float(CAUTION * abs(misfit[k]))
    name = places.lines[int(mesh.edges.line[mesh.edge[rows.panel[k]]])].name
    return BoundaryReport(worst, at, name, tolerance, worst <= tolerance, mesh.n_unknown, rounds, mesh.edges.notes)


def _refuse_endless(places: Places, mesh: Mesh, bad: np.ndarray) -> None:
    short = bad & (abs(mesh.t2 - mesh.t1) < SHORTEST) & (mesh.condition == HEAD)
    if short.any():
        p = int(np.flatnonzero(short)[0])
        z = mesh.points(np.array([0.0]))[0][p, 0]
        name = places.lines[int(mesh.edges.line[mesh.edge[p]])].name
        raise GeometryError(
            f"{name!r}: two heads meet at the vertex x {z.real + places.origin[0]:.2f}, "
            f"y {z.imag + places.origin[1]:.2f}"
        )


def _refuse_touching_wells(places: Places) -> None:
    """A well whose screen touches a line has no meaning in one layer."""
    for well in places.wells:
        for line in places.lines:
            x, y = line.x, line.y
            if getattr(line, "closed", False):
                x, y = np.append(x, x[0]), np.append(y, y[0])
            z = (x - well.x) + 1j * (y - well.y)
            step = np.diff(z)
            share = np.clip(-(z[:-1] * np.conj(step)).real / abs(step) ** 2, 0.0, 1.0)
            gap = float(abs(z[:-1] + share * step).min())
            if gap <= well.radius:
                raise GeometryError(
                    f"well {well.name!r} is {gap:.2f} m from {line.name!r}, nearer than its radius ({well.radius} m)"
                )
