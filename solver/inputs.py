"""The numbers of a site before they meet the solver, and the parameters that the fit may vary among them."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any, Literal

import numpy as np

from ..elements.field_arrays import Floats
from .sensitivity import Probe, make_probe, potential_change, potentials, unknown_changes
from .setting import Setting
from .state import NotSolvedError, State, solve_state
from .system import System

Target = Literal[
    "conductivity", "base", "top", "well", "recharge", "gradient", "discharge", "towards", "shift", "bed", "inflow",
    "reference", "starts_with", "porosity",
]  # fmt: skip


@dataclass(frozen=True)
class Regional:
    """Uniform flow as people state it: a gradient (-) or a discharge (m2/d) towards an azimuth (deg) at x, y (m)."""

    gradient: float | None
    discharge: float | None
    towards: float
    x: float
    y: float


@dataclass(frozen=True)
class Inputs:
    """Setting (its flow is overwritten where ``regional`` is given) and regional flow."""

    setting: Setting
    regional: Regional | None = None


@dataclass(frozen=True)
class Parameter:
    """A number to be fitted.

    target and index: which number. log: fitted as its logarithm. mean, sd: normal prior of the (log) value; sd inf
    means no prior. unit: model unit, for reports. scale: the input equals scale times the parameter (a well's sign,
    the width over the resistance of a bed is handled by "bed").
    """

    name: str
    target: Target
    index: int
    log: bool
    mean: float
    sd: float
    unit: str
    scale: float = 1.0


def with_values(inputs: Inputs, parameters: Sequence[Parameter], theta: Floats) -> Inputs:
    """Inputs with the parameters at theta (p,) (logarithms where the parameter is logarithmic)."""
    for parameter, t in zip(parameters, theta, strict=True):
        value = parameter.scale * (float(np.exp(t)) if parameter.log else float(t))
        inputs = _set(inputs, parameter, value)
    return inputs


def _set(inputs: Inputs, parameter: Parameter, value: float) -> Inputs:
    setting, regional, k = inputs.setting, inputs.regional, parameter.index
    aquifer = setting.aquifer
    match parameter.target:
        case "conductivity":
            setting = replace(setting, aquifer=replace(aquifer, conductivity=value))
        case "base":
            setting = replace(setting, aquifer=replace(aquifer, base=value))
        case "top":
            setting = replace(setting, aquifer=replace(aquifer, top=value))
        case "well":
            setting = replace(setting, well_rates=_put(setting.well_rates, k, value))
        case "recharge":
            setting = replace(setting, recharge_rates=_put(setting.recharge_rates, k, value))
        case "shift":
            setting = replace(setting, shifts=_put(setting.shifts, k, value))
        case "bed":  # the parameter is the resistance, scale the width
            width = parameter.scale
            setting = replace(setting, conductances=_put(setting.conductances, k, width * width / value))
        case "inflow":
            setting = replace(setting, inflows=_put(setting.inflows, k, value))
        case "reference":
            setting = replace(setting, reference_head=value)
        case "gradient" | "discharge" | "towards":
            assert regional is not None
            regional = replace(regional, **{parameter.target: value})
        case "starts_with" | "porosity":
            pass  # no boundary condition knows them
    return Inputs(setting, regional)


def _put(values: Floats, k: int, value: float) -> Floats:
    out = values.copy()
    out[k] = value
    return out


@dataclass(frozen=True)
class Solved:
    """A state that belongs to inputs, with the derivative of the uniform flow's strength coupling taken along."""

    inputs: Inputs
    state: State
    probe: Probe | None  # the place where the gradient is meant
    along: Floats  # (2,) unit vector of the regional flow, zero without one


def solve_inputs(system: System, inputs: Inputs, like: Solved | None = None) -> Solved:
    """State of the inputs; where a gradient is given the thickness at its place is found by iteration.

    Raises NotSolvedError when that does not settle or the conditions do not fix the field.
    """
    regional, setting = inputs.regional, inputs.setting
    factor_of = None if like is None else like.state
    if regional is None:
        return Solved(inputs, solve_state(system, setting, factor_of), None, np.zeros(2))
    angle = np.radians(90.0 - regional.towards)
    along = np.array([np.cos(angle), np.sin(angle)])
    if regional.discharge is not None:
        state = solve_state(system, replace(setting, flow=regional.discharge * along), factor_of)
        return Solved(inputs, state, None, along)
    assert regional.gradient is not None
    aquifer = setting.aquifer
    probe = None if like is None else like.probe
    thick = _first_thickness(system, setting) if like is None else _thickness(like)
    for _ in range(60):
        setting = replace(setting, flow=aquifer.conductivity * regional.gradient * thick * along)
        state = solve_state(system, setting, factor_of)
        if probe is None:
            probe = make_probe(system, np.array([regional.x]), np.array([regional.y]))
        if factor_of is None:
            factor_of = state
        found = float(aquifer.saturated_thickness(potentials(state, probe))[0])
        if abs(found - thick) <= 1e-12 * found:
            return Solved(inputs, state, probe, along)
        thick = found
    raise NotSolvedError("the thickness where the regional gradient is given did not settle (is it dry there?)")


def _first_thickness(system: System, setting: Setting) -> float:
    stages = system.rows.stage[np.isfinite(system.rows.stage)]
    head = float(stages.mean()) if stages.size else setting.reference_head
    return max(float(setting.aquifer.saturated_thickness(setting.aquifer.potential(head))), 1.0)


def _thickness(solved: Solved) -> float:
    assert solved.probe is not None
    phi = potentials(solved.state, solved.probe)
    return max(float(solved.state.setting.aquifer.saturated_thickness(phi)[0]), 1e-3)


def tangent(solved: Solved, parameter: Parameter, t: float) -> Setting:
    """Change of the setting per unit of the (log) parameter at t, the thickness at the gradient's place held."""
    zero = _zero(solved.state.setting)
    value = float(np.exp(t)) if parameter.log else t
    rate = (value if parameter.log else 1.0) * parameter.scale
    k, regional = parameter.index, solved.inputs.regional
    aquifer = zero.aquifer
    flow = solved.state.setting.flow
    strength = float(np.hypot(*flow))
    match parameter.target:
        case "conductivity":
            d_flow = flow * rate / solved.state.setting.aquifer.conductivity if solved.probe is not None else zero.flow
            return replace(zero, aquifer=_change(aquifer, conductivity=rate), flow=d_flow)
        case "base":
            return replace(zero, aquifer=_change(aquifer, base=rate))
        case "top":
            return replace(zero, aquifer=_change(aquifer, top=rate))
        case "well":
            return replace(zero, well_rates=_put(zero.well_rates, k, rate))
        case "recharge":
            return replace(zero, recharge_rates=_put(zero.recharge_rates, k, rate))
        case "shift":
            return replace(zero, shifts=_put(zero.shifts, k, rate))
        case "bed":
            now = solved.state.setting.conductances[k]
            return replace(zero, conductances=_put(zero.conductances, k, -now if parameter.log else -now / value))
        case "inflow":
            return replace(zero, inflows=_put(zero.inflows, k, rate))
        case "reference":
            return replace(zero, reference_head=rate)
        case "gradient" | "discharge":
            assert regional is not None
            now = regional.gradient if parameter.target == "gradient" else regional.discharge
            assert now is not None
            full = strength * solved.along * np.sign(now) if now else solved.along
            return replace(zero, flow=full * rate / abs(now) if now else full * rate)
        case "towards":
            turned = np.array([solved.along[1], -solved.along[0]])  # azimuths run clockwise
            signed = float(flow @ solved.along)
            return replace(zero, flow=signed * turned * rate * np.pi / 180.0)
        case _:
            return zero


@dataclass(frozen=True)
class _AquiferChange:
    """Differences of conductivity, base and top, in the shape of an aquifer."""

    conductivity: float = 0.0
    base: float = 0.0
    top: float | None = None
    porosity: float = 0.0


def _change(aquifer: object, **parts: float) -> Any:
    return _AquiferChange(**parts)


def _zero(setting: Setting) -> Setting:
    return Setting(
        _AquiferChange(),  # type: ignore[arg-type]
        np.zeros_like(setting.well_rates),
        np.zeros_like(setting.recharge_rates),
        np.zeros(2),
        np.zeros_like(setting.shifts),
        np.zeros_like(setting.conductances),
        np.zeros_like(setting.inflows),
        0.0,
    )


def responses(solved: Solved, changes: Sequence[Setting]) -> list[tuple[Setting, Floats]]:
    """Each change of the setting with that of the unknowns, once the thickness at the gradient's place has followed.

    q = K g b(Phi_at): dq = explicit + K g (db/dPhi dPhi_at + explicit db), with dPhi_at linear in dq.
    """
    if not changes:
        return []
    state, probe = solved.state, solved.probe
    if probe is None:
        return list(zip(changes, unknown_changes(state, changes).T, strict=True))
    unit = replace(_zero(state.setting), flow=solved.along)
    *moves, unit_dx = unknown_changes(state, [*changes, unit]).T
    aquifer = state.setting.aquifer
    phi = potentials(state, probe)
    thick = float(aquifer.saturated_thickness(phi)[0])
    strength = float(state.setting.flow @ solved.along) / thick  # K g
    confined = np.isfinite(aquifer.thickness) and thick >= aquifer.thickness
    slope = 0.0 if confined else 1.0 / (aquifer.conductivity * thick)
    per_flow = float(potential_change(state, probe, unit, unit_dx)[0])
    out = []
    for change, dx in zip(changes, moves, strict=True):
        d = change.aquifer
        explicit = ((d.top or 0.0) - d.base) if confined else -0.5 * thick * d.conductivity / aquifer.conductivity
        d_phi = float(potential_change(state, probe, change, dx)[0])
        extra = strength * (slope * d_phi + explicit) / (1.0 - strength * slope * per_flow)
        out.append((replace(change, flow=change.flow + extra * solved.along), dx + extra * unit_dx))
    return out
