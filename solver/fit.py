"""The fit of a site's numbers to levels and gaugings, by generalised least squares with priors.

    minimise (y - f(p))' Sigma^-1 (y - f(p)) + (p - m)' P^-1 (p - m),   Sigma = scale^2 (D + s^2 J R J')

by Gauss-Newton with the analytic Jacobian. D: variance of readings, with blocks where a group shares a datum. The
scale is estimated with the fit, drawn towards 1 by ``PRIOR_READINGS`` pseudo-readings, and the intervals are
Student's t with the degrees of freedom that leaves; so is s, within a stated factor. Names: generalised least squares
(Aitken 1935); uneven ground by ``ground``.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import scipy.linalg
import scipy.special

from ..elements.field_arrays import Floats
from .balance import upstream_take
from .inputs import Inputs, Parameter, Solved, responses, solve_inputs, tangent, with_values
from .sensitivity import Probe, head_change, make_probe, potential_change, potentials
from .state import NotSolvedError
from .system import System

PRIOR_READINGS = 4.0  # weight of "the stated errors are right" against the residuals when the scale is estimated
MOST_STEPS = 100
LEAST_SCALE = 0.1
GRID, GRID_REACH = 17, 2.2  # values of the ground's sd that are weighed, over this many of its own sds
ENOUGH = 0.25  # part of the promised fall that a step must bring (Armijo 1966); any fall at all lets steps swing


@dataclass(frozen=True)
class Readings:
    """What was measured: levels at map points x, y (k,) (m) with heads and sd (m), datum groups; gaugings."""

    names: tuple[str, ...]
    x: Floats
    y: Floats
    head: Floats
    sd: Floats
    datum: tuple[str | None, ...] = ()
    datum_sd: tuple[tuple[str, float], ...] = ()
    gauging_names: tuple[str, ...] = ()
    gauging_line: tuple[int, ...] = ()
    gauging_distance: tuple[float, ...] = ()  # m from the source
    gauging_above: tuple[tuple[tuple[int, float], ...], ...] = ()  # tributaries above: line and distance of each
    gauging_start: tuple[tuple[int, ...], ...] = ()  # indices of parameters added to the gain (starts_with)
    gauging_given: tuple[float, ...] = ()  # m3/d known to enter at the source
    gauging_flow: tuple[float, ...] = ()  # m3/d
    gauging_sd: tuple[float, ...] = ()

    @property
    def values(self) -> Floats:
        """All measured values (n,): heads (m), then flows (m3/d)."""
        return np.concatenate([self.head, np.array(self.gauging_flow, dtype=float)])

    def reading_covariance(self) -> Floats:
        """D (n, n): variances of the readings, and of datums that a group of levels shares."""
        out = np.diag(np.concatenate([self.sd, np.array(self.gauging_sd, dtype=float)]) ** 2)
        shared = dict(self.datum_sd)
        for i, a in enumerate(self.datum):
            for j, b in enumerate(self.datum):
                if a is not None and a == b:
                    out[i, j] += shared.get(a, 0.0) ** 2
        return out


@dataclass(frozen=True)
class FitResult:
    """A fitted site.

    theta, covariance: (log) parameters and their posterior; informed (p,): 1 - posterior/prior variance; residuals,
    leverage, standardized (n,) in the order of ``Readings.values``; scale of Sigma; ground_spread: what the stated sd
    of the ground was multiplied with before that; dof of the t distribution; jacobian (n, p); sigma (n, n) with both
    in; own_misfit: weighted misfit with the readings' own errors alone, its degrees of freedom and the probability of
    a larger one.
    """

    parameters: tuple[Parameter, ...]
    theta: Floats
    covariance: Floats
    informed: Floats
    computed: Floats
    residuals: Floats
    standardized: Floats
    leverage: Floats
    scale: float
    ground_spread: float
    dof: float
    jacobian: Floats
    sigma: Floats
    own_misfit: float
    own_dof: float
    own_probability: float
    steps: int
    solved: Solved

    def value(self, k: int) -> float:
        """Parameter k in its natural unit."""
        return float(np.exp(self.theta[k])) if self.parameters[k].log else float(self.theta[k])

    def sd(self, k: int) -> float:
        """Posterior sd of parameter k in its natural unit (of the logarithm times the value for a logarithmic one)."""
        sd = float(np.sqrt(self.covariance[k, k]))
        return self.value(k) * sd if self.parameters[k].log else sd

    def interval(self, k: int, share: float = 0.9) -> tuple[float, float]:
        """Central interval of parameter k that holds it with the stated probability (Student's t)."""
        reach = _student(0.5 + 0.5 * share, self.dof) * float(np.sqrt(self.covariance[k, k]))
        ends = self.theta[k] - reach, self.theta[k] + reach
        return (float(np.exp(ends[0])), float(np.exp(ends[1]))) if self.parameters[k].log else ends


def _student(probability: float, dof: float) -> float:
    """Quantile of Student's t (of the normal distribution for infinite degrees of freedom)."""
    return float(scipy.special.ndtri(probability) if np.isinf(dof) else scipy.special.stdtrit(dof, probability))


@dataclass(frozen=True)
class _Point:
    """Parameters with what they give: the solved field, computed readings (n,) and their Jacobian (n, p)."""

    theta: Floats
    solved: Solved
    computed: Floats
    jacobian: Floats
    steps: int


@dataclass(frozen=True)
class _Model:
    system: System
    inputs: Inputs
    parameters: tuple[Parameter, ...]
    readings: Readings
    probe: Probe
    takes: Floats  # (g, n + 1) upstream take of every gauging

    def first(self, start: Floats | None) -> _Point:
        theta = np.array([p.mean for p in self.parameters]) if start is None else start.copy()
        solved = solve_inputs(self.system, with_values(self.inputs, self.parameters, theta))
        return self.point(theta, *self.at(theta, solved))

    def point(self, theta: Floats, solved: Solved, computed: Floats, steps: int = 0) -> _Point:
        return _Point(theta, solved, computed, self.jacobian(solved, theta), steps)

    def at(self, theta: Floats, like: Solved | None) -> tuple[Solved, Floats]:
        solved = solve_inputs(self.system, with_values(self.inputs, self.parameters, theta), like)
        heads = solved.state.setting.aquifer.head(potentials(solved.state, self.probe))
        flows = self.takes @ solved.state.x + np.array(self.readings.gauging_given)
        for g, members in enumerate(self.readings.gauging_start):
            flows[g] += sum(np.exp(theta[k]) if self.parameters[k].log else theta[k] for k in members)
        return solved, np.concatenate([heads, flows])

    def jacobian(self, solved: Solved, theta: Floats) -> Floats:
        out = np.zeros((self.readings.values.size, theta.size))
        n_levels = self.readings.head.size
        changes = [tangent(solved, p, float(t)) for p, t in zip(self.parameters, theta, strict=True)]
        for k, (change, dx) in enumerate(responses(solved, changes)):
            d_phi = potential_change(solved.state, self.probe, change, dx)
            out[:n_levels, k] = head_change(solved.state, self.probe, change, d_phi)
            out[n_levels:, k] = self.takes @ dx
            for g, members in enumerate(self.readings.gauging_start):
                if k in members:
                    out[n_levels + g, k] += np.exp(theta[k]) if self.parameters[k].log else 1.0
        return out


def make_model(system: System, inputs: Inputs, parameters: Sequence[Parameter], readings: Readings) -> _Model:
    """What the fit evaluates, with all matrices that do not depend on the parameters."""
    probe = make_probe(system, readings.x, readings.y)
    own = list(zip(readings.gauging_line, readings.gauging_distance, strict=True))
    above = readings.gauging_above or ((),) * len(own)
    reaches = [[one, *others] for one, others in zip(own, above, strict=True)]
    takes = [np.sum([upstream_take(system.mesh, *reach) for reach in all_of], axis=0) for all_of in reaches]
    empty = np.zeros((0, system.mesh.n_unknown + 1))
    return _Model(system, inputs, tuple(parameters), readings, probe, np.array(takes) if takes else empty)


def fit(
    system: System,
    inputs: Inputs,
    parameters: Sequence[Parameter],
    readings: Readings,
    ground: Floats,
    *,
    ground_factor: float = 1.0,
    start: Floats | None = None,
) -> FitResult:
    """Fit parameters (p,) to readings (n,) with the covariance ``ground`` (k, k) (m2) of uneven ground at the levels.

    ground_factor: the sd that ``ground`` stands for is known within this factor; the residuals then have their say.
    Raises NotSolvedError where no step lowers the misfit to a settled place.
    """
    model = make_model(system, inputs, parameters, readings)
    own = readings.reading_covariance()
    uneven = np.zeros_like(own)
    uneven[: readings.head.size, : readings.head.size] = ground
    spread = 1.0
    settled = _settle_with_scale(model, model.first(start), own + uneven)
    if ground_factor != 1.0 and np.any(ground) and parameters:
        spread = _ground_spread(model, settled.point, own, uneven, ground_factor)
        settled = _settle_with_scale(model, settled.point, own + spread**2 * uneven, settled.steps)
    point, scale = settled.point, settled.scale
    sigma = scale**2 * (own + spread**2 * uneven)
    covariance = _posterior(point.jacobian, sigma, parameters)
    residuals = readings.values - point.computed
    leverage, standardized = _diagnostics(residuals, sigma, point.jacobian, covariance)
    own_misfit, own_dof = _own_misfit(model, _settle(model, point, own, 1.0), own)
    informed = np.array([1.0 if np.isinf(p.sd) else 1.0 - covariance[k, k] / p.sd**2 for k, p in enumerate(parameters)])
    probability = float(scipy.special.chdtrc(own_dof, own_misfit)) if own_dof > 0 else np.nan
    return FitResult(
        tuple(parameters), point.theta, covariance, informed, point.computed, residuals, standardized, leverage,
        scale, spread, settled.dof, point.jacobian, sigma, own_misfit, own_dof, probability, settled.steps,
        point.solved,
    )  # fmt: skip


@dataclass(frozen=True)
class _Settled:
    """Where the fit came to rest: the point, the scale of Sigma, its degrees of freedom, steps taken in all."""

    point: _Point
    scale: float
    dof: float
    steps: int


def _settle_with_scale(model: _Model, point: _Point, sigma0: Floats, steps: int = 0) -> _Settled:
    """Parameters and the scale of Sigma together, by turns."""
    point = _settle(model, point, sigma0, 1.0)
    steps += point.steps
    scale, dof = 1.0, np.inf
    for _ in range(MOST_STEPS):
        before = point.theta
        residuals = model.readings.values - point.computed
        scale, dof, covariance = _scale_at(residuals, sigma0, point.jacobian, model.parameters, scale)
        point = _settle(model, point, sigma0, scale)
        steps += point.steps
        if np.all(abs(point.theta - before) <= 1e-3 * np.sqrt(np.diag(covariance))):
            return _Settled(point, scale, dof, steps)
    raise NotSolvedError("the scale of the errors and the fitted values did not settle together")


def _scale_at(
    residuals: Floats, sigma0: Floats, jacobian: Floats, parameters: Sequence[Parameter], scale: float
) -> tuple[float, float, Floats]:
    """Scale of Sigma at fixed parameter values, by its own small fixed point; degrees of freedom, covariance."""
    dof, covariance = np.inf, np.zeros((0, 0))
    for _ in range(MOST_STEPS):
        covariance = _posterior(jacobian, scale**2 * sigma0, parameters)
        previous = scale
        scale, dof = _scale(residuals, sigma0, jacobian, covariance, scale)
        if abs(scale - previous) < 1e-6 * scale:
            break
    return scale, dof, covariance


def _ground_spread(model: _Model, point: _Point, own: Floats, uneven: Floats, factor: float) -> float:
    """Root of the posterior mean of the square by which the ground's stated sd is to be multiplied.

    On a grid, with the fit linearised where it stands and the scale at its best for each value: restricted likelihood
    (Patterson & Thompson 1971) times the priors of the sd (log-normal, one sd = the factor) and of the scale.
    """
    parameters, jacobian = model.parameters, point.jacobian
    mean = np.array([p.mean for p in parameters])
    precision = _precision(parameters)
    # what the parameters have to explain, from their means
    from_mean = model.readings.values - point.computed + jacobian @ (point.theta - mean)
    logs = np.linspace(-GRID_REACH, GRID_REACH, GRID)
    score = np.empty(GRID)
    for k, log in enumerate(logs):
        sigma0 = own + np.exp(2.0 * log * np.log(factor)) * uneven
        root = np.linalg.cholesky(sigma0)
        white = scipy.linalg.solve_triangular(root, np.column_stack([jacobian, from_mean]), lower=True)
        theta, scale, information = point.theta - mean, 1.0, np.diag(precision)
        for _ in range(MOST_STEPS):  # the best values and the scale at them, by turns
            previous = scale
            scale, _, _ = _scale_at(from_mean - jacobian @ theta, sigma0, jacobian, parameters, scale)
            information = white[:, :-1].T @ white[:, :-1] / scale**2 + np.diag(precision)
            theta = np.linalg.solve(information, white[:, :-1].T @ white[:, -1]) / scale**2
            if abs(scale - previous) <= 1e-6 * scale:
                break
        misfit = np.sum((white[:, -1] - white[:, :-1] @ theta) ** 2) / scale**2 + precision @ theta**2
        score[k] = (
            -np.sum(np.log(scale * np.diag(root))) - 0.5 * np.linalg.slogdet(information)[1] - 0.5 * misfit
            - PRIOR_READINGS * (np.log(scale) + 0.5 / scale**2) - 0.5 * log**2
        )  # fmt: skip
    weight = np.exp(score - score.max())
    return float(np.sqrt(weight @ np.exp(2.0 * logs * np.log(factor)) / weight.sum()))


def _precision(parameters: Sequence[Parameter]) -> Floats:
    return np.array([0.0 if np.isinf(p.sd) else 1.0 / p.sd**2 for p in parameters])


def _posterior(jacobian: Floats, sigma: Floats, parameters: Sequence[Parameter]) -> Floats:
    """Posterior covariance (p, p); raises NotSolvedError where data and priors leave a direction open."""
    if jacobian.shape[1] == 0:
        return np.zeros((0, 0))
    information = jacobian.T @ np.linalg.solve(sigma, jacobian) + np.diag(_precision(parameters))
    try:
        return scipy.linalg.cho_solve(scipy.linalg.cho_factor(information), np.eye(len(parameters)))
    except np.linalg.LinAlgError:
        free = ", ".join(p.name for p in parameters if np.isinf(p.sd))
        raise NotSolvedError(
            f"the levels do not fix every free value ({free}): give an estimate with a spread"
        ) from None


def _objective(model: _Model, theta: Floats, computed: Floats, whitener: Floats) -> float:
    r = scipy.linalg.solve_triangular(whitener, model.readings.values - computed, lower=True)
    prior = (theta - np.array([p.mean for p in model.parameters])) ** 2 * _precision(model.parameters)
    return float(r @ r + prior.sum())


def _settle(model: _Model, start: _Point, sigma0: Floats, scale: float) -> _Point:
    """Gauss-Newton with step halving to a settled minimum of the penalised misfit."""
    point = replace(start, steps=0)
    if point.theta.size == 0:
        return point
    whitener = np.asarray(scale * np.linalg.cholesky(sigma0) if sigma0.size else sigma0, dtype=float)
    precision = _precision(model.parameters)
    mean = np.array([p.mean for p in model.parameters])
    value = _objective(model, point.theta, point.computed, whitener)
    for step in range(1, MOST_STEPS + 1):
        jacobian = scipy.linalg.solve_triangular(whitener, point.jacobian, lower=True)
        r = scipy.linalg.solve_triangular(whitener, model.readings.values - point.computed, lower=True)
        information = jacobian.T @ jacobian + np.diag(precision)
        gradient = jacobian.T @ r - precision * (point.theta - mean)
        try:
            move = scipy.linalg.cho_solve(scipy.linalg.cho_factor(information), gradient)
        except np.linalg.LinAlgError:
            _posterior(jacobian, np.eye(r.size), model.parameters)
            raise
        promised = float(gradient @ move)  # fall of the objective that the linear model promises
        if promised < 1e-8 * (1.0 + value):
            return point
        share = 1.0
        while True:
            theta = point.theta + share * move
            try:
                solved, computed = model.at(theta, point.solved)
                trial = _objective(model, theta, computed, whitener)
            except (NotSolvedError, ValueError):
                trial = np.inf
            if trial < value - ENOUGH * share * promised:
                break
            share *= 0.5
            if share < 1e-4:
                return point  # no step lowers it any more: rounding of the solve
        value, point = trial, model.point(theta, solved, computed, step)
    raise NotSolvedError(f"the fit did not settle in {MOST_STEPS} steps; are the priors far from the levels?")


def _scale(r: Floats, sigma0: Floats, jacobian: Floats, covariance: Floats, scale: float) -> tuple[float, float]:
    """Scale of Sigma and its degrees of freedom: residual misfit over readings less what the parameters took up."""
    if r.size == 0:
        return 1.0, np.inf
    inverse = np.linalg.inv(sigma0)
    taken = float(np.trace(jacobian @ covariance @ jacobian.T @ inverse)) / scale**2 if jacobian.size else 0.0
    dof = max(r.size - taken, 0.0) + PRIOR_READINGS
    return max(float(np.sqrt((r @ inverse @ r + PRIOR_READINGS) / dof)), LEAST_SCALE), dof


def _diagnostics(r: Floats, sigma: Floats, jacobian: Floats, covariance: Floats) -> tuple[Floats, Floats]:
    """Leverage (n,) of each reading and its residual over the sd that the residual should have."""
    if r.size == 0:
        return np.zeros(0), np.zeros(0)
    spread = jacobian @ covariance @ jacobian.T if jacobian.size else np.zeros_like(sigma)
    leverage = np.diag(np.linalg.solve(sigma, spread))
    return leverage, r / np.sqrt(np.maximum(np.diag(sigma) - np.diag(spread), 1e-12 * np.diag(sigma)))


def _own_misfit(model: _Model, point: _Point, own: Floats) -> tuple[float, float]:
    """Misfit weighted with the readings' own errors alone, and its degrees of freedom."""
    if own.size == 0:
        return 0.0, 0.0
    r = model.readings.values - point.computed
    covariance = _posterior(point.jacobian, own, model.parameters)
    spread = point.jacobian @ covariance @ point.jacobian.T
    taken = float(np.trace(spread @ np.linalg.inv(own))) if point.theta.size else 0.0
    return float(r @ np.linalg.solve(own, r)), max(r.size - taken, 0.0)
