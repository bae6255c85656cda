"""The strengths of one setting on one mesh: linear where heads are prescribed, Newton where a stream has a bed."""

from dataclasses import dataclass

import numpy as np

from ..elements.field_arrays import Floats
from ..elements.flow_field import FlowField, superpose
from ..elements.kernels_line import N_COEF
from ..elements.outline import Outline
from ..elements.stream import Stream
from .least_squares import Factor, factorise
from .network import BED, HEAD, WALL
from .setting import Places, Setting, elements_at
from .system import (
    System,
    inflow_sheets,
    panel_strengths,
    potential_matrix,
    source_potentials,
    source_strengths,
)

MOST_STEPS = 40
SETTLED = 1e-7  # m of head: a Newton step smaller than this ends the iteration (the next would be its square)


class NotSolvedError(ArithmeticError):
    """The boundary conditions could not be met; the message says which and why."""


@dataclass(frozen=True)
class State:
    """Unknowns x (n + 1,) of a setting, with the tangent of all rows there (metres of head)."""

    system: System
    setting: Setting
    x: Floats
    factor: Factor  # of the tangent rows and the side conditions
    weight: Floats  # (m,) 1/T of each row, as used in the tangent
    steps: int

    def response(self, row_change: Floats, condition_change: Floats) -> Floats:
        """Change of x for a change of the row residuals (m,) [m of head] and of the side conditions' right sides."""
        return self.factor.solve(-row_change, condition_change)


def solve_state(system: System, setting: Setting, like: State | None = None) -> State:
    """Strengths that meet every row best and every side condition exactly.

    like: a state of the same system near by. Its factor serves again where no bed makes the rows change (the
    weights of rows need not follow a small change of the transmissivity); else Newton starts from it.

    Raises NotSolvedError when the iteration of leaky beds does not settle, or the conditions do not fix the field.
    """
    conditions, right = side_conditions(system, setting)
    given = system.sources @ source_strengths(setting)
    stage = row_stages(system, setting)
    condition = system.mesh.condition[system.rows.panel]
    weight = row_weights(system, setting, stage, condition)
    bed = condition == BED
    if like is not None and not bed.any():
        weight = like.weight
    aquifer = setting.aquifer
    matrix = system.basis * weight[:, None]
    target = np.where(condition == HEAD, aquifer.potential(stage), 0.0)
    target = np.where(condition == WALL, -0.5 * _inflow(system, setting) * system.rows.stretch, target)
    right_rows = (target - given) * weight
    if not bed.any():
        factor = _factorise(matrix, conditions) if like is None else like.factor
        return State(system, setting, factor.solve(right_rows, right), factor, weight, 1)
    slow = system.density[bed] / setting.conductances[_line(system)[bed]][:, None]
    bottom = _bottoms(system, setting, stage)[bed]
    phi = aquifer.potential(stage)[bed]
    x = np.zeros(matrix.shape[1])
    if like is not None:
        x = like.x
        phi = system.basis[bed] @ x + given[bed]
    for step in range(1, MOST_STEPS + 1):
        head = aquifer.head(phi)
        thick = np.maximum(aquifer.saturated_thickness(phi), 1e-3 * _typical(setting, stage))
        slope = np.where(head > bottom, 1.0 / (aquifer.conductivity * thick), 0.0)
        matrix[bed] = slope[:, None] * system.basis[bed] - slow
        right_rows[bed] = stage[bed] - np.maximum(head, bottom) + slope * (phi - given[bed])
        factor = _factorise(matrix, conditions)
        previous, x = x, factor.solve(right_rows, right)
        phi = system.basis[bed] @ x + given[bed]
        moved = float(abs(weight * (system.basis @ (x - previous))).max())
        if (step > 1 or like is not None) and moved < SETTLED:
            break
    else:
        raise NotSolvedError(f"the leaky stream beds did not settle in {MOST_STEPS} steps (last change {moved:.2g} m)")
    weight[bed] = slope
    return State(system, setting, x, factor, weight, step)


def _factorise(matrix: Floats, conditions: Floats) -> Factor:
    try:
        return factorise(matrix, conditions)
    except np.linalg.LinAlgError:
        raise NotSolvedError("the boundary conditions do not fix the flow field (is any head given?)") from None


def row_stages(system: System, setting: Setting) -> Floats:
    """Stage (m) at every row, shifts included."""
    return system.rows.stage + system.rows.shift_share @ setting.shifts


def row_weights(system: System, setting: Setting, stage: Floats, condition: np.ndarray) -> Floats:
    """Metres of head per m3/d of potential at every row: 1/(K x saturated thickness)."""
    aquifer = setting.aquifer
    thick = np.where(condition == WALL, _typical(setting, stage), aquifer.saturated_thickness(aquifer.potential(stage)))
    if np.any(thick <= 0.0):
        k = int(np.argmin(thick))
        name = system.places.lines[int(_line(system)[k])].name
        raise NotSolvedError(
            f"the stage of {name!r} ({stage[k]:.2f} m) is not above the aquifer base ({aquifer.base:.2f} m)"
        )
    return 1.0 / (aquifer.conductivity * thick)


def _typical(setting: Setting, stage: Floats) -> float:
    """A typical saturated thickness (m), for rows that have no head of their own."""
    heads = stage[np.isfinite(stage)]
    if heads.size == 0:
        heads = np.array([setting.reference_head])
    thick = setting.aquifer.saturated_thickness(setting.aquifer.potential(heads))
    return float(np.nanmean(thick)) if np.isfinite(thick).any() else 1.0


def _line(system: System) -> np.ndarray:
    return system.mesh.edges.line[system.mesh.edge[system.rows.panel]]


def _inflow(system: System, setting: Setting) -> Floats:
    return setting.inflows[_line(system)]


def _bottoms(system: System, setting: Setting, stage: Floats) -> Floats:
    """Underside of the clogged layer (m) at every row; -inf where none is given: leakage stops growing below it."""
    return stage - bed_depths(system.places)[_line(system)]


def bed_depths(places: Places) -> Floats:
    """Depth (m) of the underside of each line's clogged layer below its stage, (l,); inf where none is given."""
    return np.array([s.bottom if isinstance(s, Stream) and s.bottom is not None else np.inf for s in places.lines])


def side_conditions(system: System, setting: Setting) -> tuple[Floats, Floats]:
    """Rows B and right sides d of the exact conditions: no circulation round outlines, and the far field."""
    places = system.places
    rows = [*system.circulation]
    right = [0.0] * len(rows)
    given = source_strengths(setting)
    if places.reference is None:
        rows.append(system.take)
        right.append(float(source_supply(system) @ given))
    else:
        x, y = (np.array([c - o]) for c, o in zip(places.reference, places.origin, strict=True))
        rows.append(potential_matrix(places, system.mesh, x, y)[0])
        outside = source_potentials(places, system.mesh, x, y)[0] @ given
        right.append(float(setting.aquifer.potential(setting.reference_head)) - outside)
    return np.array(rows), np.array(right)


def source_supply(system: System) -> Floats:
    """Water (m3/d) that each unit source brings in: (s,)."""
    places, edges = system.places, system.mesh.edges
    lengths = np.zeros(len(places.lines))
    np.add.at(lengths, edges.line, abs(edges.z2 - edges.z1))
    walls = np.array([isinstance(line, Outline) for line in places.lines], dtype=bool)
    wells = -np.ones(len(places.wells))
    areas = np.array([a.area() for a in places.areas])
    return np.concatenate([wells, areas, np.zeros(2), np.where(walls, lengths, 0.0)])


def flow_of(places: Places, state: State) -> FlowField:
    """The flow field of a state, in map coordinates."""
    setting = state.setting
    flow, wells, areas = elements_at(places, setting)
    coef, jump = panel_strengths(state.system.mesh, state.x)
    sheets, sheet_coef = inflow_sheets(places, state.system.mesh, setting.inflows)
    panels = type(sheets)(*(np.concatenate(pair) for pair in zip(state.system.panels, sheets, strict=True)))
    return superpose(
        setting.aquifer,
        origin=places.origin,
        scale=places.scale,
        constant=float(state.x[-1]),
        flow=flow,
        wells=wells,
        areas=areas,
        panels=panels,
        coef=np.concatenate([coef, sheet_coef.reshape(-1, N_COEF)]),
        jump=np.concatenate([jump, np.zeros(len(sheet_coef))]),
    )
