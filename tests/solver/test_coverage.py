"""Whether the intervals of fitted values hold the truth as often as they say, in uneven ground that the fit ignores.

Truths come from finite elements with simulated conductivity; everything fitted is drawn from its prior. The fit
assumes the default unevenness (spread 0.5 within a factor of 2, patch 300 m within a factor of 3) whatever the ground
is, and estimates the scale of its errors.
"""

import numpy as np
import pytest
import uneven_island
from wellshed.solver.fit import fit
from wellshed.solver.state import flow_of

GROUNDS = [(0.3, 150.0), (0.3, 500.0), (0.7, 150.0), (0.7, 500.0)]


@pytest.fixture(scope="module")
def island():
    return uneven_island.make_island()


def study(island, spread, patch, seeds):
    """Share of truths inside the 90% intervals, parameter by parameter: the default's, and the ground's own model."""
    hits, own, scales = [], [], []
    for seed in seeds:
        theta, _, heads = uneven_island.draw_truth(island, spread, patch, seed)
        result = uneven_island.fit_island(island, heads, *uneven_island.DEFAULT)
        hits.append(uneven_island.covered(result, theta))
        scales.append(result.scale)
        own.append(
            uneven_island.covered(uneven_island.fit_island(island, heads, spread, patch, uneven_island.KNOWN), theta)
        )
    return np.mean(hits, axis=0), np.mean(own, axis=0), np.median(scales)


def test_in_even_ground_truth_and_model_are_one_field(island):
    """Otherwise the study would blame the ground for a difference between two programs."""
    for seed in (3, 4):
        theta, heads, _ = uneven_island.draw_truth(island, 0.0, 300.0, seed)
        flow = flow_of(island.places, uneven_island.model_at(island, theta).state)
        assert flow.head(island.x, island.y) == pytest.approx(heads, abs=5e-3)


def test_intervals_hold_the_truth_in_uneven_ground(island):
    """A small part of the study below: 16 truths of the roughest ground, 64 intervals, about 56 inside."""
    hits, independent = [], []
    for seed in range(16):
        theta, _, heads = uneven_island.draw_truth(island, 0.7, 500.0, seed)
        result = uneven_island.fit_island(island, heads, *uneven_island.DEFAULT)
        hits.append(uneven_island.covered(result, theta))
        plain = fit(
            island.system, island.inputs, island.parameters, uneven_island.readings_of(island, heads),
            np.zeros_like(island.unit),
        )  # fmt: skip
        independent.append(uneven_island.covered(plain, theta))
    assert 0.75 <= np.mean(hits) <= 0.98
    # the same readings with independent errors: too sure of themselves, although their scale is estimated
    assert np.mean(independent) < np.mean(hits) - 0.05


@pytest.mark.thorough
@pytest.mark.timeout(3600)
@pytest.mark.parametrize(("spread", "patch"), GROUNDS)
def test_coverage_of_ninety_percent_intervals(island, spread, patch):
    """200 truths a ground; the Monte Carlo error of one share has an sd of 2 points."""
    first = 1000 * (1 + GROUNDS.index((spread, patch)))
    default, own, scale = study(island, spread, patch, range(first, first + 200))
    names = [p.name for p in island.parameters]
    print(f"\nspread {spread} patch {patch:.0f} m, median scale {scale:.2f}; share of truths in 90% intervals:")
    for kind, shares in (("default model", default), ("the ground's own", own)):
        listed = ", ".join(f"{n} {s:.3f}" for n, s in zip(names, shares, strict=True))
        print(f"  {kind:17s} {listed}; mean {shares.mean():.3f}", flush=True)
    assert np.all((default >= 0.85) & (default <= 0.95))
    assert 0.85 <= own.mean() <= 0.95
