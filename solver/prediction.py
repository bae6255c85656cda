"""How well a fitted site foretells a reading that it has not seen: leave-one-out by linear algebra.

With r = y - f at the fitted values, Sigma the covariance of the readings, J the Jacobian, P the priors' covariance and
Q = Sigma^-1 - Sigma^-1 J (J' Sigma^-1 J + P^-1)^-1 J' Sigma^-1, the reading i less its conditional mean given all the
others, the fit made anew without it, is (Sigma^-1 r)_i / Q_ii with variance 1 / Q_ii (Dubrule 1983, for kriging with a
trend; with priors the same algebra). Exact where the readings are linear in the parameters.
"""

from dataclasses import dataclass

import numpy as np

from ..elements.field_arrays import Floats
from .fit import FitResult


@dataclass(frozen=True)
class LeaveOneOut:
    """Errors (n,) (m, or m3/d for gaugings) of foretelling each reading from all others.

    field: with the flow field alone; predicted: with the field and the conditional mean of its correlated error; sd:
    standard deviation that the error model states for the latter.
    """

    field: Floats
    predicted: Floats
    sd: Floats


def leave_one_out(result: FitResult) -> LeaveOneOut:
    """Leave-one-out errors of a fit; the scale of the errors is that of the whole fit."""
    sigma, jacobian, r = result.sigma, result.jacobian, result.residuals
    precision = np.diag([0.0 if np.isinf(p.sd) else 1.0 / p.sd**2 for p in result.parameters])
    inverse = np.linalg.inv(sigma)
    weighted = inverse @ jacobian
    q = inverse - weighted @ np.linalg.solve(jacobian.T @ weighted + precision, weighted.T)
    variance = 1.0 / np.diag(q)
    pull = jacobian.T @ (inverse @ r)  # of the priors at the fitted values, where both balance
    field = np.empty(r.size)
    for i in range(r.size):
        kept = np.arange(r.size) != i
        near = np.linalg.solve(sigma[np.ix_(kept, kept)], np.column_stack([jacobian[kept], r[kept]]))
        information = jacobian[kept].T @ near[:, :-1] + precision
        move = np.linalg.solve(information, jacobian[kept].T @ near[:, -1] - pull)
        field[i] = r[i] - jacobian[i] @ move
    return LeaveOneOut(field, variance * (inverse @ r), np.sqrt(variance))
