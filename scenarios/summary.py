"""The fit as rows: parameters with priors, readings with residuals."""

from typing import Any

import numpy as np

from .building import Model
from .fitting import Fitted, natural
from .scenario import Scenario


def parameter_rows(scenario: Scenario, model: Model, fitted: Fitted) -> list[dict[str, Any]]:
    """A row for every value that is not known exactly: fitted value, sd, 90% interval, prior, what the data said."""
    rows = []
    for k, p in enumerate(model.parameters):
        prior_value = natural(p, model, p.mean)
        prior: dict[str, Any] = {"value": prior_value, "kind": "free" if np.isinf(p.sd) else "estimate"}
        if np.isfinite(p.sd):
            prior |= {"factor": float(np.exp(p.sd))} if p.log else {"sd": p.sd}
        if fitted.result is None:
            sd = None if np.isinf(p.sd) else (prior_value * p.sd if p.log else p.sd)
            rows.append({"name": p.name, "value": prior_value, "sd": sd, "unit": p.unit, "prior": prior,
                         "informed": 0.0,
                         "interval_90": None})  # fmt: skip
            continue
        low, high = fitted.result.interval(k)
        shift = natural(p, model, 0.0) if not p.log else 0.0  # a lake's stage about its stated value
        rows.append(
            {"name": p.name, "value": natural(p, model, float(fitted.result.theta[k])), "sd": fitted.result.sd(k),
             "unit": p.unit, "prior": prior, "informed": float(fitted.result.informed[k]),
             "interval_90": [low + shift, high + shift]}
        )  # fmt: skip
    porosity = scenario.aquifer.porosity
    if porosity.kind != "known":
        prior = {"value": porosity.value, "kind": porosity.kind, "sd": porosity.sd, "factor": porosity.factor}
        sd = porosity.sd if porosity.factor is None else porosity.value * float(np.log(porosity.factor))
        rows.append({"name": porosity.path, "value": porosity.value, "sd": sd, "unit": "1", "prior": prior,
                     "informed": 0.0,
                     "interval_90": None})  # fmt: skip
    return rows


def residual_rows(scenario: Scenario, model: Model, fitted: Fitted) -> list[dict[str, Any]]:
    """A row for every level and gauging, those left out of the fit too (their residual is shown, not used)."""
    flow, result = fitted.solution.flow, fitted.result
    rows = []
    used = {name: k for k, name in enumerate(model.readings.names)}
    for level in scenario.levels:
        computed = float(flow.head(level.x, level.y))
        k = used.get(level.name)
        fit_known = result is not None and k is not None
        rows.append(
            {"name": level.name, "kind": "level", "x": level.x, "y": level.y, "observed": level.head, "sd": level.sd,
             "computed": computed, "residual": level.head - computed,
             "standardized": float(result.standardized[k]) if fit_known else None,  # type: ignore[union-attr]
             "leverage": float(result.leverage[k]) if fit_known else None,  # type: ignore[union-attr]
             "left_out": level.left_out}
        )  # fmt: skip
    for i, g in enumerate(scenario.gaugings):
        k = len(used) + i
        rows.append(
            {"name": g.name, "kind": "gauging", "x": None, "y": None, "observed": g.flow, "sd": g.sd,
             "computed": None if result is None else float(result.computed[k]),
             "residual": None if result is None else float(result.residuals[k]),
             "standardized": None if result is None else float(result.standardized[k]),
             "leverage": None if result is None else float(result.leverage[k]), "left_out": None}
        )  # fmt: skip
    return rows
