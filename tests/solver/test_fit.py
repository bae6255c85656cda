"""The fit: recovers a truth, stands at the minimum, and its diagnostics obey their identities."""

from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest
import scipy.stats
from wellshed.elements.aquifer import Aquifer
from wellshed.elements.lake import LakeEdge
from wellshed.elements.recharge import RechargeArea
from wellshed.elements.stream import Stream
from wellshed.elements.well import PumpingWell
from wellshed.solver import fit as fit_module
from wellshed.solver.boundary import solve_places
from wellshed.solver.fit import PRIOR_READINGS, Readings, fit, make_model
from wellshed.solver.ground import make_ground
from wellshed.solver.inputs import Inputs, Parameter
from wellshed.solver.setting import sort_elements
from wellshed.solver.state import NotSolvedError

COUNT = 16
TRUE = {"K": np.log(9.0), "rain": np.log(8e-4), "brook": 0.12, "well": np.log(140.0)}
KIND = {"K": ("conductivity", 0), "rain": ("recharge", 0), "brook": ("shift", 1), "well": ("well", 0)}
START = {"K": np.log(14.0), "rain": np.log(6e-4), "brook": 0.0, "well": np.log(110.0)}


def site(top=None):
    """An island with a brook, rain and a well: system, inputs, places, state; lines are shore, brook."""
    angle = np.linspace(0, 2 * np.pi, 14, endpoint=False)
    elements = [
        LakeEdge("shore", 620 * np.cos(angle), 430 * np.sin(angle), 20.0, land_inside=True),
        Stream("brook", [-60.0, 20, 0], [180.0, 0, -250], [20.9, 20.6, 20.2]),
        RechargeArea("rain", [-700.0, 700, 700, -700], [-500.0, -500, 500, 500], 6e-4),
        PumpingWell("well", 260.0, 60.0, 110.0, 0.2),
    ]
    places, setting = sort_elements(Aquifer(14.0, 5.0, top), elements, None)
    solution = solve_places(places, setting, tolerance=1e-3)
    return solution.state.system, Inputs(setting), places, solution.state


@pytest.fixture(scope="module")
def free():
    return site()


@pytest.fixture(scope="module")
def confined():
    """Heads are linear in stages, rain and pumping here."""
    return site(top=15.0)


def parameters_of(*names, sd=np.inf, spreads=None):
    spreads = spreads or {}
    return tuple(
        Parameter(n, *KIND[n], n != "brook", START[n], spreads.get(n, sd), "m" if n == "brook" else "") for n in names
    )


def readings_of(head=None, sd=0.04, gauged=True, **more):
    rng = np.random.default_rng(4)
    r, a = np.sqrt(rng.uniform(0.04, 0.75, COUNT)), rng.uniform(0, 2 * np.pi, COUNT)
    x, y = 620 * r * np.cos(a), 430 * r * np.sin(a)
    more = {"datum": (None,) * COUNT} | more
    if gauged:
        gauging = {"names": ("weir",), "line": (1,), "distance": (400.0,), "start": ((),), "given": (0.0,)}
        more |= {f"gauging_{k}": v for k, v in gauging.items()} | {"gauging_flow": (0.0,), "gauging_sd": (5.0,)}
    names = tuple(f"P{i}" for i in range(COUNT))
    return Readings(names, x, y, np.full(COUNT, 20.0) if head is None else head, np.full(COUNT, sd), **more)


def measured(site, readings, noise=None):
    """Readings of the truth, with noise (n,) in units of their sd."""
    system, inputs, *_ = site
    every = parameters_of(*TRUE)
    model = make_model(system, inputs, every, readings)
    values = model.at(np.array([TRUE[p.name] for p in every]), None)[1]
    if noise is not None:
        values = values + noise * np.sqrt(np.diag(readings.reading_covariance()))
    k = readings.head.size
    return replace(readings, head=values[:k], gauging_flow=tuple(values[k:]))


def nothing():
    return np.zeros((COUNT, COUNT))


@pytest.mark.parametrize("top", [None, 15.0, 20.45])
def test_noiseless_readings_give_the_truth_without_any_prior(top):
    here = site(top)
    readings = measured(here, readings_of())
    result = fit(*here[:2], parameters_of(*TRUE), readings, nothing())
    assert result.theta == pytest.approx(list(TRUE.values()), abs=1e-4)
    assert abs(result.residuals[:COUNT]).max() < 1e-5
    assert result.informed == pytest.approx(1.0)


@pytest.mark.parametrize("weak", [True, False])
def test_fit_stands_at_the_minimum_of_the_penalised_misfit(free, weak):
    system, inputs, places, state = free
    readings = measured(free, readings_of(), np.random.default_rng(8).standard_normal(COUNT + 1))
    ground = 0.4**2 * make_ground(places, readings.x, readings.y, 150.0).covariance(
        places, state, readings.x, readings.y
    )
    spreads = {"K": 0.5, "rain": 0.3, "brook": 0.2, "well": 0.2}
    parameters = parameters_of(*TRUE, spreads={n: s * (4.0 if weak else 1.0) for n, s in spreads.items()})
    result = fit(system, inputs, parameters, readings, ground)
    model = make_model(system, inputs, parameters, readings)
    inverse = np.linalg.inv(result.sigma)
    mean, sd = np.array([(p.mean, p.sd) for p in parameters]).T

    def misfit(theta):
        r = readings.values - model.at(theta, None)[1]
        return r @ inverse @ r + np.sum(((theta - mean) / sd) ** 2)

    least = misfit(result.theta)
    spread = np.sqrt(np.diag(result.covariance))
    for k in range(len(parameters)):
        step = np.zeros(len(parameters))
        step[k] = 0.005 * spread[k]  # small: one parameter alone meets a steep and curved wall
        slope = (misfit(result.theta + step) - misfit(result.theta - step)) / 0.01  # per posterior sd
        assert abs(slope) < 0.02
        step[k] = 0.7 * spread[k]
        assert misfit(result.theta + step) > least
        assert misfit(result.theta - step) > least


def test_leverage_sums_to_the_effective_number_of_parameters(free):
    """tr(J C J' S^-1) = p - tr(C P^-1), and with independent priors that is the sum of what each is informed."""
    system, inputs, places, state = free
    readings = measured(free, readings_of(), np.random.default_rng(9).standard_normal(COUNT + 1))
    ground = 0.5**2 * make_ground(places, readings.x, readings.y, 150.0).covariance(
        places, state, readings.x, readings.y
    )
    parameters = parameters_of(*TRUE, spreads={"K": 0.4, "rain": 0.25, "brook": np.inf, "well": 0.15})
    result = fit(system, inputs, parameters, readings, ground)
    assert result.leverage.sum() == pytest.approx(result.informed.sum(), rel=1e-8)
    assert 1.5 < result.informed.sum() < 4.0
    assert np.all((result.informed >= 0) & (result.informed <= 1))
    assert result.informed[2] == 1.0
    assert result.dof == pytest.approx(COUNT + 1 - result.leverage.sum() + PRIOR_READINGS, rel=1e-5)


def test_scale_is_where_misfit_and_degrees_of_freedom_agree(free):
    """scale^2 (n - p_eff + 4) = r' S0^-1 r + 4; errors three times too large bring it near three."""
    noise = 3.0 * np.random.default_rng(2).standard_normal(COUNT + 1)
    readings = measured(free, readings_of(), noise)
    result = fit(*free[:2], parameters_of(*TRUE), readings, nothing())
    own = readings.reading_covariance()
    misfit = result.residuals @ np.linalg.solve(own, result.residuals)
    dof = COUNT + 1 - 4 + PRIOR_READINGS
    assert result.scale**2 * dof == pytest.approx(misfit + PRIOR_READINGS, rel=1e-5)
    assert 1.8 < result.scale < 3.6
    assert result.sigma == pytest.approx(result.scale**2 * own)
    # stated errors alone: the same minimum without a prior, and its chance of being exceeded
    assert result.own_misfit == pytest.approx(misfit, rel=1e-4)
    assert result.own_dof == pytest.approx(COUNT + 1 - 4, rel=1e-8)
    assert result.own_probability == pytest.approx(scipy.stats.chi2.sf(misfit, COUNT - 3), rel=1e-2)
    reach = scipy.stats.t.ppf(0.95, dof) * np.sqrt(result.covariance[2, 2])
    assert result.interval(2) == pytest.approx((result.theta[2] - reach, result.theta[2] + reach), rel=1e-6)


def shore_alone(sd):
    """The level of the whole island as the only unknown: every head answers with 1 where flow is confined."""
    return (Parameter("both", "shift", 0, False, 0.0, sd, "m"),)


def lake_only():
    """A confined island in one shore."""
    angle = np.linspace(0, 2 * np.pi, 10, endpoint=False)
    shore = LakeEdge("shore", 620 * np.cos(angle), 430 * np.sin(angle), 20.0, land_inside=True)
    rain = RechargeArea("rain", [-700.0, 700, 700, -700], [-500.0, -500, 500, 500], 6e-4)
    places, setting = sort_elements(Aquifer(14.0, 5.0, 15.0), [shore, rain], None)
    state = solve_places(places, setting, tolerance=1e-4).state
    return state.system, Inputs(setting), places, state


def test_informed_and_interval_of_a_mean_in_closed_form():
    """One shift, n equal readings and a prior: the normal mean with known precision, times the scale."""
    system, inputs, *_ = lake_only()
    readings = readings_of(gauged=False)
    base = make_model(system, inputs, (), readings).at(np.zeros(0), None)[1]
    noise = 0.04 * np.random.default_rng(5).standard_normal(COUNT)
    readings = replace(readings, head=base + 0.07 + noise)
    result = fit(system, inputs, shore_alone(0.03), readings, nothing())
    precision = COUNT / (result.scale * 0.04) ** 2
    assert result.covariance[0, 0] == pytest.approx(1 / (precision + 1 / 0.03**2), rel=1e-6)
    assert result.theta[0] == pytest.approx((0.07 + noise.mean()) * precision * result.covariance[0, 0], abs=1e-6)
    assert result.informed[0] == pytest.approx(1 - result.covariance[0, 0] / 0.03**2, rel=1e-9)
    leverage = result.covariance[0, 0] / (result.scale * 0.04) ** 2
    assert result.leverage == pytest.approx(leverage, rel=1e-6)
    sd = result.scale * 0.04 * np.sqrt(1 - leverage)
    assert result.standardized == pytest.approx(result.residuals / sd, rel=1e-6)


def test_a_shared_datum_is_one_unknown_shift_of_its_group():
    """The block in D against an explicit column for the datum in ordinary weighted least squares."""
    system, inputs, *_ = lake_only()
    datum = ("old map",) * 6 + (None,) * 5 + ("harbour",) * 5
    readings = readings_of(gauged=False, datum=datum, datum_sd=(("old map", 0.5), ("harbour", 0.02)))
    base = make_model(system, inputs, (), readings).at(np.zeros(0), None)[1]
    offset = np.array([0.4 * (d == "old map") + 0.01 * (d == "harbour") for d in datum])
    noise = 0.04 * np.random.default_rng(6).standard_normal(COUNT)
    readings = replace(readings, head=base + 0.05 + offset + noise)
    result = fit(system, inputs, shore_alone(np.inf), readings, nothing())
    columns = np.column_stack([np.ones(COUNT), *(np.array([d == g for d in datum]) for g in ("old map", "harbour"))])
    information = columns.T @ columns / 0.04**2 + np.diag([0, 1 / 0.5**2, 1 / 0.02**2])
    solution = np.linalg.solve(information, columns.T @ (readings.head - base) / 0.04**2)
    assert result.theta[0] == pytest.approx(solution[0], rel=1e-6)
    variance = result.scale**2 * np.linalg.inv(information)[0, 0]
    assert result.covariance[0, 0] == pytest.approx(variance, rel=1e-6)
    # taken as separate errors the offset of one group pulls the shore up
    alone = fit(system, inputs, shore_alone(np.inf), replace(readings, datum=(None,) * COUNT), nothing())
    assert alone.theta[0] > result.theta[0] + 0.08


def test_a_reading_that_no_one_shares_gains_nothing_from_a_named_datum():
    readings = readings_of(gauged=False, datum=("a",) + (None,) * 15, datum_sd=(("a", 0.3), ("unused", 9.0)))
    found = readings.reading_covariance()
    assert found == pytest.approx(np.diag([0.04**2 + 0.3**2] + [0.04**2] * 15))


def test_levels_alone_do_not_fix_rates_and_conductivity(confined):
    """Only ratios matter to heads: a common factor on all of them leaves every level as it is."""
    readings = measured(confined, readings_of(gauged=False), np.random.default_rng(3).standard_normal(COUNT))
    with pytest.raises(NotSolvedError, match=r"do not fix every free value \(K, rain, well\)"):
        fit(*confined[:2], parameters_of("K", "rain", "well"), readings, nothing())
    priors = parameters_of("K", "rain", "well", spreads={"rain": 0.3})
    result = fit(*confined[:2], priors, readings, nothing())
    assert result.informed[1] < 0.01  # nothing but its prior speaks of the rain
    shift = result.theta[1] - START["rain"]
    assert shift == pytest.approx(0.0, abs=1e-3)
    assert np.sqrt(result.covariance[0, 0]) == pytest.approx(0.3, rel=0.25)  # and so of the conductivity


def test_a_value_that_no_reading_knows_is_refused_without_a_prior(confined):
    readings = measured(confined, readings_of(gauged=False))
    porosity = Parameter("porosity", "porosity", 0, False, 0.2, np.inf, "-")
    with pytest.raises(NotSolvedError, match=r"fix every free value \(brook, porosity\): give an estimate"):
        fit(*confined[:2], (*parameters_of("brook"), porosity), readings, nothing())
    known = replace(porosity, sd=0.05)
    result = fit(*confined[:2], (*parameters_of("brook"), known), readings, nothing())
    assert result.theta[1] == 0.2
    assert result.informed[1] == pytest.approx(0.0, abs=1e-12)


def test_more_free_values_than_readings_are_refused(confined):
    few = measured(confined, readings_of(gauged=False))
    few = replace(few, names=("P0",), datum=(None,), **{k: getattr(few, k)[:1] for k in ("x", "y", "head", "sd")})
    with pytest.raises(NotSolvedError, match="free value"):
        fit(*confined[:2], parameters_of("brook", "rain"), few, np.zeros((1, 1)))


def test_a_gauging_fixes_what_levels_leave_open(confined):
    noise = np.random.default_rng(3).standard_normal(COUNT + 1)
    names = ("K", "rain", "brook", "well")
    readings = measured(confined, readings_of(), noise)
    result = fit(*confined[:2], parameters_of(*names), readings, nothing())
    off = (result.theta - np.array([TRUE[n] for n in names])) / np.sqrt(np.diag(result.covariance))
    assert abs(off).max() < 3.0
    assert np.all(np.sqrt(np.diag(result.covariance))[[0, 1, 3]] < 1.0)  # of the logarithms, without any prior


def weighed(rng, truth, factor, count=40):
    """The ground's spread that a linear fit of two numbers finds, and what it was found from."""
    parameters = [Parameter(n, "shift", 0, False, 0.0, sd, "") for n, sd in (("a", 1.0), ("b", 0.4))]
    jacobian = rng.normal(size=(count, 2))
    distance = abs(np.subtract.outer(np.arange(count), np.arange(count)))
    own, uneven = 0.05**2 * np.eye(count), 0.3**2 * np.exp(-distance / 8.0)
    values = jacobian @ (rng.normal(size=2) * [1.0, 0.4])
    values += rng.multivariate_normal(np.zeros(count), own + truth**2 * uneven)
    theta = np.array([0.1, -0.2])  # anywhere: the model is linear
    model = SimpleNamespace(parameters=parameters, readings=SimpleNamespace(values=values))
    point = SimpleNamespace(jacobian=jacobian, theta=theta, computed=jacobian @ theta)
    return fit_module._ground_spread(model, point, own, uneven, factor), model, point, own, uneven


def scale_of(model, jacobian, sigma0):
    """Scale at the best values, by turns (general least squares by numpy), and the sd of the parameters' priors."""
    spreads = np.array([p.sd for p in model.parameters])
    values, scale = model.readings.values, 1.0
    for _ in range(60):
        inverse = np.linalg.inv(scale**2 * sigma0)
        best = np.linalg.solve(jacobian.T @ inverse @ jacobian + np.diag(spreads**-2), jacobian.T @ inverse @ values)
        scale, _, _ = fit_module._scale_at(values - jacobian @ best, sigma0, jacobian, model.parameters, scale)
    return scale, spreads


def test_the_spread_of_the_ground_is_weighed_as_its_marginal_likelihood_says():
    """Against the density of the readings with the parameters integrated out, by scipy, times the stated priors."""
    factor = 2.0
    found, model, point, own, uneven = weighed(np.random.default_rng(3), 1.7, factor)
    logs = np.linspace(-2.2, 2.2, 17)
    score = []
    for log in logs:
        sigma0 = own + factor ** (2 * log) * uneven
        scale, spreads = scale_of(model, point.jacobian, sigma0)
        covariance = scale**2 * sigma0 + (point.jacobian * spreads**2) @ point.jacobian.T
        density = scipy.stats.multivariate_normal(np.zeros(len(covariance)), covariance).logpdf(model.readings.values)
        prior = scipy.stats.norm.logpdf(log) - fit_module.PRIOR_READINGS * (np.log(scale) + 0.5 / scale**2)
        score.append(density + prior)
    weight = np.exp(np.array(score) - max(score))
    assert found == pytest.approx(np.sqrt(weight @ factor ** (2 * logs) / weight.sum()), rel=1e-4)


@pytest.mark.parametrize("truth", [0.4, 1.0, 2.5])
def test_spread_and_scale_together_follow_the_truth(truth):
    """The data hardly tell the one from the other; their product must follow, on the wide side (a mean of squares)."""
    rng = np.random.default_rng(11)
    products = []
    for _ in range(20):
        spread, model, point, own, uneven = weighed(rng, truth, 2.0)
        products.append(spread * scale_of(model, point.jacobian, own + spread**2 * uneven)[0])
    assert 0.9 * truth < np.median(products) < 1.3 * truth
