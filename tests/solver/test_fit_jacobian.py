"""The analytic derivatives of all readings after every number that may be fitted, against central differences."""

from dataclasses import replace

import numpy as np
import pytest
from wellshed.elements.aquifer import Aquifer
from wellshed.elements.lake import LakeEdge
from wellshed.elements.outline import Outline
from wellshed.elements.recharge import RechargeArea
from wellshed.elements.stream import Stream
from wellshed.elements.well import PumpingWell
from wellshed.solver.boundary import solve_places
from wellshed.solver.fit import Readings, make_model
from wellshed.solver.inputs import Inputs, Parameter, Regional, solve_inputs
from wellshed.solver.setting import sort_elements

GRADIENT = Regional(0.002, None, 130.0, 650.0, 350.0)
DISCHARGE = Regional(None, 0.4, 130.0, 650.0, 350.0)
# stages are near 20 m: the second ground is full everywhere, the third in part
GROUNDS = {
    "water table": (Aquifer(9.0, 2.0), GRADIENT),
    "confined": (Aquifer(9.0, 2.0, 12.0), GRADIENT),
    "converting": (Aquifer(9.0, 2.0, 20.87), GRADIENT),
    "given discharge": (Aquifer(9.0, 2.0), DISCHARGE),
}
# name, target, index (lines by name), whether logarithmic, value, scale
VALUES = [
    ("K", "conductivity", 0, True, 9.0, 1.0),
    ("K plain", "conductivity", 0, False, 9.0, 1.0),
    ("base", "base", 0, False, 2.0, 1.0),
    ("pumped", "well", 0, True, 150.0, 1.0),
    ("injected", "well", 1, True, 60.0, -1.0),
    ("rain", "recharge", 0, True, 5e-4, 1.0),
    ("beck shift", "shift", "beck", False, 0.1, 1.0),
    ("leaky shift", "shift", "leaky", False, -0.1, 1.0),
    ("tarn shift", "shift", "tarn", False, 0.05, 1.0),
    ("bed", "bed", "leaky", True, 8.0, 4.0),
    ("bed plain", "bed", "leaky", False, 8.0, 4.0),
    ("inflow", "inflow", "scarp", False, 0.05, 1.0),
    ("reference", "reference", 0, False, 21.5, 1.0),
    ("towards", "towards", 0, False, 130.0, 1.0),
    ("spring", "starts_with", 0, True, 300.0, 1.0),
    ("porosity", "porosity", 0, False, 0.25, 1.0),
]  # fmt: skip
FLOW = {
    "water table": [
        ("gradient", "gradient", 0, True, 0.002, 1.0),
        ("gradient plain", "gradient", 0, False, 0.002, 1.0),
    ],
    "given discharge": [("discharge", "discharge", 0, True, 0.4, 1.0)],
}
STEP = {"conductivity": 1e-3, "towards": 0.05, "inflow": 1e-3}


def parameters_of(name, lines):
    rows = list(VALUES) + FLOW.get(name, FLOW["water table"])
    if GROUNDS[name][0].top is not None:
        rows.append(("top", "top", 0, False, GROUNDS[name][0].top, 1.0))
    out = []
    for label, target, index, log, value, scale in rows:
        index = lines.index(index) if isinstance(index, str) else index
        out.append(Parameter(label, target, index, log, np.log(value) if log else value, 1.0, "", scale))
    return tuple(out)


def build(name, reference=True):
    """System, inputs and model of a site with every kind of feature; gaugings on both streams."""
    aquifer, regional = GROUNDS[name]
    angle = 2 * np.pi * np.arange(7) / 7
    elements = [
        Stream("beck", [-300.0, 0, 250, 700], [420.0, 150, 60, -120], [21.0, 20.6, 20.2, 19.6]),
        Stream("leaky", [-350.0, 50, 500], [-250.0, -330, -300], [20.4, 20.0, 19.5], 4.0, 8.0),
        LakeEdge("tarn", 480 + 90 * np.cos(angle), 420 + 70 * np.sin(angle), 20.8),
        Outline("scarp", [-500.0, -420, -480], [-200.0, 100, 400], False, 0.05),
        RechargeArea("rain", [-550.0, 750, 750, -550], [-400.0, -400, 550, 550], 5e-4),
        PumpingWell("pumped", -120.0, -80.0, 150.0, 0.2),
        PumpingWell("injected", 300.0, 250.0, -60.0, 0.2),
    ]
    places, setting = sort_elements(aquifer, elements, ((650.0, 500.0), 21.5) if reference else None)
    lines = [line.name for line in places.lines]
    if not reference:
        regional = None
    inputs = Inputs(setting, regional)
    solution = solve_places(places, setting, tolerance=1e-3)
    inputs = Inputs(solve_inputs(solution.state.system, inputs).state.setting, regional)
    solution = solve_places(places, inputs.setting, tolerance=1e-3)
    parameters = parameters_of(name, lines)
    x, y = np.array([-200.0, 100, 620, 150, -60, 350]), np.array([250.0, -150, 300, 300, -40, -250])
    spring = [p.target for p in parameters].index("starts_with")
    readings = Readings(
        tuple("ABCDEF"), x, y, np.full(6, 20.0), np.full(6, 0.1), (None,) * 6,
        gauging_names=("g1", "g2"),
        gauging_line=(lines.index("beck"), lines.index("leaky")),
        gauging_distance=(600.0, 500.0),
        gauging_start=((), (spring,)),
        gauging_given=(40.0, 0.0),
        gauging_flow=(100.0, 300.0),
        gauging_sd=(10.0, 10.0),
    )  # fmt: skip
    return solution.state.system, inputs, parameters, readings


def central(model, theta, k, near):
    """Derivative of all readings after parameter k."""
    p = model.parameters[k]
    step = STEP.get(p.target, 1e-3) * (max(abs(theta[k]), 1.0) if p.target not in STEP else 1.0)
    if not p.log and p.target in ("gradient", "bed"):
        step = 1e-3 * theta[k]
    ends = []
    for sign in (1, -1):
        moved = theta.copy()
        moved[k] += sign * step
        ends.append(model.at(moved, near)[1])
    return (ends[0] - ends[1]) / (2 * step)


def compare(model, theta):
    solved, _ = model.at(theta, None)
    found = model.jacobian(solved, theta)
    for k, p in enumerate(model.parameters):
        expected = central(model, theta, k, solved)
        for part in (slice(0, 6), slice(6, None)):  # heads (m) and flows (m3/d) have their own sizes
            size = abs(expected[part]).max()
            assert found[part, k] == pytest.approx(expected[part], rel=3e-4, abs=3e-4 * size + 1e-9), p.name


@pytest.mark.parametrize("name", GROUNDS)
def test_jacobian_against_central_differences(name):
    system, inputs, parameters, readings = build(name)
    plain = [p for p in parameters if "plain" in p.name]  # the same numbers as others, not as logarithms
    rest = [p for p in parameters if p not in plain]
    spring = [p.target for p in rest].index("starts_with")
    model = make_model(system, inputs, rest, replace(readings, gauging_start=((), (spring,))))
    theta = np.array([p.mean for p in rest])
    compare(model, theta)
    full = model.at(theta, None)[1][:6] > GROUNDS[name][0].base + GROUNDS[name][0].thickness
    assert full.any() == (name in ("confined", "converting"))
    assert full.all() == (name == "confined")
    model = make_model(system, inputs, plain, replace(readings, gauging_start=((), ())))
    compare(model, np.array([p.mean for p in plain]))


def test_jacobian_with_no_net_exchange():
    system, inputs, parameters, readings = build("water table", reference=False)
    kept = [p for p in parameters if p.target not in ("gradient", "towards", "reference") and "plain" not in p.name]
    spring = [p.target for p in kept].index("starts_with")
    model = make_model(system, inputs, kept, replace(readings, gauging_start=((), (spring,))))
    compare(model, np.array([p.mean for p in kept]))


def test_unknown_to_levels_means_no_derivative():
    system, inputs, parameters, readings = build("water table")
    model = make_model(system, inputs, parameters, readings)
    theta = np.array([p.mean for p in parameters])
    found = model.jacobian(model.at(theta, None)[0], theta)
    column = {p.name: found[:, k] for k, p in enumerate(parameters)}
    assert not column["porosity"].any()
    assert not column["spring"][:7].any()  # only the gauging below the spring knows it
    assert column["spring"][7] == pytest.approx(300.0)  # per logarithm
