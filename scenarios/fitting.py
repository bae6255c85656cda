"""The fit of a scenario: solve at the priors, weigh uneven ground, fit, solve again at the fitted numbers; in words."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from ..solver.boundary import Solution, solution_of, solve_places
from ..solver.fit import FitResult, fit
from ..solver.ground import make_ground
from ..solver.inputs import Inputs, Parameter, Solved, solve_inputs, with_values
from .building import Model
from .scenario import Scenario

CONFLICT = 2.0  # prior sds between prior and posterior that call for a warning
DOUBT = 0.01  # chance below which the readings' own errors do not explain the residuals
MOST_TURNS = 6
# nobody knows the ground's unevenness better than within these factors
SPREAD_FACTOR, PATCH_FACTOR = 2.0, 3.0
OPEN = 0.5  # share of the prior's spread that a direction keeps when the data say little about it

Progress = Callable[[str], None]


@dataclass(frozen=True)
class Fitted:
    """The fitted site: the solved field, what was fitted (None without levels or parameters), and warnings."""

    solution: Solution
    inputs: Inputs
    result: FitResult | None
    warnings: tuple[str, ...]


def fit_scenario(scenario: Scenario, model: Model, progress: Progress = lambda _: None) -> Fitted:
    """Fit the model of a scenario; without levels the priors stand.

    Raises NotSolvedError or GeometryError (solver) where the site cannot be solved.
    """
    places, inputs = model.places, model.inputs
    progress("solving at the first estimates")
    solution, solved = settle(model, inputs, scenario.tolerance)
    readings = model.readings
    if not model.parameters or readings.values.size == 0:
        return Fitted(solution, solved.inputs, None, ())
    ground = np.zeros((readings.head.size, readings.head.size))
    uneven = scenario.aquifer.uneven
    start = None
    result = None
    below = None
    if uneven is not None and readings.head.size:
        below = make_ground(places, readings.x, readings.y, uneven.patch.value, PATCH_FACTOR)
    for turn in range(2):
        if uneven is not None and below is not None:
            progress(f"weighing uneven ground, turn {turn + 1}")
            ground = uneven.spread.value**2 * below.covariance(places, solved.state, readings.x, readings.y)
        progress(f"fitting {len(model.parameters)} numbers to {readings.values.size} readings, turn {turn + 1}")
        result = fit(
            solved.state.system, inputs, model.parameters, readings, ground, ground_factor=SPREAD_FACTOR, start=start
        )
        start, solved = result.theta, result.solved
    assert result is not None
    solution, solved = settle(model, with_values(inputs, model.parameters, result.theta), scenario.tolerance, solution)
    return Fitted(solution, solved.inputs, result, tuple(warnings_of(scenario, model, result)))


def settle(model: Model, inputs: Inputs, tolerance: float, like: Solution | None = None) -> tuple[Solution, Solved]:
    """Solve inputs to the tolerance, on the mesh of ``like`` where it serves.

    The strength of a regional gradient depends on the field, the mesh on both: refine until they agree.
    """
    solution = like
    if solution is None:
        solution = solve_places(model.places, inputs.setting, tolerance=tolerance)
        if inputs.regional is None:
            return solution, Solved(inputs, solution.state, None, np.zeros(2))
    for _ in range(MOST_TURNS):
        solved = solve_inputs(solution.state.system, inputs)
        solution = solution_of(model.places, solved.state, tolerance)
        if solution.boundary.met:
            break
        unknowns = solution.boundary.unknowns
        mesh = solution.state.system.mesh
        solution = solve_places(model.places, solved.state.setting, tolerance=tolerance, mesh=mesh)
        if solution.boundary.unknowns == unknowns:  # no mesh does better
            solution = solution_of(model.places, solved.state, tolerance)
            break
    return solution, solved


def natural(parameter: Parameter, model: Model, theta: float) -> float:
    """Value of a parameter as the scenario states it (a lake's stage, not its shift)."""
    value = float(np.exp(theta)) if parameter.log else theta
    if parameter.target == "shift" and parameter.name.startswith("lakes."):
        return float(model.places.lines[parameter.index].stage) + value  # type: ignore[union-attr]
    return value


def warnings_of(scenario: Scenario, model: Model, result: FitResult) -> list[str]:
    """What a reader must know of the fit, in words."""
    out = []
    if result.own_dof > 0 and result.own_probability < DOUBT:
        out.append(
            f"The readings' own errors do not explain the residuals: weighted misfit {result.own_misfit:.0f} on "
            f"{result.own_dof:.0f} degrees of freedom, chance {result.own_probability:.1g}. Uneven ground, something "
            "unmapped, or a wrong reading is at work."
        )
    for k, p in enumerate(result.parameters):
        if np.isfinite(p.sd) and abs(result.theta[k] - p.mean) > CONFLICT * p.sd:
            away = abs(result.theta[k] - p.mean) / p.sd
            out.append(f"{p.name}: fitted {away:.1f} prior sds from its estimate; prior and data are in conflict.")
    out += ratio_words(result)
    worst = np.flatnonzero(abs(result.standardized) > 3.0)
    names = [*model.readings.names, *model.readings.gauging_names]
    if worst.size:
        listed = ", ".join(f"{names[i]} ({result.standardized[i]:+.1f})" for i in worst)
        out.append(f"Readings more than 3 sds off: {listed}.")
    if result.scale > 1.5 or result.scale < 0.67:
        out.append(f"All spreads were scaled by {result.scale:.2f}, as the residuals ask.")
    return out


def ratio_words(result: FitResult) -> list[str]:
    """The direction that the data leave open, when it is a common factor on several rates and the conductivity.

    In units of the priors' spreads the posterior covariance has eigenvalues from 0 (fixed by the data) to 1 (only
    the prior speaks); an open direction that moves several logarithms together is a ratio that the data fix.
    """
    scales = {"conductivity", "well", "recharge", "gradient", "discharge", "bed", "inflow"}
    chosen = [k for k, p in enumerate(result.parameters) if p.log and p.target in scales and np.isfinite(p.sd)]
    if len(chosen) < 2:
        return []
    sd = np.array([result.parameters[k].sd for k in chosen])
    block = result.covariance[np.ix_(chosen, chosen)] / np.outer(sd, sd)
    values, vectors = np.linalg.eigh(block)
    logs = vectors[:, -1] * sd  # change of each logarithm along the open direction
    part = abs(logs) > 0.3 * abs(logs).max()
    moves = logs[part] / logs[np.argmax(abs(logs))]
    fluxes = [result.parameters[c].target for c, p in zip(chosen, part, strict=True) if p]
    if values[-1] < OPEN or part.sum() < 2 or np.any(moves < 0) or "conductivity" not in fluxes:
        return []
    names = ", ".join(result.parameters[c].name for c, p in zip(chosen, part, strict=True) if p)
    return [
        f"These data fix only ratios of {names}: a common factor on all of them is known no better than from their "
        f"estimates (it keeps {100 * np.sqrt(values[-1]):.0f}% of its spread). A measured flow would fix it."
    ]
