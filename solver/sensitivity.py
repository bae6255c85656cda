"""Analytic derivatives of a solved field: how potentials answer to a change of any number of the setting.

With the rows r(x, p) = 0 (metres of head) and the side conditions B x = d(p), a change dp of the setting moves the
unknowns by dx = -A^+ (dr/dp) with the tangent A of the state (implicit differentiation of the least-squares
solution; exact to the misfit, which is small).
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ..elements.field_arrays import Floats
from ..elements.flow_field import FlowField, superpose
from .network import BED, HEAD, WALL
from .setting import Places, Setting
from .state import State, row_stages, source_supply
from .system import UNIT, System, panel_strengths, potential_matrix, source_potentials, source_strengths

SOURCE = 1e-3  # m: radius of a unit source


@dataclass(frozen=True)
class Probe:
    """Points (m,) in local coordinates with what unknowns and sources do there."""

    x: Floats
    y: Floats
    basis: Floats  # (m, n + 1)
    sources: Floats  # (m, s)


def make_probe(system: System, x: Floats, y: Floats) -> Probe:
    """Probe at map coordinates x, y (m,) in m."""
    places, mesh = system.places, system.mesh
    lx = np.ascontiguousarray(np.asarray(x, dtype=float) - places.origin[0])
    ly = np.ascontiguousarray(np.asarray(y, dtype=float) - places.origin[1])
    return Probe(lx, ly, potential_matrix(places, mesh, lx, ly), source_potentials(places, mesh, lx, ly))


def potentials(state: State, probe: Probe) -> Floats:
    """Potential (m3/d) of a state at the points of a probe."""
    return probe.basis @ state.x + probe.sources @ source_strengths(state.setting)


def unknown_changes(state: State, changes: Sequence[Setting]) -> Floats:
    """Changes (n + 1, k) of the unknowns for k changes of the setting, differences in every field (aquifer too)."""
    rows = np.stack([_row_change(state, change) for change in changes], axis=1)
    conditions = np.stack([_condition_change(state, change) for change in changes], axis=1)
    return state.response(rows, conditions)


def _aquifer_part(change: Setting) -> tuple[float, float, float]:
    d = change.aquifer
    return d.conductivity, d.base, d.top if d.top is not None else 0.0


def _row_change(state: State, change: Setting) -> Floats:
    """Change of the row residuals (m,) in metres of head, the unknowns held."""
    system, setting = state.system, state.setting
    aquifer = setting.aquifer
    condition = system.mesh.condition[system.rows.panel]
    stage = row_stages(system, setting)
    d_stage = system.rows.shift_share @ change.shifts
    d_given = system.sources @ source_strengths(change)
    aquifer_part = _aquifer_part(change)
    rows = d_given * state.weight
    head = condition == HEAD
    thick = aquifer.saturated_thickness(aquifer.potential(stage))
    slope = aquifer.conductivity * thick
    d_prescribed = slope * d_stage + aquifer.potential_change(stage, *aquifer_part)
    rows[head] -= (d_prescribed * state.weight)[head]
    line = system.mesh.edges.line[system.mesh.edge[system.rows.panel]]
    wall = condition == WALL
    rows[wall] += (0.5 * change.inflows[line] * system.rows.stretch * state.weight)[wall]
    bed = condition == BED
    if bed.any():
        phi = system.basis[bed] @ state.x + system.sources[bed] @ source_strengths(setting)
        wet = (state.weight[bed] > 0.0).astype(float)
        heads = aquifer.head(phi)
        conductance = setting.conductances[line][bed]
        # below the clogged layer its underside, which moves with the stage, takes the place of the head
        rows[bed] -= state.weight[bed] * aquifer.potential_change(heads, *aquifer_part)
        rows[bed] -= d_stage[bed] * wet
        rows[bed] += (system.density[bed] @ state.x) / conductance**2 * change.conductances[line][bed]
    return rows


def _condition_change(state: State, change: Setting) -> Floats:
    """Change of the right sides of the side conditions."""
    system, setting = state.system, state.setting
    places = system.places
    out = np.zeros(len(system.circulation) + 1)
    given = source_strengths(change)
    if places.reference is None:
        out[-1] = float(source_supply(system) @ given)
    else:
        x, y = (np.array([c - o]) for c, o in zip(places.reference, places.origin, strict=True))
        head = setting.reference_head
        aquifer = setting.aquifer
        slope = aquifer.conductivity * float(aquifer.saturated_thickness(aquifer.potential(head)))
        moved = slope * change.reference_head + float(aquifer.potential_change(head, *_aquifer_part(change)))
        out[-1] = moved - float(source_potentials(places, system.mesh, x, y)[0] @ given)
    return out


def potential_change(state: State, probe: Probe, change: Setting, dx: Floats) -> Floats:
    """Change of the potential (m3/d) at a probe's points."""
    return probe.basis @ dx + probe.sources @ source_strengths(change)


def head_change(state: State, probe: Probe, change: Setting, d_phi: Floats) -> Floats:
    """Change of the head (m) at a probe's points from that of the potential and of the aquifer."""
    aquifer, d = state.setting.aquifer, change.aquifer
    phi = potentials(state, probe)
    thick = np.maximum(aquifer.saturated_thickness(phi), 1e-6)
    explicit = aquifer.potential_change(aquifer.head(phi), d.conductivity, d.base, d.top or 0.0)
    return (d_phi - explicit) / (aquifer.conductivity * thick)


def unit_source_fields(places: Places, state: State, x: Floats, y: Floats) -> list[FlowField]:
    """Response G of the potential to a unit injection (1 m3/d) at each map point x, y (k,), all boundary conditions
    homogeneous (linear in the tangent of the state), without the singular part at the source itself.
    """
    system = state.system
    condition = system.mesh.condition[system.rows.panel]
    at_rows = np.zeros((system.rows.z.size, x.size))
    conditions = np.zeros((len(system.circulation) + 1, x.size))
    wall = condition == WALL
    at = (x - places.origin[0]) + 1j * (y - places.origin[1])
    away = system.rows.z[:, None] - at
    at_rows[~wall] = _source_potential(away[~wall], places)
    outward = away[wall] / (2.0 * np.pi * abs(away[wall]) ** 2)
    normal = system.rows.normal[wall][:, None]
    at_rows[wall] = (outward * np.conj(normal)).real * system.rows.stretch[wall][:, None]
    if places.reference is None:
        conditions[-1] = 1.0
    else:
        conditions[-1] = -_source_potential(complex(*places.reference) - complex(*places.origin) - at, places)
    dx = state.response(at_rows * state.weight[:, None], conditions)
    fields = []
    for k in range(x.size):
        coef, jump = panel_strengths(system.mesh, dx[:, k])
        fields.append(
            superpose(
                UNIT,
                origin=places.origin,
                scale=places.scale,
                constant=float(dx[-1, k]),
                panels=system.panels,
                coef=coef,
                jump=jump,
            )
        )
    return fields


def _source_potential(away: np.ndarray, places: Places) -> Floats:
    """Potential (m3/d) of a unit injection at complex distances (m) from it (Thiem 1906)."""
    return -np.log(np.maximum(abs(away), SOURCE) / places.scale) / (2.0 * np.pi)
