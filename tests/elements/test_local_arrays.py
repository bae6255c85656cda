"""The tree of series gives what the sum over all elements gives, which is itself held to quadrature elsewhere."""

import numpy as np
import pytest
from wellshed.elements.aquifer import Aquifer
from wellshed.elements.field_arrays import make_panels
from wellshed.elements.flow_field import superpose
from wellshed.elements.kernels_line import N_COEF
from wellshed.elements.kernels_local import local_flows
from wellshed.elements.local_arrays import local_arrays
from wellshed.elements.recharge import RechargeArea
from wellshed.elements.regional_flow import RegionalFlow
from wellshed.elements.well import PumpingWell

BOX = (-600.0, 1400.0, -900.0, 700.0)  # m; some elements stand outside
TRUE_TO = 1e-12  # of the sum of what the single elements give: 3e-13 a far element, at the corners of a square
RECHARGE = 1e-3


def random_field(seed, n_panels=40):
    """Panels of every kind, sinks and vortices, wells, two recharge areas of which one has a hole and is not convex."""
    rng = np.random.default_rng(seed)
    z1 = rng.uniform(-900, 1600, n_panels) + 1j * rng.uniform(-900, 900, n_panels)
    z2 = z1 + rng.uniform(5, 400, n_panels) * np.exp(2j * np.pi * rng.random(n_panels))
    kind = rng.choice([0, 1, 2, 3], n_panels)
    n_coef = rng.integers(1, 9, n_panels)
    panels = make_panels(z1, z2, kind, rng.integers(0, 2, n_panels), n_coef)
    coef = np.zeros((n_panels, N_COEF))
    for p in range(n_panels):
        coef[p, : n_coef[p]] = rng.normal(size=n_coef[p])
    wells = [
        PumpingWell(f"w{k}", *rng.uniform(-500, 500, 2), rng.uniform(-900, 900), rng.choice([0.1, 5.0]))
        for k in range(4)
    ]
    turn = np.sort(rng.uniform(0, 2 * np.pi, 14))
    far = rng.uniform(250, 700, 14)
    ring = 300 + far * np.cos(turn), -100 + far * np.sin(turn)
    hole = (np.array([280.0, 380.0, 300.0]), np.array([-120.0, -90.0, -20.0]))
    square = np.array([-500.0, -300.0, -300.0, -500.0]), np.array([300.0, 300.0, 500.0, 500.0])
    areas = [
        RechargeArea("land", *ring, RECHARGE, (hole,)),
        RechargeArea("square", *square, -0.4 * RECHARGE),
    ]
    field = superpose(
        Aquifer(10.0, 0.0),
        scale=500.0,
        flow=RegionalFlow(0.3, -0.2),
        wells=wells,
        areas=areas,
        panels=panels,
        coef=coef,
    )
    corners = np.concatenate([np.stack(r, axis=1) for r in (ring, hole, square)])
    return field, panels, corners


def summed(field, x, y, deepest):
    out = np.empty((3, x.size))
    local_flows(x, y, local_arrays(field.arrays, BOX, deepest), *out)
    return out


def places(rng, panels, corners):
    """Anywhere in the box and beyond it, on edges and corners of recharge areas, next to panels and wells."""
    ends = panels.panel[:, :4]
    along = rng.random(len(ends))[:, None]
    beside = (
        ends[:, :2]
        + along * (ends[:, 2:] - ends[:, :2])
        + rng.normal(size=(len(ends), 2)) * 10.0 ** rng.uniform(-6, 1, (len(ends), 1))
    )
    edges = 0.5 * (corners + np.roll(corners, 1, axis=0))
    wide = rng.uniform((-1500, -1500), (2500, 1500), (400, 2))
    x, y = np.concatenate([wide, beside, corners, edges, edges + 1e-9]).T
    return np.ascontiguousarray(x), np.ascontiguousarray(y)


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize("deepest", [0, 3, 8])
def test_as_the_sum_over_all_elements(seed, deepest):
    field, panels, corners = random_field(seed)
    x, y = places(np.random.default_rng(seed), panels, corners)
    got = summed(field, x, y, deepest)
    size = np.abs(np.stack(field.discharge(x, y))).max(axis=0)
    typical = np.median(size)
    for found, true in zip(got[:2], field.discharge(x, y), strict=True):
        assert np.max(abs(found - true) / np.maximum(size, typical)) < TRUE_TO
    # on an edge itself half of its rate counts here, a full one or none by the rule of the polygon
    off_edge = np.arange(x.size) < 400 + len(panels.kind)
    assert np.max(abs(got[2] - field.recharge(x, y))[off_edge]) < 1e-12 * RECHARGE


def test_squares_pay_for_their_neighbourhood_alone():
    """In most of the box no element at all is near; the tree is what makes this so."""
    field, _, _ = random_field(1)
    tree = local_arrays(field.arrays, BOX, 8)
    leaves = np.flatnonzero(tree.child < 0)[1:]  # square 0 stands for the outside
    near = tree.part[leaves, 3] - tree.part[leaves, 0]
    area = tree.square[leaves, 2] ** 2
    assert np.sum(area * near) / area.sum() < 1.5
    assert np.isclose(2 * area.sum(), (BOX[1] - BOX[0]) ** 2, rtol=1e-12)  # half diagonals: side^2 = 2 half^2


def test_a_field_without_elements():
    field = superpose(Aquifer(10.0, 0.0), flow=RegionalFlow(0.3, -0.2))
    got = summed(field, np.array([0.0, 5000.0]), np.array([1.0, 2.0]), 5)
    assert np.allclose(got, [[0.3, 0.3], [-0.2, -0.2], [0.0, 0.0]], rtol=1e-14, atol=1e-16)
