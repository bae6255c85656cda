"""The island of the coverage study: a truth in uneven ground by finite elements, and the fit that does not know it."""

from dataclasses import dataclass, replace

import fem
import numpy as np
import shapely
from wellshed.elements.aquifer import Aquifer
from wellshed.elements.lake import LakeEdge
from wellshed.elements.recharge import RechargeArea
from wellshed.elements.stream import Stream
from wellshed.elements.well import PumpingWell
from wellshed.scenarios.fitting import PATCH_FACTOR, SPREAD_FACTOR
from wellshed.solver.boundary import solve_places
from wellshed.solver.fit import Readings, fit
from wellshed.solver.ground import make_ground
from wellshed.solver.inputs import Inputs, Parameter, Solved, solve_inputs, with_values
from wellshed.solver.setting import sort_elements

BASE, SHORE, READING = 4.0, 20.0, 0.05  # m
MEANS = {"conductivity": 6.0, "rain": 6e-4, "beck": 0.0, "well": 220.0}  # m/d, m/d, m, m3/d
SPREADS = {"conductivity": 0.7, "rain": 0.3, "beck": 0.2, "well": 0.25}  # of the logarithms; of the stage in m
LOG = {"conductivity", "rain", "well"}
# spread (-) and patch (m) that a scenario assumes when it says nothing, and the factors within which it trusts any
DEFAULT = (0.5, 300.0, (SPREAD_FACTOR, PATCH_FACTOR))
KNOWN = (1.0, 1.0)
RING = np.array(
    [[1200, 100], [1050, 560], [620, 830], [150, 960], [-420, 870], [-900, 640], [-1180, 180], [-1050, -330],
     [-640, -700], [-80, -900], [480, -760], [980, -420]], dtype=float,
)  # fmt: skip
BECK = np.array([[-250.0, 330.0], [-60.0, 20.0], [60.0, -420.0], [-80.0, -900.0]])
STAGES = np.array([21.6, 21.1, 20.5, SHORE])
WELL = (520.0, 120.0)


@dataclass(frozen=True)
class Island:
    """What the fit starts from and the truth shares: solved at the prior means, mesh of the truth, unit covariance."""

    system: object
    inputs: Inputs
    parameters: tuple[Parameter, ...]
    places: object
    x: np.ndarray
    y: np.ndarray
    site: fem.Site
    mesh: object
    unit: np.ndarray  # covariance of the levels for sd(ln K) = 1 at DEFAULT's patch, at the prior means


def levels(count: int) -> tuple[np.ndarray, np.ndarray]:
    """Irregular places on land, not at a bank nor at the well."""
    rng = np.random.default_rng(17)
    land = shapely.Polygon(RING).buffer(-60.0).difference(shapely.LineString(BECK).buffer(30.0))
    land = land.difference(shapely.Point(WELL).buffer(60.0))
    xy = rng.uniform(RING.min(axis=0), RING.max(axis=0), (40 * count, 2))
    xy = xy[shapely.contains_xy(land, xy[:, 0], xy[:, 1])]
    return xy[:count, 0], xy[:count, 1]


def make_island(count: int = 22, size: float = 45.0) -> Island:
    """The island with ``count`` levels; ``size``: largest edge (m) of the truth's mesh."""
    square = 1500.0 * np.array([[-1, -1], [1, -1], [1, 1], [-1, 1]])
    elements = [
        LakeEdge("shore", *RING.T, SHORE, land_inside=True),
        Stream("beck", *BECK.T, STAGES),
        RechargeArea("rain", *square.T, MEANS["rain"]),
        PumpingWell("well", *WELL, MEANS["well"], 0.3),
    ]
    places, setting = sort_elements(Aquifer(MEANS["conductivity"], BASE), elements, None)
    solution = solve_places(places, setting, tolerance=1e-3)
    beck = [line.name for line in places.lines].index("beck")
    kinds = {"conductivity": ("conductivity", 0), "rain": ("recharge", 0), "beck": ("shift", beck), "well": ("well", 0)}
    parameters = tuple(
        Parameter(n, *kinds[n], n in LOG, np.log(MEANS[n]) if n in LOG else MEANS[n], SPREADS[n], "") for n in MEANS
    )
    x, y = levels(count)
    unit = make_ground(places, x, y, DEFAULT[1]).covariance(places, solution.state, x, y)
    site = fem.Site(RING, BASE, MEANS["conductivity"], size, shore=SHORE, tip=3.0, slope=0.4)
    site = replace(site, streams=(fem.Stream("beck", BECK, STAGES),), wells=(fem.Well("well", *WELL, 0.0, 8.0),))
    return Island(solution.state.system, Inputs(setting), parameters, places, x, y, site, fem._mesh(site), unit)


def draw_truth(island: Island, spread: float, patch: float, seed: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Parameters (4,) drawn from their priors, true heads and readings (k,) of an island of that ground."""
    rng = np.random.default_rng([seed, 5])
    theta = np.array([rng.normal(p.mean, p.sd) for p in island.parameters])
    k, rain, shift, rate = (np.exp(t) if p.log else t for p, t in zip(island.parameters, theta, strict=True))
    (x0, y0), (x1, y1) = RING.min(axis=0), RING.max(axis=0)
    ground = fem.simulated_ground((x0, x1, y0, y1), k, spread, patch, seed)
    stages = STAGES + shift * np.array([1, 1, 1, 0])  # the mouth keeps the shore's level
    site = replace(island.site, conductivity=ground, recharge=rain)
    site = replace(site, streams=(replace(site.streams[0], stage=stages),))
    site = replace(site, wells=(replace(site.wells[0], rate=rate),))
    heads = solve_on(island.mesh, site).head(island.x, island.y)
    return theta, heads, heads + READING * rng.standard_normal(heads.size)


def solve_on(mesh: object, site: fem.Site) -> fem.Truth:
    """The truth of a site on a mesh made before: meshing costs more than solving."""
    made, fem._mesh = fem._mesh, lambda _: mesh
    try:
        return fem.solve(site)
    finally:
        fem._mesh = made


def readings_of(island: Island, heads: np.ndarray) -> Readings:
    """The levels as the fit takes them, all of one quality."""
    count = island.x.size
    names = tuple(f"P{i}" for i in range(count))
    return Readings(names, island.x, island.y, heads, np.full(count, READING), (None,) * count)


def model_at(island: Island, theta: np.ndarray) -> Solved:
    """The smooth model solved at parameters theta (4,)."""
    return solve_inputs(island.system, with_values(island.inputs, island.parameters, theta))


def fit_island(island: Island, heads: np.ndarray, spread: float, patch: float, factors: tuple[float, float]):
    """The fit as a scenario does it: ground weighed at the priors, then at the fitted field. Returns FitResult.

    factors: within which spread and patch are known; 1 = exactly.
    """
    readings = readings_of(island, heads)
    of_spread, of_patch = factors
    ground = make_ground(island.places, island.x, island.y, patch, of_patch)
    result, solved = None, model_at(island, np.array([p.mean for p in island.parameters]))
    for _ in range(2):
        unit = ground.covariance(island.places, solved.state, island.x, island.y)
        start = None if result is None else result.theta
        result = fit(
            island.system, island.inputs, island.parameters, readings, spread**2 * unit, ground_factor=of_spread,
            start=start,
        )  # fmt: skip
        solved = result.solved
    return result


def covered(result, theta: np.ndarray, share: float = 0.9) -> np.ndarray:
    """Whether the interval of each parameter holds its true value (p,)."""
    ends = np.array([result.interval(k, share) for k in range(theta.size)])
    value = np.array([np.exp(t) if p.log else t for p, t in zip(result.parameters, theta, strict=True)])
    return (ends[:, 0] <= value) & (value <= ends[:, 1])
