"""The boundary solve holds what it says: at random points of every panel, in flux, and where it must refuse."""

from dataclasses import replace

import numpy as np
import pytest
import shapely
from wellshed.elements.aquifer import Aquifer
from wellshed.elements.lake import LakeEdge
from wellshed.elements.outline import Outline
from wellshed.elements.recharge import RechargeArea
from wellshed.elements.regional_flow import RegionalFlow
from wellshed.elements.stream import Stream
from wellshed.elements.well import PumpingWell
from wellshed.solver.boundary import check_misfit, solve
from wellshed.solver.network import GeometryError
from wellshed.solver.state import NotSolvedError

AQUIFER = Aquifer(14.0, 0.0)
ISLAND = LakeEdge("shore", [0, 600, 700, 350, -50], [0, -40, 380, 520, 300], 20.0, land_inside=True)
TARN = LakeEdge("tarn", [380, 470, 480, 400], [60, 80, 160, 150], 20.4)
BROOK = Stream("brook", [90, 200, 300, 420], [60, 150, 260, 300], np.array([20.9, 20.7, 20.5, 20.3]))
RILL = Stream("rill", [420, 330, 200], [420, 360, 150], np.array([21.2, 20.9, 20.7]))  # ends on a vertex of the brook
INFLOW = Stream("inflow", [250, 330, 430], [20, 60, 110], np.array([20.9, 20.6, 20.4]))  # runs into the tarn
SLUGGISH = Stream("sluggish", BROOK.x, BROOK.y, BROOK.stage, 4.0, 2.0, 0.7)
RAIN = RechargeArea("rain", [-100, 800, 800, -100], [-100, -100, 600, 600], 8e-4)
WELL = PumpingWell("well", 500.0, 250.0, 420.0, 0.2)
RIM = ([-80, 760, 740, -60], [-90, -110, 590, 570])
REFERENCE = ((300.0, 900.0), 21.0)

SITES = {
    "island with corners": ([ISLAND, RAIN, WELL], None),
    "tarn on an island": ([ISLAND, TARN, RAIN, WELL], None),
    "brook with free tips": ([ISLAND, BROOK, RAIN, WELL], None),
    "rill ending on a brook": ([ISLAND, BROOK, RILL, RAIN], None),
    "stream clipped at a tarn": ([ISLAND, TARN, INFLOW, RAIN], None),
    "leaky bed with an underside": ([ISLAND, SLUGGISH, RAIN, WELL], None),
    "rim, impermeable": ([Outline("rim", *RIM), BROOK, TARN, RAIN, WELL], None),
    "rim with inflow": ([Outline("rim", *RIM, inflow=0.05), BROOK, TARN, RAIN, WELL], None),
    "open rim in regional flow": (
        [Outline("rim", [-80, 760], [-90, -110], closed=False), BROOK, WELL, RegionalFlow(0.05, 0.02)], REFERENCE,
    ),
    "open shore": ([LakeEdge("shore", [0, 0, 40], [-400, 0, 500], 20.0, closed=False), WELL], None),
}  # fmt: skip


@pytest.fixture(scope="module", params=SITES)
def solved(request):
    elements, reference = SITES[request.param]
    return solve(AQUIFER, elements, reference=reference), elements


def test_tolerance_is_met_at_random_points_and_next_to_every_end(solved):
    solution, _ = solved
    assert solution.boundary.met
    rng = np.random.default_rng(17)
    # the map u^2 or u^3 draws u towards the ends: these reach 1e-8 of a panel's length; nearer, a place on a line
    # has no digits left to tell the flow across it from that along it
    u = np.concatenate([rng.uniform(0, 1, 20), 0.01 ** np.arange(1, 3), 1.0 - 0.01 * rng.uniform(0, 1, 4)])
    _, misfit = check_misfit(solution.places, solution.state, np.sort(u))
    assert abs(misfit).max() <= solution.boundary.tolerance
    assert abs(misfit).max() <= solution.boundary.max_misfit  # what is reported bounds what is found


def test_tolerance_is_met_between_the_check_points_of_a_bed_with_an_underside():
    # where the leakage stops growing the misfit has a kink, which few random places hit
    solution = solve(AQUIFER, SITES["leaky bed with an underside"][0], tolerance=1e-4)
    assert solution.boundary.met
    _, misfit = check_misfit(solution.places, solution.state, np.linspace(5e-4, 1 - 5e-4, 1500))
    assert abs(misfit).max() <= solution.boundary.tolerance


def ring_flow(flow, x, y, n=400):
    """Water (m3/d) that leaves a closed polygon of places, by Gauss rule on its sides."""
    nodes, weights = np.polynomial.legendre.leggauss(n)
    total = 0.0
    for k in range(len(x)):
        x1, y1, x2, y2 = x[k - 1], y[k - 1], x[k], y[k]
        s = 0.5 * (nodes + 1)
        qx, qy = flow.discharge(x1 + s * (x2 - x1), y1 + s * (y2 - y1))
        total += float(np.sum(0.5 * weights * (qx * (y2 - y1) - qy * (x2 - x1))))
    return total


def round_line(line, gap):
    """A polygon round a line at a distance, counter-clockwise."""
    xy = np.stack([line.x, line.y], axis=1)
    course = shapely.Polygon(xy) if getattr(line, "closed", False) else shapely.LineString(xy)
    shape = course.buffer(gap, join_style="mitre", cap_style="square")
    xy = shapely.get_coordinates(shapely.geometry.polygon.orient(shape).exterior)[:-1]
    return xy[:, 0], xy[:, 1]


FLUXES = [
    ("brook with free tips", "brook"), ("leaky bed with an underside", "sluggish"), ("open shore", "shore"),
    ("open rim in regional flow", "brook"), ("tarn on an island", "tarn"), ("rim, impermeable", "tarn"),
]  # fmt: skip


@pytest.mark.parametrize(("site", "feature"), FLUXES)
def test_flux_of_a_feature_is_what_leaves_a_curve_round_it(site, feature):
    elements, reference = SITES[site]
    solution = solve(AQUIFER, elements, reference=reference)
    line = next(e for e in elements if getattr(e, "name", "") == feature)
    x, y = round_line(line, 12.0)
    ground = shapely.Polygon(np.stack([x, y], axis=1)).area
    if getattr(line, "closed", False):
        ground -= shapely.Polygon(np.stack([line.x, line.y], axis=1)).area
    rain = sum(e.rate for e in elements if isinstance(e, RechargeArea)) * ground
    expected = ring_flow(solution.flow, x, y) - rain
    assert solution.feature_flow(feature) == pytest.approx(expected, abs=2e-6 * (abs(expected) + rain + 1.0))


def test_a_brook_and_its_tributary_together_give_what_leaves_a_curve_round_both():
    elements, _ = SITES["rill ending on a brook"]
    solution = solve(AQUIFER, elements)
    both = shapely.union_all([shapely.LineString(np.stack([s.x, s.y], axis=1)) for s in (BROOK, RILL)])
    xy = shapely.get_coordinates(shapely.geometry.polygon.orient(both.buffer(10.0)).exterior)[:-1]
    rain = 8e-4 * both.buffer(10.0).area
    total = solution.feature_flow("brook") + solution.feature_flow("rill")
    assert total == pytest.approx(ring_flow(solution.flow, *xy.T, n=40) - rain, rel=1e-5)


def test_an_island_shore_takes_what_falls_less_what_is_pumped():
    solution = solve(AQUIFER, SITES["island with corners"][0])
    x, y = ISLAND.x, ISLAND.y
    middle = np.array([x.mean(), y.mean()])
    inside = middle[0] + 0.97 * (x - middle[0]), middle[1] + 0.97 * (y - middle[1])
    area = shapely.Polygon(np.stack(inside, axis=1)).area
    leaving = ring_flow(solution.flow, *inside)
    assert leaving == pytest.approx(8e-4 * area - 420.0, abs=1e-3)  # the field itself, by quadrature
    whole = shapely.Polygon(np.stack([x, y], axis=1)).area
    assert solution.feature_flow("shore") == pytest.approx(420.0 - 8e-4 * whole, rel=1e-9)


def test_inflow_along_a_rim_enters_the_balance():
    solution = solve(AQUIFER, SITES["rim with inflow"][0])
    length = float(np.hypot(*(np.roll(RIM, -1, axis=1) - np.array(RIM))).sum())
    assert solution.feature_flow("rim") == pytest.approx(0.05 * length, rel=1e-9)
    outside = sum(r.inflow - r.outflow for r in solution.balance)
    assert outside == pytest.approx(0.0, abs=1e-6)


def test_a_bed_leaks_no_more_than_its_underside_allows():
    # over deep ground the loss per length is (width / resistance) x depth of the underside, whatever the head below
    deep = LakeEdge("shore", 3 * ISLAND.x - 400, 3 * ISLAND.y - 400, 10.0, land_inside=True)
    solution = solve(AQUIFER, [deep, SLUGGISH])
    flush = solve(AQUIFER, [deep, replace(SLUGGISH, bottom=0.0)])  # the underside at the stage: nothing leaks
    assert flush.boundary.met
    assert flush.feature_flow("sluggish") == pytest.approx(0.0, abs=1e-6)
    length = float(np.hypot(np.diff(BROOK.x), np.diff(BROOK.y)).sum())
    assert solution.feature_flow("sluggish") == pytest.approx(4.0 / 2.0 * 0.7 * length, rel=1e-6)


def test_lines_that_cannot_stand_together_are_refused():
    twin = Stream("twin", BROOK.x, BROOK.y, BROOK.stage)
    crossing = Stream("crossing", [90, 300], [250, 100], np.array([25.0, 24.0]))
    for elements, words in (
        ([ISLAND, BROOK, twin], "twin"),
        ([ISLAND, BROOK, crossing], "crossing"),
        ([ISLAND, BROOK, PumpingWell("at", 200.0, 150.1, 10.0, 0.3)], "nearer than its radius"),
    ):
        with pytest.raises(GeometryError, match=words):
            solve(AQUIFER, [*elements, RAIN])


def test_what_fixes_no_field_is_not_solved():
    with pytest.raises(NotSolvedError, match="fixes the level"):
        solve(AQUIFER, [RAIN, WELL])
    with pytest.raises(NotSolvedError, match="base"):
        solve(Aquifer(14.0, 25.0), [ISLAND, RAIN])


def test_pumping_dry_shows_as_negative_potential():
    solution = solve(AQUIFER, [ISLAND, PumpingWell("thirsty", 300.0, 200.0, 9000.0, 0.2)])
    assert float(solution.flow.potential(301.0, 200.0)) < 0.0
    assert float(solution.flow.head(301.0, 200.0)) == 0.0  # the base
    assert solution.boundary.met
