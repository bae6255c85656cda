"""Cases: named changes to the fitted field, each solved again; never fitted again.

The fitted far field is a reference head or "no net exchange" by construction of the solve, so that no fitted constant
is carried along when a rate changes.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any, TypeVar

import numpy as np

from ..elements.stream import Stream
from ..solver.boundary import Solution
from ..solver.setting import setting_on
from .building import Model, build
from .fitting import Fitted, natural, settle
from .scenario import Case, Change, Scenario, Value

_T = TypeVar("_T")


@dataclass(frozen=True)
class CaseAnswer:
    """A solved case with its differences to the base: drawdown (m) by well and level, change of exchange (m3/d)."""

    name: str
    scenario: Scenario
    model: Model
    solution: Solution
    drawdown: dict[str, float]
    exchange_change: dict[str, float]


def solve_case(scenario: Scenario, model: Model, fitted: Fitted, case: Case) -> CaseAnswer:
    """Apply the changes of a case to the fitted scenario and solve it.

    Raises ValueError where a change names nothing, NotSolvedError where the case cannot be solved.
    """
    changed = fitted_scenario(scenario, model, fitted)
    for change in case.changes:
        changed = _apply(changed, change)
    new_model = build(changed)
    solution = None
    carried = setting_on(model.places, new_model.places, new_model.inputs.setting)
    if carried is not None:  # only numbers change: what was assembled for the base serves
        new_model = replace(new_model, places=model.places, inputs=replace(new_model.inputs, setting=carried))
        solution = fitted.solution
    solution, _ = settle(new_model, new_model.inputs, scenario.tolerance, solution)
    return CaseAnswer(case.name, changed, new_model, solution, *_differences(scenario, fitted.solution, solution))


def fitted_scenario(scenario: Scenario, model: Model, fitted: Fitted) -> Scenario:
    """The scenario with every fitted value put in as known."""
    if fitted.result is None:
        return scenario
    for k, parameter in enumerate(fitted.result.parameters):
        value = natural(parameter, model, float(fitted.result.theta[k]))
        signed = parameter.scale * value if parameter.target != "bed" else value
        scenario = _put(scenario, parameter.name, _setter(signed))
    width = {line.name: line.width for line in model.places.lines if isinstance(line, Stream)}
    streams = [s if s.resistance is None else replace(s, line_width=width[s.name]) for s in scenario.streams]
    return replace(scenario, streams=tuple(streams))


def _setter(number: float) -> Callable[[Value], Value]:
    return lambda value: _known(value, number)


def _known(value: Value, number: float) -> Value:
    return replace(value, value=number, kind="known", factor=None, sd=None)


def _apply(scenario: Scenario, change: Change) -> Scenario:
    if change.verb == "change":
        return _put(scenario, change.path, lambda v: _known(v, _changed(v.value, change)))
    kind, _, name = change.path.partition(".")
    members = getattr(scenario, kind)
    if change.verb == "add":
        return _with(scenario, kind, (*members, change.feature))
    left = tuple(m for m in members if m.name != name)
    if len(left) == len(members):
        raise ValueError(f"case change: {change.path!r} names nothing to remove")
    if kind == "streams":  # its gaugings measure nothing any more
        scenario = replace(scenario, gaugings=tuple(g for g in scenario.gaugings if g.stream != name))
    return _with(scenario, kind, left)


def _changed(value: float, change: Change) -> float:
    if change.to is not None:
        # the verb that was written gives the sign of a rate
        return -abs(change.to) if value < 0 and change.to > 0 else change.to
    if change.factor is not None:
        return value * change.factor
    return value + (change.amount or 0.0)


def _with(thing: _T, name: str, value: Any) -> _T:
    """The same with one field, known by its name, put in anew."""
    return replace(thing, **{name: value})  # type: ignore[type-var]


_FIELDS = {
    "pumps": "rate", "injects": "rate", "stage": "stage", "rate": "rate", "adds": "rate", "shift": "shift",
    "starts_with": "starts_with", "bed.resistance": "resistance",
}  # fmt: skip


def _put(scenario: Scenario, path: str, new: Callable[[Value], Value]) -> Scenario:
    """Replace the value at a path ("wells.Mill 1.pumps") by new(value)."""
    head, _, rest = path.partition(".")
    if head in ("wells", "streams", "lakes", "recharge"):
        for i, member in enumerate(getattr(scenario, head)):
            if rest.startswith(member.name + "."):
                key = rest[len(member.name) + 1 :]
                field = _FIELDS.get(key)
                if head == "streams" and key == "stage":
                    stage = np.array([new(Value(path, float(s), "m")).value for s in member.stage])
                    changed = replace(member, stage=stage)
                elif field is None or getattr(member, field, None) is None:
                    continue  # a name may begin another one: "Mill" and "Mill.1"
                else:
                    changed = replace(member, **{field: new(getattr(member, field))})
                    if field == "resistance":
                        changed = replace(changed, line_width=None)
                members = list(getattr(scenario, head))
                members[i] = changed
                return _with(scenario, head, tuple(members))
    elif head == "aquifer" and isinstance(getattr(scenario.aquifer, rest, None), Value):
        return replace(scenario, aquifer=_with(scenario.aquifer, rest, new(getattr(scenario.aquifer, rest))))
    elif head == "outline" and scenario.outline is not None and rest == "inflow":
        return replace(scenario, outline=replace(scenario.outline, inflow=new(scenario.outline.inflow)))
    elif head == "beyond":
        beyond, flow = scenario.beyond, scenario.beyond.flow
        if rest == "reference.head" and beyond.reference_head is not None:
            return replace(scenario, beyond=replace(beyond, reference_head=new(beyond.reference_head)))
        key = rest.removeprefix("flow.")
        if flow is not None and isinstance(getattr(flow, key, None), Value):
            return replace(scenario, beyond=replace(beyond, flow=_with(flow, key, new(getattr(flow, key)))))
    raise ValueError(f"{path!r} names no value that can be changed")


def _differences(scenario: Scenario, base: Solution, case: Solution) -> tuple[dict[str, float], dict[str, float]]:
    """Drawdown (m, > 0 lower than in the base) at the base's wells and levels; change of each exchange (m3/d)."""
    places = [(w.name, w.x, w.y) for w in scenario.wells] + [(v.name, v.x, v.y) for v in scenario.levels]
    drawdown = {}
    if places:
        x, y = np.array([p[1] for p in places]), np.array([p[2] for p in places])
        fall = base.flow.head(x, y) - case.flow.head(x, y)
        drawdown = {p[0]: float(d) for p, d in zip(places, fall, strict=True)}
    before = {row.feature: row.inflow - row.outflow for row in base.balance}
    after = {row.feature: row.inflow - row.outflow for row in case.balance}
    names = [*before, *(n for n in after if n not in before)]
    return drawdown, {n: after.get(n, 0.0) - before.get(n, 0.0) for n in names}
