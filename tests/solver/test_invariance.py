"""Answers do not depend on where the zero is, how the map is turned, in which unit lengths are, or on inner scales."""

from dataclasses import replace

import numpy as np
import pytest
from wellshed.elements.aquifer import Aquifer
from wellshed.elements.lake import LakeEdge
from wellshed.elements.recharge import RechargeArea
from wellshed.elements.stream import Stream
from wellshed.elements.well import PumpingWell
from wellshed.solver.boundary import solve, solve_places
from wellshed.solver.setting import sort_elements

FOOT = 0.3048
PLACES = np.array([[120.0, 330.0, 500.0, 250.0], [90.0, 210.0, 300.0, 400.0]])


def site(move=0.0, turn=1.0, unit=1.0):
    """Elements with z -> turn z unit + move (complex m), heads and all lengths in ``unit`` (m)."""

    def at(x, y):
        z = turn * (np.asarray(x, dtype=float) + 1j * np.asarray(y, dtype=float)) / unit + move
        return z.real, z.imag

    u = unit
    well = at(500, 250)
    elements = [
        LakeEdge("shore", *at([0, 600, 700, 350, -50], [0, -40, 380, 520, 300]), 20.0 / u, land_inside=True),
        Stream("brook", *at([90, 200, 300, 420], [60, 150, 260, 300]), np.array([20.9, 20.7, 20.5, 20.3]) / u),
        Stream("bed", *at([480, 330], [330, 420]), np.array([21.0, 20.9]) / u, 3.0 / u, 2.0),
        RechargeArea("rain", *at([-100, 800, 800, -100], [-100, -100, 600, 600]), 8e-4 / u),
        PumpingWell("well", float(well[0]), float(well[1]), 420.0 / u**3, 0.2 / u),
    ]
    return Aquifer(14.0 / u, 0.0, 30.0 / u), elements, at(*PLACES)


def answers(aquifer, elements, at, unit=1.0):
    places, setting = sort_elements(aquifer, elements, None)
    solution = solve_places(places, setting, tolerance=1e-3 / unit)
    flows = np.array([solution.feature_flow(n) for n in ("shore", "brook", "bed")])
    return solution, solution.flow.head(*at) * unit, flows * unit**3


BASE, HEADS, FLOWS = answers(*site())


def same_splitting(solution):
    """Whether the boundaries were cut at the very same shares of the same edges."""
    mine, base = solution.state.system.mesh, BASE.state.system.mesh
    return all(np.array_equal(getattr(mine, part), getattr(base, part)) for part in ("edge", "t1", "t2", "kind"))


@pytest.mark.parametrize("move", [5e5 + 5e6j, -324891.337 + 1128411.171j])
def test_map_coordinates_of_seven_digits_lose_nothing(move):
    solution, heads, flows = answers(*site(move))
    assert same_splitting(solution)
    assert heads == pytest.approx(HEADS, rel=1e-9)
    assert flows == pytest.approx(FLOWS, rel=1e-8)  # places of 1e6 m are themselves rounded to 1e-10 m


@pytest.mark.parametrize("angle", [30.0, 90.0, 211.0])
def test_a_turned_map_gives_the_same(angle):
    turn = np.exp(1j * np.radians(angle))
    solution, heads, flows = answers(*site(turn=turn))
    # the local zero is the middle of the box, which turns into another place: same splitting, other rounding
    assert same_splitting(solution)
    assert heads == pytest.approx(HEADS, rel=1e-9)
    assert flows == pytest.approx(FLOWS, rel=1e-9)
    qx, qy = solution.flow.discharge(*site(turn=turn)[2])
    base = np.array(BASE.flow.discharge(*PLACES))
    assert qx + 1j * qy == pytest.approx(turn * (base[0] + 1j * base[1]), rel=1e-7)


def test_feet_give_the_same():
    solution, heads, flows = answers(*site(unit=FOOT), unit=FOOT)
    assert same_splitting(solution)
    assert heads == pytest.approx(HEADS, rel=1e-9)
    assert flows == pytest.approx(FLOWS, rel=1e-9)


def test_the_length_inside_the_logarithms_does_not_matter():
    aquifer, elements, at = site()
    places, setting = sort_elements(aquifer, elements, None)
    other = solve_places(replace(places, scale=3.7 * places.scale), setting, tolerance=1e-3)
    assert other.flow.head(*at) == pytest.approx(HEADS, rel=1e-10)
    assert other.feature_flow("brook") == pytest.approx(FLOWS[1], rel=1e-8)


def test_the_order_of_elements_does_not_matter():
    aquifer, elements, at = site()
    other = solve(aquifer, elements[::-1])
    assert other.flow.head(*at) == pytest.approx(HEADS, rel=1e-9)
