"""What do the boundary solve and the fit cost: assembly, factor, one more right-hand side, refinement, fit?

    python tests/benchmarks/bench_solve.py            # under a minute
    python tests/benchmarks/bench_solve.py --large    # with 5,000 unknowns too: some minutes and 2 GB

Sites: meandering streams between a lake and a reference head, wells, recharge. The factor is set against LAPACK's own
solver of the same problem (least squares with exact side conditions, dgglse) and against one matrix product A'A, the
floor of any factor by normal equations; boundary values of both solutions are compared. CPU time on one thread.
"""

import argparse
import sys
import time
from pathlib import Path

import numpy as np
import scipy.linalg
from rows import best_of, conditions, one_thread, row
from wellshed import Aquifer, LakeEdge, PumpingWell, RechargeArea, Stream, solve
from wellshed.scenarios.building import build
from wellshed.scenarios.fitting import fit_scenario, settle
from wellshed.scenarios.reading import load
from wellshed.solver.fit import make_model
from wellshed.solver.inputs import with_values
from wellshed.solver.least_squares import factorise
from wellshed.solver.network import make_edges
from wellshed.solver.panels import first_mesh, row_coordinates
from wellshed.solver.setting import sort_elements
from wellshed.solver.state import side_conditions, solve_state
from wellshed.solver.system import assemble

SIDE = 5000.0  # m
AGREE = 1e-8  # of the largest boundary value
EXAMPLE = Path(__file__).resolve().parent.parent.parent / "scenarios" / "examples" / "brindle_mere" / "scenario.yaml"


def site(edges_a_stream, streams=3):
    """Aquifer, elements and reference head: streams of so many edges across the site, a lake, wells and recharge."""
    rng = np.random.default_rng(3)
    elements = []
    for k in range(streams):
        s = np.linspace(0.02, 0.98, edges_a_stream + 1)
        phases, bends = rng.uniform(0, 2 * np.pi, 3), rng.uniform(2, 7, 3)
        bend = sum(90.0 / (i + 1) * np.sin(2 * np.pi * bends[i] * s + phases[i]) for i in range(3))
        y = (0.15 + 0.7 * (k + 0.5) / streams) * SIDE + bend
        elements.append(Stream(f"stream {k}", s * SIDE, y, 30.0 - 8.0 * s))
    angle = np.linspace(0, 2 * np.pi, 25)[:-1]
    lake = 0.03 * SIDE * np.exp(1j * angle) * (1.0 + 0.2 * np.cos(3 * angle)) + 0.5 * SIDE + 0.06j * SIDE
    elements.append(LakeEdge("lake", lake.real, lake.imag, 27.0))
    elements.append(PumpingWell("east", 0.7 * SIDE, 0.385 * SIDE, 900.0, 0.3))
    elements.append(PumpingWell("west", 0.3 * SIDE, 0.62 * SIDE, 500.0, 0.3))
    box = np.array([0.0, 1.0, 1.0, 0.0]), np.array([0.0, 0.0, 1.0, 1.0])
    elements.append(RechargeArea("fields", SIDE * box[0], SIDE * box[1], 6e-4))
    return Aquifer(20.0, 0.0), elements, ((0.5 * SIDE, -0.3 * SIDE), 24.0)


def reference_solution(a, conditions, right_rows, right):
    """LAPACK's least squares with equality constraints, columns scaled to unit norm as the package does."""
    scale = 1.0 / np.maximum(np.linalg.norm(a, axis=0), 1e-300)
    _, _, _, x, info = scipy.linalg.lapack.dgglse(a * scale, conditions * scale, right_rows, right)
    if info != 0:
        sys.exit(f"dgglse failed: {info}")
    return x * scale


def parts(edges_a_stream, repeats):
    """The row of one size: every part of the solve on the first mesh."""
    aquifer, elements, reference = site(edges_a_stream)
    places, setting = sort_elements(aquifer, elements, reference)
    mesh = first_mesh(make_edges(places.lines, places.origin))
    warm_up = time.perf_counter()
    system = assemble(places, mesh, row_coordinates())
    warm_up = time.perf_counter() - warm_up
    assembly, spread, system = best_of(lambda: assemble(places, mesh, row_coordinates()), repeats, time.thread_time)
    state = solve_state(system, setting)
    side, right = side_conditions(system, setting)
    a = system.basis * state.weight[:, None]
    factor_time, _, factor = best_of(lambda: factorise(a, side), repeats, time.thread_time)
    rng = np.random.default_rng(5)
    right_rows, right = rng.normal(size=a.shape[0]), rng.normal(size=right.size)
    solve_time, _, x = best_of(lambda: factor.solve(right_rows, right), max(repeats, 5), time.thread_time)
    product, _, _ = best_of(lambda: a.T @ a, repeats, time.thread_time)
    lapack, _, expected = best_of(
        lambda: reference_solution(a, side, right_rows, right), min(repeats, 2), time.thread_time
    )
    apart = float(abs(a @ (x - expected)).max() / abs(a @ expected).max())
    broken = float(abs(side @ x - right).max())
    if apart > AGREE or broken > 1e-8:
        sys.exit(f"the solution is not LAPACK's: {apart:.1e}, side conditions {broken:.1e}")
    row(
        "solve",
        row="parts",
        unknowns=a.shape[1],
        rows=a.shape[0],
        panels=mesh.edge.size,
        assembly_seconds=round(assembly, 4),
        ns_an_entry=round(1e9 * assembly / a.size, 1),
        factor_seconds=round(factor_time, 4),
        solve_seconds=round(solve_time, 5),
        factor_to_product=round(factor_time / product, 2),
        lapack_to_factor=round(lapack / (factor_time + solve_time), 2),
        assembly_to_factor=round(assembly / factor_time, 2),
        difference=apart,
        spread=round(spread, 2),
        repeats=repeats,
        warm_up_seconds=round(warm_up, 2),
    )


def whole(edges_a_stream, repeats):
    """The row of a whole solve to 1 mm, refinement and checks in it."""
    aquifer, elements, reference = site(edges_a_stream)
    seconds, spread, solution = best_of(
        lambda: solve(aquifer, elements, reference=reference), repeats, time.thread_time
    )
    if not solution.boundary.met:
        sys.exit(f"the boundary conditions are missed by {solution.boundary.max_misfit} m")
    state = solution.state
    places, mesh = solution.places, state.system.mesh
    once, _, _ = best_of(
        lambda: solve_state(assemble(places, mesh, row_coordinates()), state.setting), repeats, time.thread_time
    )
    row(
        "solve",
        row="whole",
        unknowns=solution.boundary.unknowns,
        rounds=solution.boundary.rounds,
        max_misfit=solution.boundary.max_misfit,
        seconds=round(seconds, 3),
        to_last_round=round(seconds / once, 2),
        spread=round(spread, 2),
        repeats=repeats,
    )


def check_minimum(model, result):
    """Ends the run if a move of any fitted number by a fifth of its sd lowers the misfit."""
    numbers = make_model(result.solved.state.system, result.solved.inputs, model.parameters, model.readings)

    def misfit(theta):
        _, computed = numbers.at(theta, result.solved)
        r = model.readings.values - computed
        prior = sum(((t - p.mean) / p.sd) ** 2 for t, p in zip(theta, model.parameters, strict=True))
        return float(r @ np.linalg.solve(result.sigma, r)) + prior

    least = misfit(result.theta)
    for k, sd in enumerate(np.sqrt(np.diag(result.covariance))):
        for move in (-0.2 * sd, 0.2 * sd):
            theta = result.theta.copy()
            theta[k] += move
            if misfit(theta) <= least:
                sys.exit(f"the fit is no minimum in {model.parameters[k].name}")


def fits(repeats):
    """The row of the fit of the main example, in units of one solve of it."""
    scenario = load(EXAMPLE)
    model = build(scenario)
    seconds, spread, fitted = best_of(lambda: fit_scenario(scenario, model), repeats, time.thread_time)
    result = fitted.result
    inputs = with_values(model.inputs, model.parameters, result.theta)
    cold, _, _ = best_of(lambda: settle(model, inputs, scenario.tolerance), repeats, time.thread_time)
    mesh = fitted.solution.state.system.mesh

    def one_round():
        return solve_state(assemble(model.places, mesh, row_coordinates()), fitted.inputs.setting)

    once, _, _ = best_of(one_round, repeats, time.thread_time)
    if not fitted.solution.boundary.met:
        sys.exit("the fitted example misses its boundary conditions")
    check_minimum(model, result)
    row(
        "solve",
        row="fit",
        example=EXAMPLE.parent.name,
        parameters=len(result.parameters),
        readings=result.residuals.size,
        unknowns=fitted.solution.boundary.unknowns,
        steps=result.steps,
        seconds=round(seconds, 3),
        to_solve_with_refinement=round(seconds / cold, 2),
        to_one_round=round(seconds / once, 2),
        spread=round(spread, 2),
        repeats=repeats,
    )


def main():
    """Print the rows."""
    parser = argparse.ArgumentParser(description="boundary solve and fit")
    parser.add_argument("--large", action="store_true", help="5,000 unknowns too")
    parser.add_argument("--repeats", type=int, default=5)
    options = parser.parse_args()
    one_thread()
    conditions("solve", threads_used=1)
    for edges in (3, 30, 85) if options.large else (3, 30):
        parts(edges, options.repeats if edges < 85 else 1)
    whole(10, options.repeats)
    fits(min(options.repeats, 3))


if __name__ == "__main__":
    main()
