"""The far field: no net exchange, or a held head with water from beyond as its own row of the balance."""

import numpy as np
import pytest
from wellshed.elements.aquifer import Aquifer
from wellshed.elements.lake import LakeEdge
from wellshed.elements.recharge import RechargeArea
from wellshed.elements.regional_flow import RegionalFlow
from wellshed.elements.well import PumpingWell
from wellshed.solver.balance import BEYOND
from wellshed.solver.boundary import solve

AQUIFER = Aquifer(14.0, 0.0, 12.0)
POND = LakeEdge("pond", [0, 120, 140, -20], [0, -20, 90, 110], 20.0)
WELL = PumpingWell("well", 300.0, 150.0, 250.0, 0.2)
REFERENCE = ((1500.0, 400.0), 21.0)


def from_afar(flow, radius=4000.0, n=1440):
    """Water (m3/d) that enters a big circle, by the trapezoidal rule (spectral on a circle)."""
    a = 2 * np.pi * np.arange(n) / n
    qx, qy = flow.discharge(radius * np.cos(a), radius * np.sin(a))
    return -float(np.mean(qx * np.cos(a) + qy * np.sin(a))) * 2 * np.pi * radius


def beyond(solution):
    row = next(r for r in solution.balance if r.feature == BEYOND)
    return row.inflow - row.outflow


def test_no_net_exchange_makes_the_lake_give_what_the_well_takes():
    solution = solve(AQUIFER, [POND, WELL, RechargeArea("rain", [200, 400, 300], [0, 0, 200], 1e-3)])
    assert beyond(solution) == 0.0
    assert solution.feature_flow("pond") == pytest.approx(250.0 - 1e-3 * 2e4, rel=1e-10)
    assert from_afar(solution.flow) == pytest.approx(0.0, abs=1e-6)


def test_a_held_head_brings_water_from_beyond_and_its_row_tells_how_much():
    solution = solve(AQUIFER, [POND, WELL, RegionalFlow(0.02, -0.01)], reference=REFERENCE)
    assert float(solution.flow.head(*REFERENCE[0])) == pytest.approx(21.0, abs=1e-9)
    assert abs(beyond(solution)) > 1.0
    assert beyond(solution) == pytest.approx(from_afar(solution.flow), abs=1e-6)
    assert sum(r.inflow - r.outflow for r in solution.balance) == pytest.approx(0.0, abs=1e-7)


def test_a_reference_alone_holds_a_well():
    # Thiem 1906: the head falls by Q/(2 pi T) ln(r_ref/r) below the reference
    solution = solve(AQUIFER, [WELL], reference=REFERENCE)
    away = np.hypot(1500.0 - 300.0, 400.0 - 150.0)
    drawdown = 250.0 / (2 * np.pi * 14.0 * 12.0) * np.log(away / 50.0)
    assert float(solution.flow.head(350.0, 150.0)) == pytest.approx(21.0 - drawdown, abs=1e-9)
    assert beyond(solution) == pytest.approx(250.0, rel=1e-12)


def test_a_farther_reference_at_the_computed_head_changes_nothing():
    first = solve(AQUIFER, [POND, WELL], reference=REFERENCE)
    far = (6000.0, -2500.0)
    second = solve(AQUIFER, [POND, WELL], reference=(far, float(first.flow.head(*far))))
    x, y = np.array([200.0, 500.0]), np.array([50.0, 300.0])
    assert second.flow.head(x, y) == pytest.approx(first.flow.head(x, y), abs=1e-9)
