"""The flow field: recharge polygons, vortex chains, wells, and what must hold of any superposition."""

import pickle

import mpmath as mp
import numba
import numpy as np
import pytest
from wellshed.elements.aquifer import Aquifer
from wellshed.elements.field_arrays import make_panels
from wellshed.elements.flow_field import superpose
from wellshed.elements.kernels_line import N_COEF
from wellshed.elements.recharge import RechargeArea
from wellshed.elements.regional_flow import RegionalFlow
from wellshed.elements.well import PumpingWell

AQUIFER = Aquifer(10.0, 0.0)
SQUARE = ([0, 1, 1, 0], [0, 0, 1, 1])
ELL = ([0, 300, 300, 120, 120, 0], [0, 0, 100, 100, 260, 260])
STAR = ([0, 4, 6, 5, 9, 4, 1, -3], [0, 1, -3, 4, 6, 5, 9, 3])
HOLE = ([1.0, 3.0, 2.5], [1.5, 2.0, 3.5])


def recharge_field(ring, rate=1.0, holes=(), **more):
    xy = [np.array(c, dtype=float) for c in ring]
    inner = tuple(tuple(np.array(c, dtype=float) for c in hole) for hole in holes)
    return superpose(AQUIFER, areas=[RechargeArea("rain", *xy, rate, inner)], **more)


# ---------------------------------------------------------------------------------------------------- recharge


@pytest.mark.parametrize(
    ("ring", "rate", "x", "y", "values"),
    [
        # checks 9c and 9d: Phi = -(N/2 pi) iint ln r dA, derived, confirmed by quadrature over slabs
        (SQUARE, 1, 0.3, 0.4, (0.1564283708, -0.1004277891, -0.04766538787)),
        (SQUARE, 1, 2, -0.5, (-0.09375017975, 0.07359320904, -0.04894192866)),
        (SQUARE, 1, 0.5, 0, (0.1031313584, 0, -0.2756586173)),
        (SQUARE, 1, 0, 0, (0.0585735146, -0.1801589, -0.1801589)),
        (ELL, 0.001, 60, 60, (-35.77581091, -0.02051089577, -0.01920333097)),
        (ELL, 0.001, 200, 180, (-39.31407358, 0.02668833177, 0.02660923588)),
        (ELL, 0.001, 120, 180, (-36.99276052, 0.03379612932, 0.02724706771)),
        (ELL, 0.001, 120, 100, (-35.3745873, 0.01773638525, 0.01361836727)),
    ],
)
def test_published_polygon_recharge(ring, rate, x, y, values):
    field = recharge_field(ring, rate)
    got = (float(field.potential(x, y)), *(float(q) for q in field.discharge(x, y)))
    assert got == pytest.approx(values, rel=1e-9, abs=1e-13)


def by_contour(ring, x, y):
    """iint ln r dA and its gradient's integrals by mpmath, over edges, without the kernel's primitive.

    iint ln r dA = contour integral of (r^2 (2 ln r - 1)/4) dtheta, since int ln r r dr = r^2 (2 ln r - 1)/4;
    grad by contour integral of ln r times the normal. Both are integrated numerically along each edge.
    """
    total, gx, gy = mp.mpf(0), mp.mpf(0), mp.mpf(0)
    points = [mp.mpc(a - x, b - y) for a, b in zip(mp.matrix(ring[0]), mp.matrix(ring[1]), strict=True)]
    for a, b in zip(points, points[1:] + points[:1], strict=True):
        step = b - a
        foot = -mp.re(mp.conj(step) * a) / abs(step) ** 2
        breaks = sorted({mp.mpf(0), mp.mpf(1)} | ({foot} if 0 < foot < 1 else set()))
        turn = mp.im(mp.conj(a) * step)  # r^2 dtheta = turn ds

        def log_r(s, a=a, step=step):
            r = abs(a + s * step)
            return mp.log(r) if r else mp.mpf(0)

        mean_log = mp.quad(log_r, breaks)
        total += turn * (2 * mean_log - 1) / 4
        gx += mp.im(step) * mean_log  # outward normal times length: (dy, -dx)
        gy += -mp.re(step) * mean_log
    return total, gx, gy


@pytest.mark.parametrize("ring", [SQUARE, STAR], ids=["convex", "not convex"])
def test_polygons_against_quadrature_along_edges(ring):
    # inside, outside, on an edge, at corners, just off a corner, at the switch to the series, far
    spots = [(0.3, 0.4), (2.2, 2.9), (7.0, 1.0), (0.5, 1.0), (-4.0, -2.0), (ring[0][1], ring[1][1])]
    spots += [(ring[0][2], ring[1][2]), (ring[0][0] + 1e-7, ring[1][0] - 1e-8)]
    centre = 0.5 * (min(ring[0]) + max(ring[0])), 0.5 * (min(ring[1]) + max(ring[1]))
    radius = max(np.hypot(a - centre[0], b - centre[1]) for a, b in zip(*ring, strict=True))
    for far in (2.99, 3.01, 3.99, 4.01, 6.01, 10.01, 20.01, 100.1, 1000.1, 1e5):
        spots.append((centre[0] + far * radius * np.cos(far), centre[1] + far * radius * np.sin(far)))
    field = recharge_field(ring)
    with mp.workdps(30):
        for x, y in spots:
            total, gx, gy = by_contour(ring, x, y)
            exact = complex(-gx / (2 * mp.pi), -gy / (2 * mp.pi))
            assert float(field.potential(x, y)) == pytest.approx(float(-total / (2 * mp.pi)), rel=1e-12, abs=1e-12)
            qx, qy = field.discharge(x, y)
            assert abs(complex(qx, qy) - exact) < 1e-12 * max(1.0, abs(exact)), (x, y)


def test_rain_on_the_square_is_the_double_integral():
    # the area integral itself, not a contour form: iint ln r dA over x' and y'
    x, y = 1.7, -0.6
    with mp.workdps(20):
        exact = mp.quad(lambda a, b: mp.log(mp.hypot(a - x, b - y)), [0, 1], [0, 1])
    assert float(recharge_field(SQUARE).potential(x, y)) == pytest.approx(float(-exact / (2 * mp.pi)), rel=1e-12)


def test_a_hole_takes_its_recharge_away():
    x, y = np.random.default_rng(1).uniform(-20, 20, (2, 200))
    whole, hole = recharge_field(STAR), recharge_field(HOLE)
    holed = recharge_field(STAR, holes=(HOLE,))
    assert holed.potential(x, y) == pytest.approx(whole.potential(x, y) - hole.potential(x, y), abs=1e-11)
    for k in (0, 1):
        assert holed.discharge(x, y)[k] == pytest.approx(whole.discharge(x, y)[k] - hole.discharge(x, y)[k], abs=1e-12)
    assert holed.recharge([2.2, 3.5, 20], [2.4, 3.5, 20]) == pytest.approx([0, 1, 0])


def test_the_direction_of_a_ring_does_not_matter():
    x, y = np.random.default_rng(2).uniform(-20, 20, (2, 100))
    turned = [c[::-1] for c in STAR]
    assert recharge_field(turned).potential(x, y) == pytest.approx(recharge_field(STAR).potential(x, y), rel=1e-12)


@pytest.mark.parametrize("ring", [SQUARE, STAR])
def test_laplacian_of_the_potential_is_the_recharge(ring):
    field, h = recharge_field(ring), 1e-3
    for x, y, rain in ((0.4, 0.6, 1.0), (12.0, -7.0, 0.0)):
        at = field.potential(x + h * np.array([0, 1, -1, 0, 0]), y + h * np.array([0, 0, 0, 1, -1]))
        assert (at[1:].sum() - 4 * at[0]) / h**2 == pytest.approx(-rain, abs=1e-6)


def test_potential_and_flow_go_on_across_edges_and_the_switch_to_the_series():
    field = recharge_field(STAR)
    for x, y in ((2.0, 0.5), (6.0, -3.0), (3.0 + 3 * np.hypot(6, 6) * 1.0, 3.0)):
        for e in (1e-9, 1e-9j, -1e-9):
            a, b = field.potential(x, y), field.potential(x + np.real(e), y + np.imag(e))
            assert float(b) == pytest.approx(float(a), abs=1e-6)
            qa, qb = field.discharge(x, y), field.discharge(x + np.real(e), y + np.imag(e))
            assert [float(q) for q in qb] == pytest.approx([float(q) for q in qa], abs=1e-6)


# ------------------------------------------------------------------------------------------------ wells, vortices


def test_well_is_thiem_outside_and_flat_inside_its_screen():
    field = superpose(AQUIFER, wells=[PumpingWell("w", 3, -2, 450.0, 0.2)], scale=7.0)
    r = np.array([0.2, 1.0, 50.0, 1e5])
    assert field.potential(3 + r, -2) == pytest.approx(450 / (2 * np.pi) * np.log(r / 7.0), rel=1e-13)
    qx, qy = field.discharge(3 + 0.6 * r, -2 + 0.8 * r)
    assert np.hypot(qx, qy) == pytest.approx(450 / (2 * np.pi * r), rel=1e-12)
    assert qx == pytest.approx(-0.6 * 450 / (2 * np.pi * r), rel=1e-10)
    assert float(field.potential(3.1, -2)) == float(field.potential(3, -2)) == float(field.potential(3, -1.85))
    assert [float(q) for q in field.discharge(3, -2)] == [0.0, 0.0]


def vortex_ring():
    """Chain of vortex panels round a closed ring with strengths at random and no net circulation."""
    rng = np.random.default_rng(8)
    corners = np.array([0, 100, 130 + 60j, 70 + 40j, 30 + 120j])
    n = corners.size
    coef = np.zeros((n, N_COEF))
    coef[:, :6] = rng.normal(0, 1, (n, 6))
    ends = np.roll(corners, -1)
    length = abs(ends - corners)
    coef[-1, 0] = -np.sum(coef[:-1, 0] * length[:-1]) / length[-1]
    # a panel's doublet grows from nothing at its start to its circulation; the sum before it is carried along
    jump = np.concatenate([[0.0], np.cumsum(coef[:, 0] * length)[:-1]])
    kinds = np.array([1, 2, 3, 1, 2])
    panels = make_panels(corners, ends, kinds, np.ones(n, dtype=int), np.full(n, N_COEF))
    return superpose(AQUIFER, panels=panels, coef=coef, jump=jump), corners


def test_flow_of_a_vortex_ring_is_the_slope_of_its_potential():
    field, _ = vortex_ring()
    x, y = np.random.default_rng(9).uniform(-200, 300, (2, 300))
    h = 1e-4
    qx, qy = field.discharge(x, y)
    slope_x = (field.potential(x + h, y) - field.potential(x - h, y)) / (2 * h)
    slope_y = (field.potential(x, y + h) - field.potential(x, y - h)) / (2 * h)
    assert np.max(abs(qx + slope_x)) < 1e-6
    assert np.max(abs(qy + slope_y)) < 1e-6


def test_potential_of_a_vortex_ring_has_one_value_beyond_the_ends_of_its_panels():
    field, corners = vortex_ring()
    ends = np.roll(corners, -1)
    for z1, z2 in zip(corners, ends, strict=True):
        for t in (-0.7, -0.05, 1.1, 1.9, 6.0):
            z, side = z1 + t * (z2 - z1), 1e-7j * (z2 - z1) / abs(z2 - z1)
            a, b = z + side, z - side
            assert float(field.potential(a.real, a.imag)) == pytest.approx(
                float(field.potential(b.real, b.imag)), abs=1e-5
            )


def test_potential_of_a_vortex_ring_dies_away():
    field, _ = vortex_ring()
    assert abs(field.potential([1e7, -1e7, 0], [0, 1e3, 1e7])).max() < 1e-2


def test_sinks_obey_cauchy_and_riemann():
    # Qx = -dPhi/dx = -dPsi/dy and Qy = -dPhi/dy = dPsi/dx away from the cuts
    rng = np.random.default_rng(10)
    coef = rng.normal(0, 1, (4, N_COEF))
    z1 = np.array([0, 50 + 20j, 10 - 80j, -60 + 5j])
    z2 = z1 + np.array([30 + 10j, -5 + 40j, 25j, 20 - 20j])
    panels = make_panels(z1, z2, np.array([0, 1, 2, 3]), np.zeros(4, dtype=int), np.full(4, N_COEF))
    field = superpose(
        AQUIFER, panels=panels, coef=coef, wells=[PumpingWell("w", 20, 60, 30.0)], flow=RegionalFlow(0.3, -0.2)
    )
    x, y = rng.uniform(100, 300, 100), rng.uniform(-200, 200, 100)  # cuts run towards -x
    h = 1e-3
    qx, qy = field.discharge(x, y)
    for f, along_x, along_y in ((field.potential, -qx, -qy), (field.stream_function, qy, -qx)):
        assert (f(x + h, y) - f(x - h, y)) / (2 * h) == pytest.approx(along_x, abs=1e-6)
        assert (f(x, y + h) - f(x, y - h)) / (2 * h) == pytest.approx(along_y, abs=1e-6)


# ------------------------------------------------------------------------------------------------ superposition


def mixed(east=0.0, north=0.0):
    """Field with every sort of element, moved by an offset (m)."""
    rng = np.random.default_rng(11)
    z1 = np.array([0, 50 + 20j, 10 - 80j, -60 + 5j])
    z2 = z1 + np.array([30 + 10j, -5 + 40j, 25j, 20 - 20j])
    panels = make_panels(z1, z2, np.array([0, 1, 2, 3]), np.zeros(4, dtype=int), np.full(4, N_COEF))
    x, y = (np.array(c, dtype=float) for c in ELL)
    return superpose(
        AQUIFER,
        origin=(east, north),
        scale=100.0,
        constant=800.0,
        flow=RegionalFlow(0.3, -0.1, east + 5, north),
        wells=[PumpingWell("w", east + 20, north + 60, 30.0), PumpingWell("v", east - 70, north, -12.0)],
        areas=[RechargeArea("rain", x + east, y + north, 0.001)],
        panels=panels,
        coef=rng.normal(0, 0.1, (4, N_COEF)),
    )


def dyadic_points(n):
    return np.random.default_rng(12).integers(-(2**18), 2**18, (2, n)) / 2.0**10


def test_national_coordinates_lose_no_digits():
    x, y = dyadic_points(500)  # sums with the offset are exact
    near, moved = mixed(), mixed(5e5, 5e6)
    assert np.array_equal(near.potential(x, y), moved.potential(x + 5e5, y + 5e6))
    for a, b in zip(near.discharge(x, y), moved.discharge(x + 5e5, y + 5e6), strict=True):
        assert np.array_equal(a, b)


def test_the_flow_is_the_slope_of_the_potential():
    x, y = dyadic_points(300)
    field, h = mixed(), 2.0**-12
    qx, qy = field.discharge(x, y)
    assert np.max(abs((field.potential(x + h, y) - field.potential(x - h, y)) / (2 * h) + qx)) < 1e-5
    assert np.max(abs((field.potential(x, y + h) - field.potential(x, y - h)) / (2 * h) + qy)) < 1e-5


def test_velocity_is_the_flow_over_pores_and_depth():
    x, y = dyadic_points(50)
    field = mixed()
    qx, qy = field.discharge(x, y)
    depth = field.head(x, y) - AQUIFER.base
    vx, vy = field.velocity(x, y)
    assert vx == pytest.approx(qx / (0.25 * depth), rel=1e-12)
    assert vy == pytest.approx(qy / (0.25 * depth), rel=1e-12)


def test_number_of_threads_changes_no_bit():
    x, y = dyadic_points(2000)
    field, before = mixed(), numba.get_num_threads()
    found = []
    try:
        for n in (1, min(2, numba.config.NUMBA_NUM_THREADS)):
            numba.set_num_threads(n)
            found.append(np.stack([field.potential(x, y), *field.discharge(x, y)]))
    finally:
        numba.set_num_threads(before)
    assert np.array_equal(found[0], found[1])


def test_a_pickled_field_is_the_same_field():
    x, y = dyadic_points(50)
    field = mixed(5e5, 5e6)
    again = pickle.loads(pickle.dumps(field))
    assert np.array_equal(again.potential(x + 5e5, y + 5e6), field.potential(x + 5e5, y + 5e6))
    assert again.aquifer == field.aquifer


def test_shape_of_the_points_is_kept():
    field = mixed()
    assert field.potential(1.0, 2.0).shape == ()
    assert field.head(np.zeros((2, 3)), 1.0).shape == (2, 3)
    assert field.discharge(np.zeros((4, 1)), np.zeros(3))[1].shape == (4, 3)
    assert field.potential([], []).shape == (0,)


def test_no_stream_function_under_recharge():
    with pytest.raises(ValueError, match="no stream function"):
        mixed().stream_function(0.0, 0.0)
