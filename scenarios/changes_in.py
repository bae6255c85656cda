"""Cases: every step checked against the features of the file, in the units of what it changes."""

import re
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from .features_in import read_lake, read_recharge, read_stream, read_well
from .intake import Intake
from .messages import meant
from .scenario import Case, Change, Scenario, Value
from .schema import LakeBlock, RechargeBlock, StepBlock, StreamBlock, WellBlock
from .schema_check import check_block
from .units import UnitError, quantity
from .yaml_tree import Path_

_KINDS: dict[str, tuple[type, Callable[..., Any]]] = {
    "wells": (WellBlock, read_well),
    "streams": (StreamBlock, read_stream),
    "lakes": (LakeBlock, read_lake),
    "recharge": (RechargeBlock, read_recharge),
}
_DIMENSION = {
    "m": "length",
    "m/d": "speed",
    "m3/d": "rate",
    "m2/d": "discharge",
    "d": "time",
    "deg": "angle",
    "1": "number",
}
_POSITIVE = ("conductivity", "resistance")


@dataclass(frozen=True)
class Changeable:
    """A value that a case may change; number None for the stages of a stream, which only move together."""

    unit: str
    number: float | None
    injects: bool = False


def changeable(scenario: Scenario) -> dict[str, Changeable]:
    """Every value of a scenario that a case may change, by its path."""
    a, flow = scenario.aquifer, scenario.beyond.flow
    values: list[Value | None] = [a.base, a.top, a.conductivity, a.porosity, a.storage, scenario.beyond.reference_head]
    values += [None if scenario.outline is None else scenario.outline.inflow]
    values += [] if flow is None else [flow.gradient, flow.discharge, flow.towards]
    values += [lake.stage for lake in scenario.lakes] + [r.rate for r in scenario.recharge]
    for s in scenario.streams:
        values += [s.shift, s.resistance, s.starts_with]
    found = {v.path: Changeable(v.unit, v.value) for v in values if v is not None}
    for s in scenario.streams:
        found[f"streams.{s.name}.stage"] = Changeable("m", None)
    for w in scenario.wells:
        injects = w.rate.path.endswith(".injects")
        found[w.rate.path] = Changeable("m3/d", abs(w.rate.value), injects)
    return found


def read_cases(cases: dict[str, list[StepBlock]], base: Scenario, intake: Intake) -> tuple[Case, ...]:
    """The cases of a scenario; problems are kept at the intake."""
    found = []
    known = {f"{kind}.{m.name}" for kind in _KINDS for m in getattr(base, kind)}
    # what was refused when it was read must not be reported again wherever a case names it
    refused = {f"{kind}.{name}" for kind in _KINDS for name in intake.tree.data.get(kind) or {}} - known
    for name, steps in cases.items():
        values, features = changeable(base), set(known)
        changes = []
        for i, step in enumerate(steps):
            named = str(step.change or step.remove)
            if any(named == r or named.startswith(r + ".") for r in refused):
                continue
            change = _step(step, values, features, intake, ("cases", name, i))
            if change is not None:
                changes.append(change)
        found.append(Case(name, tuple(changes)))
    return tuple(found)


def _step(
    step: StepBlock, values: dict[str, Changeable], features: set[str], intake: Intake, path: Path_
) -> Change | None:
    verb = "change" if step.change is not None else "add" if step.add is not None else "remove"
    for key, owner in (("to", "change"), ("by", "change"), ("as_", "add")):
        if getattr(step, key) is not None and verb != owner:
            said = key.rstrip("_")
            intake.error("form", f"{said!r} goes with {owner!r}", (*path, said), key=True)
            return None
    if step.change is not None:
        return _change(step, values, intake, path)
    if step.add is not None:
        return _add(step, values, features, intake, path)
    assert step.remove is not None
    if step.remove not in features:
        intake.error("unknown-path", f"there is no {step.remove!r} to remove", (*path, "remove"),
                     meant(step.remove, sorted(features), "features"))  # fmt: skip
        return None
    features.discard(step.remove)
    for gone in [v for v in values if v.startswith(step.remove + ".")]:
        del values[gone]
    return Change("remove", step.remove)


def _change(step: StepBlock, values: dict[str, Changeable], intake: Intake, path: Path_) -> Change | None:
    target = str(step.change)
    known = values.get(target)
    if known is None:
        intake.error("unknown-path", f"the scenario states no value {target!r}", (*path, "change"),
                     meant(target, sorted(values), "values"))  # fmt: skip
        return None
    if (step.to is None) == (step.by is None):
        intake.error("exactly-one", f"the change of {target} needs one of 'to' and 'by'", path)
        return None
    dimension = _DIMENSION[known.unit]
    key = "to" if step.to is not None else "by"
    try:
        if step.to is not None:
            if known.number is None:
                intake.error(
                    "form", f"{target}: the stages of a stream only move together", (*path, "to"), "write 'by: -0.3'"
                )
                return None
            number = quantity(step.to, dimension, intake.bare)
            change, after = Change("change", target, to=number), number
        elif found := re.fullmatch(r"\s*x\s*(\S+)\s*", step.by or ""):
            factor = quantity(found.group(1), "number")
            change, after = Change("change", target, factor=factor), (known.number or 0.0) * factor
        else:
            amount = quantity(_number(step.by), dimension, intake.bare)
            after = (known.number or 0.0) + amount
            # a well that injects is kept as a negative rate: more injection is a lower rate
            change = Change("change", target, amount=-amount if known.injects else amount)
    except UnitError as error:
        by = "a factor such as x0.6, or an amount with its unit such as '-50 m3/d'"
        intake.error(error.rule, f"{target}: {error}", (*path, key), by if key == "by" else error.help)
        return None
    reason = _impossible(target, after, known)
    if reason is not None:
        intake.error("range", f"{target} would become {after:g} {known.unit}: {reason}", (*path, key))
        return None
    return change


def _number(text: str | None) -> object:
    """A bare number as a number, so that its missing unit is seen."""
    try:
        return float(text or "")
    except ValueError:
        return text


def _impossible(target: str, after: float, known: Changeable) -> str | None:
    last = target.rsplit(".", 1)[-1]
    if last in ("pumps", "injects") and after < 0:
        return "the sign lives in the verb"
    if last in _POSITIVE and after <= 0:
        return "it must be above 0"
    if last in ("porosity", "storage") and not 0 < after < 1:
        return "it must lie between 0 and 1"
    if last in ("gradient", "discharge", "starts_with") and after < 0:
        return "it must be at least 0"
    return None


def _add(
    step: StepBlock, values: dict[str, Changeable], features: set[str], intake: Intake, path: Path_
) -> Change | None:
    target = str(step.add)
    kind, _, name = target.partition(".")
    if kind not in _KINDS or not name:
        intake.error("unknown-path", f"cannot add {target!r}: write kind.name", (*path, "add"),
                     meant(kind, _KINDS, "kinds") + ", such as wells.Croft")  # fmt: skip
        return None
    if name in {f.partition(".")[2] for f in features}:
        intake.error("name", f"there is already a feature named {name!r}", (*path, "add"))
        return None
    if step.as_ is None:
        intake.error("missing-key", f"'as' is missing: what {target} is", path, "write it as in the block of its kind")
        return None
    model, read = _KINDS[kind]
    block, problems = check_block(model, step.as_, intake.tree, intake.bare, (*path, "as"))
    intake.problems += problems
    feature = None if block is None else read(name, block, intake, (*path, "as"))
    if feature is None:
        return None
    for key in ("rate", "stage", "shift", "resistance", "starts_with"):
        value = getattr(feature, key, None)
        if isinstance(value, Value):
            if value.kind != "known":
                intake.error("form", f"{value.path}: a case is never fitted, so its features are known", (*path, "as"),
                             "write the number")  # fmt: skip
                return None
            values[value.path] = Changeable(value.unit, abs(value.value), value.path.endswith(".injects"))
    features.add(target)
    return Change("add", target, feature=feature)
