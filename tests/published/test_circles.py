"""Circles: recharge area, island and lake, as polygons (checks 5 and 8).

An inscribed polygon of n corners lies inside its circle by (pi/n)^2/2 of the radius at most and has
2/3 (pi/n)^2 of the area less: 1.6e-6 and 3.2e-6 for the 1,440 corners of the recharge area. The boundary solve takes
180 corners whose radius is chosen so that the area agrees; what is left is of the order (pi/n)^2 / 3 = 1e-4.
"""

import numpy as np
import pytest
from wellshed.elements.aquifer import Aquifer
from wellshed.elements.flow_field import superpose
from wellshed.elements.lake import LakeEdge
from wellshed.elements.recharge import RechargeArea
from wellshed.elements.regional_flow import RegionalFlow
from wellshed.elements.well import PumpingWell
from wellshed.solver.boundary import solve

AQUIFER = Aquifer(10.0, 0.0, 20.0)  # confined: potential and head differ by a constant and a factor


def circle(radius, n, equal_area=True):
    angle = 2 * np.pi * np.arange(n) / n
    # area of the polygon n/2 r^2 sin(2 pi/n)
    r = radius * np.sqrt(2 * np.pi / n / np.sin(2 * np.pi / n)) if equal_area else radius
    return r * np.cos(angle), r * np.sin(angle)


@pytest.mark.parametrize(("r", "potential", "flow"), [(0, 6.25, 0.0), (20, 5.25, 0.1), (80, -5.875045366, 0.15625)])
def test_circular_recharge_area(r, potential, flow):
    # Phi = N (R^2 - r^2)/4 inside, -(N R^2/2) ln(r/R) outside (Strack 1989; Haitjema 1995; checks 8a)
    radius, rain = 50.0, 0.01
    exact = rain * (radius**2 - r**2) / 4 if r < radius else -rain * radius**2 / 2 * np.log(r / radius)
    assert exact == pytest.approx(potential, rel=1e-9)
    field = superpose(AQUIFER, areas=[RechargeArea("rain", *circle(radius, 1440, False), rain)], scale=radius)
    x, y = r * np.cos(0.7), r * np.sin(0.7)
    assert float(field.potential(x, y)) == pytest.approx(potential, rel=1e-5)
    qx, qy = field.discharge(x, y)
    assert float(qx * np.cos(0.7) + qy * np.sin(0.7)) == pytest.approx(flow, rel=1e-5, abs=1e-9)


@pytest.mark.parametrize(
    ("rate", "a", "places"),
    [
        (300.0, 0.0, {(100, 0): -16.84499981, (0, 400): 11.84568024}),
        (120.0, 250.0, {(0, 0): 49.26186399, (240, 10): -14.78036331, (-300, 200): 27.77204723}),
    ],
    ids=["well in the middle", "well off the middle"],
)
def test_island(rate, a, places):
    # Phi = N (R^2 - r^2)/4 + (Q/2 pi) ln(R|z - a|/|R^2 - a z|) (image in a circle, Strack 1989; checks 5a, 5b)
    radius, rain = 500.0, 0.001
    for (x, y), value in places.items():
        z = x + 1j * y
        image = np.log(radius * abs(z - a) / abs(radius**2 - a * z))
        assert rain * (radius**2 - abs(z) ** 2) / 4 + rate / (2 * np.pi) * image == pytest.approx(value, rel=1e-9)
    shore = circle(radius, 180)
    elements = [
        LakeEdge("sea", *shore, 30.0, land_inside=True),
        RechargeArea("rain", *shore, rain),
        PumpingWell("w", a, 0.0, rate),
    ]
    solution = solve(AQUIFER, elements, tolerance=1e-4)
    assert solution.boundary.met
    x, y = np.array(list(places), dtype=float).T
    above = solution.flow.potential(x, y) - float(AQUIFER.potential(30.0))
    scale = rain * radius**2 / 4
    assert above == pytest.approx(list(places.values()), abs=3e-4 * scale)
    # what does not go to the well reaches the sea
    assert solution.feature_flow("sea") == pytest.approx(rate - rain * np.pi * radius**2, rel=1e-6)


def test_well_that_draws_from_a_round_lake():
    # Phi = (Q/2 pi) ln(R|z - a|/(a|z - R^2/a|)), 0 on the shore (image in a circle; checks 8c)
    radius, rate, a = 40.0, 300.0, 100.0
    places = {(60, 0): -48.30038566, (100, 30): -95.77630161}
    for (x, y), value in places.items():
        z = x + 1j * y
        exact = rate / (2 * np.pi) * np.log(radius * abs(z - a) / (a * abs(z - radius**2 / a)))
        assert exact == pytest.approx(value, rel=1e-9)
    elements = [LakeEdge("lake", *circle(radius, 180), 30.0), PumpingWell("w", a, 0.0, rate)]
    solution = solve(AQUIFER, elements, tolerance=1e-4)
    x, y = np.array(list(places), dtype=float).T
    below = solution.flow.potential(x, y) - float(AQUIFER.potential(30.0))
    assert below == pytest.approx(list(places.values()), rel=3e-4)
    assert solution.feature_flow("lake") == pytest.approx(rate, rel=1e-9)


def test_round_lake_in_uniform_flow():
    # Phi = -q x (1 - R^2/r^2), through-flow 4 R q (image in a circle; checks 8e)
    radius, q = 40.0, 0.3
    elements = [LakeEdge("lake", *circle(radius, 180), 30.0), RegionalFlow(q, 0.0)]
    solution = solve(AQUIFER, elements, tolerance=1e-4)
    below = float(solution.flow.potential(80, 20)) - float(AQUIFER.potential(30.0))
    assert -q * 80 * (1 - radius**2 / (80**2 + 20**2)) == pytest.approx(-18.35294118, rel=1e-9)
    assert below == pytest.approx(-18.35294118, rel=3e-4)
    row = next(r for r in solution.balance if r.feature == "lake")
    assert row.inflow == pytest.approx(48, rel=1e-3)
    assert row.outflow == pytest.approx(48, rel=1e-3)
