"""What uneven ground does to levels: cell means, responses and covariance, against quadrature and finite elements."""

from dataclasses import replace

import fem
import numpy as np
import pytest
import scipy.integrate
import uneven_island
from wellshed.elements.lake import LakeEdge
from wellshed.solver.fit import make_model
from wellshed.solver.ground import Cells, cell_correlation, cell_responses, make_cells, make_ground

MEANS = uneven_island.MEANS
GRAIN = 150.0  # m: a patch that gives the island its finest cells


@pytest.fixture(scope="module")
def island():
    return uneven_island.make_island()


@pytest.fixture(scope="module")
def at_means(island):
    """State, cells of a fine grid and the responses of the levels there."""
    state = uneven_island.model_at(island, np.array([p.mean for p in island.parameters])).state
    cells = make_cells(island.places, island.x, island.y, GRAIN)
    return state, cells, cell_responses(island.places, state, island.x, island.y, cells)


def truth(island, conductivity):
    """Heads (k,) by finite elements at the prior means, in ground K = f(x, y) (m/d)."""
    site = replace(island.site, conductivity=conductivity, recharge=MEANS["rain"])
    site = replace(site, wells=(replace(site.wells[0], rate=MEANS["well"]),))
    return uneven_island.solve_on(island.mesh, site).head(island.x, island.y)


def square_grid(n, side):
    column, row = (a.ravel() for a in np.meshgrid(np.arange(n), np.arange(n)))
    return Cells(column * side, row * side, side, column, row)


@pytest.mark.parametrize("patch", [40.0, 100.0, 900.0])
def test_cell_correlation_against_adaptive_quadrature(patch):
    """The mean over two squares: correlation of their difference, weighted with the two triangles."""
    side = 50.0
    found = cell_correlation(square_grid(4, side), patch)

    def mean(i, j):
        def integrand(v, u):
            weight = (1 - abs(u) / side) * (1 - abs(v) / side) / side**2
            return weight * np.exp(-np.hypot(i * side + u, j * side + v) / patch)

        halves = [(-side, 0.0), (0.0, side)]
        parts = [scipy.integrate.dblquad(integrand, *a, *b, epsabs=1e-9)[0] for a in halves for b in halves]
        return sum(parts)

    for i, j in [(0, 0), (1, 0), (0, 1), (1, 1), (3, 2)]:
        assert found[0, i + 4 * j] == pytest.approx(mean(i, j), rel=2e-5)
    assert found == pytest.approx(found.T)
    assert np.linalg.eigvalsh(found).min() > 0


def test_cells_that_are_joined_have_the_mean_of_their_parts():
    """A square of four cells: the mean of the fine correlations is the coarse one."""
    fine, coarse = cell_correlation(square_grid(6, 25.0), 120.0), cell_correlation(square_grid(3, 50.0), 120.0)
    part = np.zeros((9, 36))
    for k in range(36):
        part[(k // 6) // 2 * 3 + (k % 6) // 2, k] = 0.25
    assert part @ fine @ part.T == pytest.approx(coarse, rel=2e-5)


def test_cells_lie_on_the_island_and_fill_it(island):
    cells = make_cells(island.places, island.x, island.y, GRAIN)
    ring = next(line for line in island.places.lines if isinstance(line, LakeEdge))
    x, y = ring.x, ring.y
    area = 0.5 * abs(np.sum(x * np.roll(y, -1) - y * np.roll(x, -1)))
    assert cells.x.size * cells.side**2 == pytest.approx(area, rel=0.02)
    coarse = make_cells(island.places, island.x, island.y, 1.0)
    assert coarse.x.size <= 2600  # a patch smaller than the site can carry


def test_a_change_everywhere_is_a_change_of_the_conductivity(island, at_means):
    """f = 1 in every cell: the derivative of the heads after ln K, known from the solve itself."""
    state, _, response = at_means
    readings = uneven_island.readings_of(island, np.full(island.x.size, 20.0))
    theta = np.array([p.mean for p in island.parameters])
    model = make_model(island.system, island.inputs, island.parameters, readings)
    solved, _ = model.at(theta, None)
    derivative = model.jacobian(solved, theta)[:, 0]
    assert response.sum(axis=1) == pytest.approx(derivative, rel=0.06, abs=0.005 * abs(derivative).max())
    assert solved.state.x == pytest.approx(state.x)


def test_a_well_or_a_vertex_in_the_middle_of_a_cell_is_no_singularity(island):
    """Discharges have no bound there, their means over a cell do: the answer may not hang on where the middles fall."""
    state = uneven_island.model_at(island, np.array([p.mean for p in island.parameters])).state
    cells = make_cells(island.places, island.x, island.y, 300.0)
    well = island.places.wells[0]
    responses = []
    for at, off in [((well.x, well.y), 0.0), ((well.x, well.y), 0.37), (tuple(uneven_island.BECK[0]), 0.0)]:
        nearest = np.argmin(np.hypot(cells.x - at[0], cells.y - at[1]))
        shift_x, shift_y = at[0] - cells.x[nearest], at[1] - cells.y[nearest] + off * cells.side
        moved = replace(cells, x=cells.x + shift_x, y=cells.y + shift_y)
        # near the rim cells leave or enter the island: a smooth bump that has faded there asks only the inner ones
        bump = np.exp(-((moved.x - 150.0) ** 2 + (moved.y - 100.0) ** 2) / (2 * 300.0**2))
        responses.append(cell_responses(island.places, state, island.x, island.y, moved) @ bump)
    size = np.sqrt(np.mean(responses[0] ** 2))
    for other in responses[1:]:
        assert np.sqrt(np.mean((other - responses[0]) ** 2)) < 0.2 * size


BUMPS = {
    "wave": lambda x, y: np.cos(x / 260.0 + 0.4) * np.cos(y / 220.0 - 0.7),
    "east": lambda x, y: np.tanh((x - 150.0) / 300.0),
    "patch round the well": lambda x, y: np.exp(-((x - 520.0) ** 2 + (y - 120.0) ** 2) / (2 * 160.0**2)),
}


@pytest.mark.parametrize("name", BUMPS)
def test_responses_to_a_given_change_of_the_ground(island, at_means, name):
    """J f against the difference of two finite-element fields with K exp(+-0.02 f)."""
    _, cells, response = at_means
    bump = BUMPS[name]
    up, down = (
        truth(island, lambda x, y, sign=sign: MEANS["conductivity"] * np.exp(sign * 0.02 * bump(x, y)))
        for sign in (1, -1)
    )
    expected = (up - down) / 0.04
    size = np.sqrt(np.mean(expected**2))
    error = response @ bump(cells.x, cells.y) - expected
    assert np.sqrt(np.mean(error**2)) < 0.05 * size
    assert abs(error).max() < 0.2 * size


def drawn(island, spread, patch, count):
    """Heads (count, k) of drawn grounds."""
    (x0, y0), (x1, y1) = uneven_island.RING.min(axis=0), uneven_island.RING.max(axis=0)
    box, k = (x0, x1, y0, y1), MEANS["conductivity"]
    return np.array([truth(island, fem.simulated_ground(box, k, spread, patch, 70_000 + i)) for i in range(count)])


def compare(island, state, spread, patch, count, share):
    """Drawn covariance against the stated one, both in units of the stated sds; ``share``: what may differ."""
    stated = spread**2 * make_ground(island.places, island.x, island.y, patch).covariance(
        island.places, state, island.x, island.y
    )
    found = np.cov(drawn(island, spread, patch, count).T)
    sd = np.sqrt(np.diag(stated))
    ratio = np.diag(found) / sd**2
    apart = (found - stated) / np.outer(sd, sd)
    print(f"\npatch {patch:.0f} m, {count} grounds: variance ratio {ratio.mean():.3f} ({ratio.min():.2f} to "
          f"{ratio.max():.2f}), rms difference of correlations {np.sqrt(np.mean(apart**2)):.3f}")  # fmt: skip
    assert ratio.mean() == pytest.approx(1.0, abs=share)
    assert np.sqrt(np.mean(apart**2)) < 1.5 * share
    return ratio


def test_covariance_of_a_few_drawn_grounds(island, at_means):
    """60 grounds: a variance is known to 18%, their mean over correlated levels to about 10%."""
    compare(island, at_means[0], 0.1, 300.0, 60, 0.25)


@pytest.mark.thorough
@pytest.mark.timeout(1200)
@pytest.mark.parametrize("patch", [150.0, 300.0, 500.0])
def test_covariance_of_many_drawn_grounds(island, at_means, patch):
    """600 grounds: a variance is known to 6%, a correlation to 0.04."""
    ratio = compare(island, at_means[0], 0.1, patch, 600, 0.08)
    # cells of a quarter patch (125 m) are coarse at 500 m: the worst level has 1.43 times the stated variance
    assert abs(ratio - 1).max() < (0.25 if patch < 400 else 0.5)
