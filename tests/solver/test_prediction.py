"""Leave-one-out by linear algebra against fits that really leave one out."""

from dataclasses import replace

import numpy as np
import pytest
from wellshed.elements.aquifer import Aquifer
from wellshed.elements.lake import LakeEdge
from wellshed.elements.recharge import RechargeArea
from wellshed.elements.well import PumpingWell
from wellshed.solver.boundary import solve_places
from wellshed.solver.fit import Readings, fit
from wellshed.solver.ground import make_ground
from wellshed.solver.inputs import Inputs, Parameter
from wellshed.solver.prediction import leave_one_out
from wellshed.solver.setting import sort_elements
from wellshed.solver.state import flow_of


def without(readings: Readings, i: int) -> Readings:
    kept = np.arange(readings.head.size) != i
    names = tuple(n for n, k in zip(readings.names, kept, strict=True) if k)
    parts = {key: getattr(readings, key)[kept] for key in ("x", "y", "head", "sd")}
    return replace(readings, names=names, datum=(None,) * int(kept.sum()), **parts)


def conditional(result, sigma, i):
    """Mean of the error at reading i given the others' residuals under the covariance sigma."""
    kept = np.arange(sigma.shape[0]) != i
    return sigma[i, kept] @ np.linalg.solve(sigma[np.ix_(kept, kept)], result.residuals)


@pytest.fixture(scope="module")
def site():
    """A confined island (heads linear in recharge and stage): places, inputs, parameters, readings, ground."""
    angle = np.linspace(0, 2 * np.pi, 24, endpoint=False)
    shore = LakeEdge("shore", 600 * np.cos(angle), 400 * np.sin(angle), 20.0, land_inside=True)
    rain = RechargeArea("rain", [-700, 700, 700, -700], [-500, -500, 500, 500], 8e-4)
    elements = [shore, rain, PumpingWell("w", 120.0, -60.0, 150.0, 0.2)]
    places, setting = sort_elements(Aquifer(12.0, -10.0, 10.0), elements, None)
    solution = solve_places(places, setting, tolerance=1e-3)
    rng = np.random.default_rng(11)
    r, a = np.sqrt(rng.uniform(0.05, 0.8, 14)), rng.uniform(0, 2 * np.pi, 14)
    x, y = 600 * r * np.cos(a), 400 * r * np.sin(a)
    ground = 0.5**2 * make_ground(places, x, y, 120.0).covariance(places, solution.state, x, y)
    noise = np.linalg.cholesky(ground + 0.05**2 * np.eye(14)) @ rng.normal(size=14)
    head = solution.flow.head(x, y) + noise
    names = tuple(f"P{k}" for k in range(14))
    readings = Readings(names, x, y, head, np.full(14, 0.05), (None,) * 14)
    parameters = (
        Parameter("rain", "recharge", 0, False, 7e-4, 2e-4, "m/d"),
        Parameter("shore", "shift", 0, False, 0.0, np.inf, "m"),
    )
    return solution.state.system, Inputs(setting), parameters, readings, ground


@pytest.mark.parametrize("smooth", [True, False])
def test_leave_one_out_is_what_fits_without_a_reading_foretell(site, smooth):
    system, inputs, parameters, readings, ground = site
    ground = 0.0 * ground if smooth else ground
    whole = fit(system, inputs, parameters, readings, ground)
    found = leave_one_out(whole)
    for i in (0, 5, 13):
        kept = np.arange(readings.head.size) != i
        part = fit(system, inputs, parameters, without(readings, i), ground[np.ix_(kept, kept)])
        # the scale of the errors is estimated, and weighs the priors against the readings: hold it
        weak = tuple(replace(p, sd=p.sd * part.scale / whole.scale) for p in parameters)
        part = fit(system, inputs, weak, without(readings, i), ground[np.ix_(kept, kept)])
        at = (readings.x[i], readings.y[i])
        state = part.solved.state
        error = readings.head[i] - float(flow_of(system.places, state).head(*at))
        assert error == pytest.approx(found.field[i], rel=2e-3, abs=1e-4)
        sigma = whole.sigma / whole.scale**2
        assert error - conditional(part, sigma, i) == pytest.approx(found.predicted[i], rel=2e-3, abs=1e-4)


def test_stated_spread_of_predictions(site):
    # under the model itself the errors over their stated sd have unit variance: checked on drawn readings
    system, inputs, parameters, readings, ground = site
    whole = fit(system, inputs, parameters, readings, ground)
    found = leave_one_out(whole)
    rng = np.random.default_rng(3)
    sigma, jacobian = whole.sigma, whole.jacobian
    precision = np.diag([0.0 if np.isinf(p.sd) else 1.0 / p.sd**2 for p in parameters])
    draws = []
    for _ in range(400):
        prior = np.array([rng.normal(0, p.sd) if np.isfinite(p.sd) else 0.0 for p in parameters])
        y = jacobian @ prior + np.linalg.cholesky(sigma) @ rng.normal(size=sigma.shape[0])
        weighted = np.linalg.solve(sigma, jacobian)
        theta = np.linalg.solve(jacobian.T @ weighted + precision, weighted.T @ y)
        draws.append(leave_one_out(replace(whole, residuals=y - jacobian @ theta)).predicted / found.sd)
    assert np.std(draws, axis=0) == pytest.approx(1.0, abs=0.15)
