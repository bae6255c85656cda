"""Answer a scenario: fit, solve its cases, answer its questions, check what must hold."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np

from ..elements.flow_field import FlowField
from ..solver.balance import BEYOND
from ..solver.boundary import Solution
from ..solver.fit import FitResult
from ..solver.prediction import leave_one_out
from .building import Model, build
from .case_map import case_map
from .cases import CaseAnswer, fitted_scenario, solve_case
from .context import BASE, Check, Context, Result
from .fitting import Fitted, fit_scenario
from .map_content import MapContent
from .messages import InputError, Problem
from .questions import question_module
from .routing import least_flow
from .scenario import Scenario
from .summary import parameter_rows, residual_rows

CLOSED = 1e-6  # of the water that moves: a balance must close to this
LEAST = 1e-6  # m3/d: less does not move at all
ROUND_CLOSED = 1e-4  # the same by quadrature of the flow round the whole site


@dataclass(frozen=True)
class Answers:
    """Everything that a run found, ``maps`` by case.

    ``flow`` is the fitted field; ``to_json`` gives the content of answers.json.
    """

    scenario: Scenario
    model: Model
    fitted: Fitted
    cases: dict[str, CaseAnswer]
    results: tuple[Result, ...]
    maps: dict[str, MapContent]
    checks: tuple[Check, ...]
    notes: tuple[str, ...]

    @property
    def flow(self) -> FlowField:
        """The fitted flow field (base case)."""
        return self.cases[BASE].solution.flow

    def to_json(self) -> dict[str, Any]:
        """Content of answers.json; lengths m, times d, rates m3/d."""
        from .. import __version__

        solution, result = self.fitted.solution, self.fitted.result
        report = solution.boundary
        rows = residual_rows(self.scenario, self.model, self.fitted)
        used = [r["residual"] for r in rows if not r["left_out"] and r["residual"] is not None and r["kind"] == "level"]
        return {
            "wellshed": __version__,
            "scenario": {"file": self.scenario.file.name, "sha256": self.scenario.sha256, "title": self.scenario.title},
            "seed": self.scenario.seed,
            "site": {"crs": self.scenario.site.crs, "heights": self.scenario.site.heights},
            "fit": {
                "parameters": parameter_rows(self.scenario, self.model, self.fitted),
                "residuals": rows,
                "rmse": float(np.sqrt(np.mean(np.square(used)))) if used else None,
                "scale": None if result is None else result.scale,
                "ground_spread_factor": None if result is None else result.ground_spread,
                "degrees_of_freedom": None if result is None or not np.isfinite(result.dof) else result.dof,
                "own_errors": None if result is None else {
                    "misfit": result.own_misfit, "degrees_of_freedom": result.own_dof,
                    "probability": result.own_probability,
                },
                "leave_one_out": None if result is None else _foretold(result, len(self.model.readings.head)),
                "warnings": list(self.fitted.warnings),
            },
            "boundary": {
                "max_misfit": report.max_misfit, "at": list(report.at), "feature": report.feature,
                "tolerance": report.tolerance, "met": report.met, "unknowns": report.unknowns,
            },
            "balance": balance_list(solution),
            "balance_closure": closure(solution),
            "cases": [
                {
                    "name": c.name, "balance": balance_list(c.solution), "max_misfit": c.solution.boundary.max_misfit,
                    "drawdown": c.drawdown, "exchange_change": c.exchange_change,
                }
                for c in self.cases.values()
            ],
            "answers": [r.entry for r in self.results],
            "checks": [{"name": c.name, "passed": c.passed, "value": c.value, "bound": c.bound} for c in self.checks],
            "notes": list(self.notes),
        }  # fmt: skip


def _foretold(result: FitResult, n_levels: int) -> dict[str, float] | None:
    """Root mean square error (m) of foretelling each level from all others, with and without the error model."""
    if n_levels < 2:
        return None
    found = leave_one_out(result)
    rms = [float(np.sqrt(np.mean(np.square(e[:n_levels])))) for e in (found.field, found.predicted)]
    return {"field_rmse": rms[0], "predicted_rmse": rms[1]}


def answer(
    scenario: Scenario,
    *,
    progress: Callable[[str], None] | None = None,
    map_done: Callable[[str, MapContent], None] | None = None,
) -> Answers:
    """Answer every question of a scenario.

    progress: told what is being done; map_done: given the map of each case, by its name, as soon as it is complete.
    Raises InputError for geometry that cannot stand and NotSolvedError where the numbers do not fix a field.
    """
    say = progress or (lambda _: None)
    try:
        model = build(scenario)
    except ValueError as error:
        raise InputError([Problem("geometry", str(error), scenario.file)]) from None
    fitted = fit_scenario(scenario, model, say)
    cases = {BASE: CaseAnswer(BASE, scenario, model, fitted.solution, {}, {})}
    for case in scenario.cases:
        say(f"solving case {case.name}")
        cases[case.name] = solve_case(scenario, model, fitted, case)
    context = Context(scenario, fitted, cases, say)
    answered: list[list[Result]] = [[] for _ in scenario.questions]
    checks: list[Check] = []
    of_base: list[Check] = []
    maps: dict[str, MapContent] = {}
    for solved in cases.values():
        own = [*_field_checks(solved), *_stream_checks(scenario, model, fitted, solved)]
        asked: list[Result] = []
        for k, question in enumerate(scenario.questions):
            if solved.name == BASE or solved.name in question.options.cases:
                found = question_module(question.kind).answer(question.options, solved, context)
                answered[k] += found
                asked += found
        own += [check for result in asked for check in result.checks]
        checks += own
        of_base = own if solved.name == BASE else of_base
        if solved.name == BASE or asked:
            rests_on = own if solved.name == BASE else [*of_base, *own]  # a case starts from the fitted field
            maps[solved.name] = case_map(solved, scenario, model, fitted, asked, rests_on)
            if map_done is not None:
                map_done(solved.name, maps[solved.name])
    results = tuple(result for found in answered for result in found)
    notes = (*scenario.notes, *model.notes, *fitted.solution.boundary.notes)
    return Answers(scenario, model, fitted, cases, results, maps, tuple(checks), notes)


def balance_list(solution: Solution) -> list[dict[str, Any]]:
    """Balance rows as answers.json prints them (m3/d)."""
    return [{"feature": r.feature, "kind": r.kind, "inflow": r.inflow, "outflow": r.outflow} for r in solution.balance]


def closure(solution: Solution) -> float:
    """What the balance leaves open, as a share of the water that moves."""
    into = sum(r.inflow for r in solution.balance)
    out = sum(r.outflow for r in solution.balance)
    return abs(into - out) / max(into, out, LEAST)


def _field_checks(case: CaseAnswer) -> list[Check]:
    solution = case.solution
    report = solution.boundary
    opened, round_open = closure(solution), round_closure(solution)
    return [
        Check(f"boundary conditions met in {case.name} (m)", report.met, report.max_misfit, report.tolerance),
        Check(f"balance of {case.name} closes (share)", opened <= CLOSED, opened, CLOSED),
        Check(f"flow round the site agrees with the balance of {case.name} (share)", round_open <= ROUND_CLOSED,
              round_open, ROUND_CLOSED),
    ]  # fmt: skip


def _stream_checks(base: Scenario, model: Model, fitted: Fitted, case: CaseAnswer) -> list[Check]:
    """No stream whose source is stated gives the ground more water than it carries."""
    scenario = fitted_scenario(base, model, fitted) if case.name == BASE else case.scenario
    out = []
    for stream in scenario.streams:
        found = least_flow(scenario, case.solution, stream.name)
        if found is not None:
            flow, share = found
            where = f"{stream.name} carries water all along in {case.name} (m3/d at {share:.2f} of its length)"
            out.append(Check(where, flow >= 0.0, flow, 0.0))
    return out


def round_closure(solution: Solution) -> float:
    """The water from afar by quadrature of the discharge round a circle about everything, against its balance row.

    Independent of the strengths' sums: a share of the water that moves.
    """
    places = solution.places
    radius = 1.5 * places.scale
    angles = 2.0 * np.pi * np.arange(720) / 720
    qx, qy = solution.flow.discharge(
        places.origin[0] + radius * np.cos(angles), places.origin[1] + radius * np.sin(angles)
    )
    round_trip = 2.0 * np.pi * radius
    into = -float(np.mean(qx * np.cos(angles) + qy * np.sin(angles))) * round_trip
    row = next(r for r in solution.balance if r.feature == BEYOND)
    passing = float(np.mean(np.hypot(qx, qy))) * round_trip  # regional flow crosses the site without being in a row
    moved = max(sum(r.inflow for r in solution.balance), sum(r.outflow for r in solution.balance), passing, LEAST)
    return abs(into - (row.inflow - row.outflow)) / moved


def report_lines(answers: Answers) -> list[str]:
    """What a run prints: the fit, the answers in a sentence each, warnings, checks that failed."""
    lines = [answers.scenario.title]
    solution, result = answers.fitted.solution, answers.fitted.result
    report = solution.boundary
    lines.append(
        f"boundary conditions met to {1000 * report.max_misfit:.2g} mm (worst at {report.feature or 'none'}), "
        f"{report.unknowns} unknowns; balance closes to {closure(solution):.1g}"
    )
    if result is not None:
        own = f", readings' own errors alone: chance {result.own_probability:.2g}" if result.own_dof > 0 else ""
        lines.append(f"fit: {len(result.parameters)} numbers, scale {result.scale:.2f}{own}")
        for row in parameter_rows(answers.scenario, answers.model, answers.fitted):
            if row["informed"] is not None:
                spread = f"{row['value']:.4g} ± {row['sd']:.2g} {row['unit']}"
                lines.append(f"  {row['name']}: {spread}, informed {row['informed']:.0%}")
    lines += [r.words for r in answers.results]
    lines += [f"warning: {w}" for w in answers.fitted.warnings]
    lines += [f"note: {n}" for n in answers.notes]
    lines += [f"FAILED: {c.name}: {c.value:.3g}, bound {c.bound:.3g}" for c in answers.checks if not c.passed]
    return lines
