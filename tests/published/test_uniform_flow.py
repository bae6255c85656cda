"""One well in uniform flow: capture zone, stagnation point, heads, travel times and isochrones (checks 1 and 2)."""

import numpy as np
import pytest
import shapely
from scipy.optimize import brentq
from wellshed.elements.aquifer import Aquifer
from wellshed.elements.flow_field import superpose
from wellshed.elements.regional_flow import RegionalFlow
from wellshed.elements.well import PumpingWell
from wellshed.solver.boundary import solve
from wellshed.tracing.obstacles import make_obstacles
from wellshed.tracing.pathlines import trace
from wellshed.tracing.stagnation import stagnation_points
from wellshed.tracing.zones import capture_zone

# Todd 1980; Grubb 1993 (checks 1a): K = 12.5, b = 18, i = 0.0032, Q = 450
K, B, SLOPE, RATE, PORES = 12.5, 18.0, 0.0032, 450.0, 0.22
FLOW = K * B * SLOPE
STAGNATION = RATE / (2 * np.pi * FLOW)
BOX = (-6000.0, 6000.0, -3000.0, 3000.0)


@pytest.fixture(scope="module")
def confined():
    """Water flows towards -x: x grows upgradient, as in the formulas."""
    aquifer = Aquifer(K, 0.0, B, PORES)
    return superpose(
        aquifer, scale=100.0, constant=1e5, flow=RegionalFlow(-FLOW, 0.0), wells=[PumpingWell("w", 0, 0, RATE)]
    )


@pytest.fixture(scope="module")
def zone(confined):
    clip = shapely.box(*np.array(BOX)[[0, 2, 1, 3]])
    return capture_zone(confined, 0, make_obstacles([], BOX), times=(365.0,), clip=clip)


def test_the_figures_of_the_formulas():
    assert pytest.approx(0.72, rel=1e-12) == FLOW
    assert pytest.approx(99.47183943, rel=1e-9) == STAGNATION
    assert pytest.approx(625, rel=1e-9) == RATE / FLOW


def test_stagnation_point(confined):
    found = stagnation_points(confined, make_obstacles([], BOX))
    assert [p.kind for p in found] == ["saddle"]
    assert (found[0].x, found[0].y) == pytest.approx((-99.47183943, 0.0), abs=1e-5)


@pytest.mark.parametrize(
    ("y", "x"), [(100, -63.46192975), (156.25, 0.0), (250, 344.0954801)], ids=["below", "beside", "above the well"]
)
def test_dividing_line_of_the_traced_zone(zone, x, y):
    # x = -y / tan(2 pi q y / Q); both sides; 1e-3 of the far width, since the border runs by chords
    for side in (1, -1):
        assert zone.polygon.boundary.distance(shapely.Point(x, side * y)) < 1e-3 * 625


def test_width_of_the_traced_zone(zone):
    for x, half in ((0.0, 312.5 / 2), (200.0, 227.8986763)):
        cut = zone.polygon.intersection(shapely.LineString([(x, -2000), (x, 2000)]))
        assert cut.length == pytest.approx(2 * half, rel=3e-3)


def test_all_the_water_comes_from_beyond(zone):
    assert zone.open
    assert zone.supply["beyond the map"] == pytest.approx(1.0, abs=1e-3)


def test_unconfined_zone_is_that_of_its_uniform_flow():
    # Grubb 1993 (checks 1d): q = K (h1^2 - h2^2) / (2 L)
    q = 22 * (16.4**2 - 14.9**2) / (2 * 620)
    assert q == pytest.approx(0.832983871, rel=1e-9)
    field = superpose(
        Aquifer(22, 0.0), scale=100.0, constant=1e5, flow=RegionalFlow(-q, 0.0), wells=[PumpingWell("w", 0, 0, 380.0)]
    )
    obstacles = make_obstacles([], (-2000, 4000, -1500, 1500))
    saddle = stagnation_points(field, obstacles)[0]
    assert (saddle.x, saddle.y) == pytest.approx((-72.60510135, 0), abs=1e-5)
    border = capture_zone(field, 0, obstacles).polygon.boundary
    for x, y in ((0.0, 228.095653 / 2), (9.859710113, 120.0)):
        assert border.distance(shapely.Point(x, y)) < 1e-3 * 456.191306
        assert border.distance(shapely.Point(x, -y)) < 1e-3 * 456.191306


def test_unconfined_heads_from_a_reference_head():
    # Phi = K h^2/2 = -q x + (Q/2 pi) ln r + C (Strack 1989; Grubb 1993; checks 1f)
    solution = solve(
        Aquifer(22, 0.0), [RegionalFlow(0.8, 0.0), PumpingWell("w", 0, 0, 380.0)], reference=((-500, 300), 16.0)
    )
    assert solution.boundary.met
    heads = solution.flow.head([-10, 50, 200, -500], [0, 0, -100, 300])
    assert heads == pytest.approx([14.07159315, 14.23007082, 14.13581311, 16], rel=1e-9)


@pytest.mark.parametrize(
    ("x", "days"), [(100, 169.3320453), (500, 1767.321748), (2000, 9331.597057), (-50, 107.1300602)]
)
def test_travel_time_along_the_axis(confined, x, days):
    # t = (nB/q) (x - x_s ln(1 + x/x_s)) (Bear and Jacobs 1965; checks 2a)
    formula = PORES * B / FLOW * (x - STAGNATION * np.log1p(x / STAGNATION))
    assert formula == pytest.approx(days, rel=1e-9)
    path = trace(confined, [x], [0.0], lines=make_obstacles([], BOX))
    assert path.reached(0) == "reached a well"
    assert path.points[0][-1, 2] == pytest.approx(days, rel=1e-4)


def isochrone_time(x, y):
    """T = X - ln(cos Y + X sin Y / Y), in the scaled lengths of Bear and Jacobs 1965 (checks 2e)."""
    return x - np.log(np.cos(y) + x * np.sinc(y / np.pi))


@pytest.mark.parametrize(
    ("x", "y", "time"), [(1.3, 0.8, 0.6781284603), (4, -2.5, 5.85526291), (-0.8, 0.1, 0.8279235636)]
)
def test_travel_time_off_the_axis(confined, x, y, time):
    assert isochrone_time(x, y) == pytest.approx(time, rel=1e-9)
    path = trace(confined, [x * STAGNATION], [y * STAGNATION], lines=make_obstacles([], BOX))
    days = time * PORES * B * RATE / (2 * np.pi * FLOW**2)
    assert path.reached(0) == "reached a well"
    assert path.points[0][-1, 2] == pytest.approx(days, rel=1e-4)


def test_water_outside_the_zone_passes(confined):
    path = trace(confined, [9 * STAGNATION], [2.9 * STAGNATION], lines=make_obstacles([], BOX))  # T is infinite
    assert path.reached(0) == "left the area"


def test_time_zone_of_a_year(zone):
    # checks 2g and 2i: area Q t / (nB) by continuity; ends of the isochrone by root finding
    t = 2 * np.pi * FLOW**2 * 365 / (PORES * B * RATE)
    assert t == pytest.approx(0.6671600399, rel=1e-9)
    year = zone.times[0]
    assert year.area == pytest.approx(41477.27273, rel=1e-2)
    up = STAGNATION * brentq(lambda x: isochrone_time(x, 1e-9) - t, 0.5, 5)
    down = STAGNATION * brentq(lambda x: isochrone_time(x, 1e-9) - t, -0.999, -0.1)
    assert (down, up) == pytest.approx((-75.59997013, 162.8036647), rel=1e-8)
    x0, y0, x1, y1 = year.polygon.bounds
    assert (x0, x1) == pytest.approx((down, up), rel=1e-3)
    assert (y0, y1) == pytest.approx((-110.6980773, 110.6980773), rel=1e-3)


def test_area_of_the_time_zone_to_a_thousandth(zone):
    assert zone.times[0].area == pytest.approx(41477.27273, rel=1e-3)


@pytest.mark.parametrize(
    ("half_distance", "places"),
    [
        (40, [(18.20229586, 0), (87.90099953, 0)]),
        (90, [(53.0516477, -72.70160023), (53.0516477, 72.70160023)]),
    ],
)
def test_stagnation_points_of_two_wells(half_distance, places):
    # roots of q = sum Q_j / (2 pi (z - i y_j)), derived here (checks 3c, 3d)
    wells = [PumpingWell(str(y), 0, y, 200.0) for y in (-half_distance, half_distance)]
    field = superpose(Aquifer(K, 0.0, B), scale=100.0, constant=1e5, flow=RegionalFlow(0.6, 0.0), wells=wells)
    found = stagnation_points(field, make_obstacles([], (-500, 500, -500, 500)))
    got = [(p.x, p.y) for p in found]
    got = sorted(got, key=lambda p: (round(p[0], 3), p[1]))
    assert len(got) == 2
    for a, b in zip(got, places, strict=True):
        assert a == pytest.approx(b, abs=1e-5)
