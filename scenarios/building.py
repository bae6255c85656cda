"""From a checked scenario to what the solver takes: elements, numbers, parameters to fit, readings."""

from dataclasses import dataclass, replace

import numpy as np

from ..elements.aquifer import Aquifer
from ..elements.lake import LakeEdge
from ..elements.outline import Outline
from ..elements.recharge import RechargeArea
from ..elements.stream import Stream
from ..elements.well import PumpingWell
from ..solver.fit import Readings
from ..solver.inputs import Inputs, Parameter, Regional, Target
from ..solver.setting import Element, Places, sort_elements
from .routing import course, reaches_above
from .scenario import Scenario, StreamInput, Value

OUTLINE = "outline"


@dataclass(frozen=True)
class Model:
    """A scenario ready to be solved and fitted; ``porosity`` keeps its prior (no level knows it)."""

    places: Places
    inputs: Inputs
    parameters: tuple[Parameter, ...]
    readings: Readings
    porosity: Value
    notes: tuple[str, ...]


def build(scenario: Scenario) -> Model:
    """Elements, numbers and parameters of a scenario.

    Raises ValueError (naming the feature) for geometry that cannot stand.
    """
    notes: list[str] = []
    aquifer = _aquifer(scenario)
    elements: list[Element] = [_well(w) for w in scenario.wells]
    elements += [_stream(s, scenario, notes) for s in scenario.streams]
    elements += [LakeEdge(k.name, k.x, k.y, k.stage.value, k.closed, k.land_inside) for k in scenario.lakes]
    if scenario.outline is not None:
        o = scenario.outline
        elements.append(Outline(OUTLINE, o.x, o.y, o.closed, o.inflow.value))
    elements += _recharge(scenario, notes)
    beyond = scenario.beyond
    reference = None
    if beyond.reference_head is not None:
        assert beyond.reference_x is not None
        assert beyond.reference_y is not None
        reference = ((beyond.reference_x, beyond.reference_y), beyond.reference_head.value)
    places, setting = sort_elements(aquifer, elements, reference)
    shift = {s.name: s.shift.value for s in scenario.streams if s.shift is not None}
    shifts = np.array([shift.get(line.name, 0.0) for line in places.lines])
    inputs = Inputs(replace(setting, shifts=shifts), _regional(scenario))
    parameters = tuple(_parameters(scenario, places))
    return Model(
        places, inputs, parameters, _readings(scenario, places, parameters), scenario.aquifer.porosity, tuple(notes)
    )


def _aquifer(scenario: Scenario) -> Aquifer:
    a = scenario.aquifer
    top = None if a.top is None else a.top.value
    return Aquifer(a.conductivity.value, a.base.value, top, a.porosity.value)


def _well(w: object) -> PumpingWell:
    return PumpingWell(w.name, w.x, w.y, w.rate.value, w.radius)  # type: ignore[attr-defined]


def _stream(s: StreamInput, scenario: Scenario, notes: list[str]) -> Stream:
    if s.resistance is None:
        return Stream(s.name, s.x, s.y, s.stage, s.width)
    width = _line_width(s, scenario, notes) if s.line_width is None else s.line_width
    return Stream(s.name, s.x, s.y, s.stage, width, s.resistance.value, s.bottom)


def _line_width(s: StreamInput, scenario: Scenario, notes: list[str]) -> float:
    """Width (m) of a line stream that exchanges as much as the real one with its two banks.

    Conductance per length (2T/lambda) tanh(w/(2 lambda)), lambda = sqrt(T c), instead of w/c (leaky aquifer
    equation; derived in the physics notes), at the prior transmissivity.
    """
    assert s.resistance is not None
    aquifer = _aquifer(scenario)
    transmissivity = aquifer.conductivity * float(aquifer.saturated_thickness(aquifer.potential(np.mean(s.stage))))
    length = float(np.sqrt(max(transmissivity, 1e-9) * s.resistance.value))
    if s.width > length:
        notes.append(
            f"{s.name} is wider ({s.width:g} m) than the reach of its bed ({length:.1f} m): its banks act apart; "
            "one line stands for both"
        )
    return float(2.0 * length * np.tanh(s.width / (2.0 * length)))


def _recharge(scenario: Scenario, notes: list[str]) -> list[RechargeArea]:
    out = []
    for r in scenario.recharge:
        if r.x is None or r.y is None:
            x, y, where = _everywhere(scenario)
            notes.append(f"recharge {r.name!r} everywhere: taken on {where}")
        else:
            x, y = r.x, r.y
        out.append(RechargeArea(r.name, x, y, r.rate.value))
    return out


def _everywhere(scenario: Scenario) -> tuple[np.ndarray, np.ndarray, str]:
    """The ground that "everywhere" means: inside the outline or an island's shore, else the drawn box and all lines."""
    if scenario.outline is not None and scenario.outline.closed:
        return scenario.outline.x, scenario.outline.y, "the ground inside the outline"
    for lake in scenario.lakes:
        if lake.land_inside:
            return lake.x, lake.y, f"the ground inside the shore of {lake.name}"
    site = scenario.site
    xs = np.concatenate([[site.x0, site.x1], *(s.x for s in scenario.streams), *(k.x for k in scenario.lakes)])
    ys = np.concatenate([[site.y0, site.y1], *(s.y for s in scenario.streams), *(k.y for k in scenario.lakes)])
    x0, x1, y0, y1 = xs.min(), xs.max(), ys.min(), ys.max()
    where = f"the rectangle x {x0:.0f} to {x1:.0f}, y {y0:.0f} to {y1:.0f} (drawn area and all waters)"
    return np.array([x0, x1, x1, x0]), np.array([y0, y0, y1, y1]), where


def _regional(scenario: Scenario) -> Regional | None:
    flow = scenario.beyond.flow
    if flow is None:
        return None
    gradient = None if flow.gradient is None else flow.gradient.value
    discharge = None if flow.discharge is None else flow.discharge.value
    return Regional(gradient, discharge, flow.towards.value, flow.x, flow.y)


def _parameters(scenario: Scenario, places: Places) -> list[Parameter]:
    """Every value that is not known exactly and that levels can speak about, and the porosity."""
    a, flow = scenario.aquifer, scenario.beyond.flow
    line = {element.name: k for k, element in enumerate(places.lines)}
    area = {element.name: k for k, element in enumerate(places.areas)}
    well = {element.name: k for k, element in enumerate(places.wells)}
    found = [
        _parameter(a.conductivity, "conductivity", positive=True),
        _parameter(a.base, "base"),
        None if a.top is None else _parameter(a.top, "top"),
    ]
    for w in scenario.wells:
        found.append(_parameter(w.rate, "well", well[w.name], positive=True))
    for r in scenario.recharge:
        if r.name in area:
            found.append(_parameter(r.rate, "recharge", area[r.name], positive=True))
    for s in scenario.streams:
        found.append(_parameter(s.shift, "shift", line[s.name]))
        bed = _parameter(s.resistance, "bed", line[s.name], positive=True)
        # the setting holds the conductance width/resistance, the effective width that of the element
        found.append(None if bed is None else replace(bed, scale=places.lines[line[s.name]].width))  # type: ignore[union-attr]
        found.append(_parameter(s.starts_with, "starts_with", line[s.name], positive=True))
    for k in scenario.lakes:
        stage = _parameter(k.stage, "shift", line[k.name])
        found.append(None if stage is None else replace(stage, mean=0.0))
    if scenario.outline is not None:
        found.append(_parameter(scenario.outline.inflow, "inflow", line[OUTLINE]))
    if flow is not None:
        found += [
            _parameter(flow.gradient, "gradient", positive=True),
            _parameter(flow.discharge, "discharge", positive=True),
        ]
        found.append(_parameter(flow.towards, "towards"))
    found.append(_parameter(scenario.beyond.reference_head, "reference"))
    return [p for p in found if p is not None]


def _parameter(value: Value | None, target: Target, index: int = 0, *, positive: bool = False) -> Parameter | None:
    """The parameter of a value, None for one that is known exactly.

    A factor f means two chances in three between value/f and value f: sd of the logarithm ln f.
    """
    if value is None or value.kind == "known":
        return None
    sign = -1.0 if value.value < 0 else 1.0
    log = value.factor is not None or (positive and value.kind == "free" and value.value != 0.0)
    mean = float(np.log(abs(value.value))) if log else value.value
    sd = np.inf
    if value.kind == "estimate":
        sd = float(np.log(value.factor)) if value.factor is not None else float(value.sd or 0.0)
    return Parameter(value.path, target, index, log, mean, sd, value.unit, sign if log else 1.0)


def _readings(scenario: Scenario, places: Places, parameters: tuple[Parameter, ...]) -> Readings:
    used = [level for level in scenario.levels if level.left_out is None]
    line = {element.name: k for k, element in enumerate(places.lines)}
    streams = {s.name: s for s in scenario.streams}
    start, given, distance, above = [], [], [], []
    for g in scenario.gaugings:
        length = float(course(streams[g.stream]).length)
        reaches = reaches_above(streams, g.stream, g.at * length)
        distance.append(g.at * length)
        above.append(tuple((line[name], far) for name, far in reaches[1:]))
        feeding = {line[name]: streams[name].starts_with for name, _ in reaches}
        index = [k for k, p in enumerate(parameters) if p.target == "starts_with" and p.index in feeding]
        fitted = {parameters[k].index for k in index}
        start.append(tuple(index))
        given.append(sum(s.value for k, s in feeding.items() if s is not None and k not in fitted))
    return Readings(
        tuple(level.name for level in used),
        np.array([level.x for level in used]),
        np.array([level.y for level in used]),
        np.array([level.head for level in used]),
        np.array([level.sd for level in used]),
        tuple(level.datum for level in used),
        tuple(sorted(scenario.datum_sd.items())),
        tuple(g.name for g in scenario.gaugings),
        tuple(line[g.stream] for g in scenario.gaugings),
        tuple(distance),
        tuple(above),
        tuple(start),
        tuple(given),
        tuple(g.flow for g in scenario.gaugings),
        tuple(g.sd for g in scenario.gaugings),
    )
