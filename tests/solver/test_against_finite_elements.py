"""Closed sites against quadratic finite elements (tests/fem.py): heads to 3 mm, near stream tips 20 mm, flows 0.2%.

Every case is closed: an island in a lake of known head, or a basin with an impermeable rim, so that both see the same
problem and no far field enters.
"""

import sys
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest
import shapely
from wellshed.elements.aquifer import Aquifer
from wellshed.elements.lake import LakeEdge
from wellshed.elements.outline import Outline
from wellshed.elements.recharge import RechargeArea
from wellshed.elements.stream import Stream
from wellshed.elements.well import PumpingWell
from wellshed.solver.boundary import solve

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))
import fem

RING = np.array(
    [[0, 40], [210, -30], [480, 20], [620, 190], [540, 400], [300, 360], [150, 430], [-60, 250]], dtype=float
)
BROOK = np.array([[90, 90], [200, 150], [280, 130], [400, 240], [470, 230]], dtype=float)
TARN = np.array([[330, 60], [430, 70], [440, 140], [350, 130]], dtype=float)
PATCH = np.array([[250, 180], [420, 300], [300, 330], [180, 260], [230, 240]], dtype=float)


@dataclass(frozen=True)
class Case:
    """A site for both: shore None = impermeable rim."""

    shore: float | None = 21.0
    base: float = 2.0
    top: float | None = None
    wells: tuple = ()
    stream: tuple | None = None  # stages at the vertices
    bed: float | None = None  # conductance per length (m/d)
    tarn: float | None = None
    patch: float = 0.0
    rain: float = 6e-4


CASES = {
    "wells, water table": Case(wells=((150, 260, 320.0), (430, 180, -180.0))),
    "wells, confined": Case(wells=((150, 260, 320.0), (430, 180, -180.0)), top=12.0, rain=0.0),
    "a cone that falls below the top": Case(wells=((280, 240, 900.0),), top=19.5),
    "recharge patch": Case(patch=4e-3, wells=((150, 260, 200.0),)),
    "lake on an island": Case(tarn=20.2, wells=((150, 260, 320.0),)),
    "stream with free tips": Case(stream=(21.3, 21.0, 20.8, 20.3, 20.1), wells=((150, 300, 250.0),)),
    "stream with a bed, confined": Case(stream=(21.4, 21.0, 20.8, 20.2, 20.1), bed=1.7, top=9.0, rain=1e-3),
    "basin with a rim": Case(shore=None, stream=(21.3, 21.0, 20.8, 20.3, 20.1), wells=((150, 300, 120.0),), tarn=21.4),
}
K = 14.0


def ours(case: Case):
    elements = [RechargeArea("rain", [-100, 700, 700, -100], [-80, -80, 480, 480], case.rain)]
    if case.shore is None:
        elements.append(Outline("shore", *RING.T))
    else:
        elements.append(LakeEdge("shore", *RING.T, case.shore, land_inside=True))
    elements += [PumpingWell(f"w{k}", x, y, q, 0.5) for k, (x, y, q) in enumerate(case.wells)]
    if case.stream is not None:
        bed = {} if case.bed is None else {"width": 1.0, "resistance": 1.0 / case.bed}
        elements.append(Stream("brook", *BROOK.T, np.array(case.stream), **bed))
    if case.tarn is not None:
        elements.append(LakeEdge("tarn", *TARN.T, case.tarn))
    if case.patch:
        elements.append(RechargeArea("patch", *PATCH.T, case.patch))
    return solve(Aquifer(K, case.base, case.top), elements)


def theirs(case: Case):
    stream = () if case.stream is None else (fem.Stream("brook", BROOK, np.array(case.stream), case.bed),)
    site = fem.Site(
        RING, case.base, K, 10.0, case.top, case.shore, case.rain,
        patches=((PATCH, case.patch),) if case.patch else (),
        wells=tuple(fem.Well(f"w{k}", x, y, q) for k, (x, y, q) in enumerate(case.wells)),
        streams=stream,
        lakes=() if case.tarn is None else (fem.Lake("tarn", TARN, case.tarn),),
        tip=0.08,
    )  # fmt: skip
    return fem.solve(site)


@pytest.mark.parametrize("name", CASES)
def test_heads_and_feature_flows(name):
    case = CASES[name]
    solution, truth = ours(case), theirs(case)
    assert solution.boundary.met
    rng = np.random.default_rng(5)
    x, y = rng.uniform(-60, 620, 3000), rng.uniform(-30, 430, 3000)
    if case.stream is not None:  # and some round both tips
        r, a = rng.uniform(0.3, 5.0, (2, 60)), rng.uniform(0, 2 * np.pi, (2, 60))
        x = np.concatenate([x, (BROOK[[0, -1], :1] + r * np.cos(a)).ravel()])
        y = np.concatenate([y, (BROOK[[0, -1], 1:] + r * np.sin(a)).ravel()])
    head = truth.head(x, y)
    apart = np.full(x.size, np.inf)
    for wx, wy, _ in case.wells:
        apart = np.minimum(apart, np.hypot(x - wx, y - wy))
    keep = np.isfinite(head) & (apart > 2.0)
    assert keep.sum() > 1200
    difference = abs(solution.flow.head(x, y) - head)
    near_tip = np.zeros(x.size, dtype=bool)
    if case.stream is not None:
        for tip in (BROOK[0], BROOK[-1]):
            near_tip |= np.hypot(x - tip[0], y - tip[1]) < 5.0
    assert difference[keep & ~near_tip].max() < 3e-3
    assert (keep & near_tip).any() == (case.stream is not None)
    assert difference[keep & near_tip].max(initial=0.0) < 20e-3
    moved = sum(abs(q) for _, _, q in case.wells) + case.rain * shapely.Polygon(RING).area
    for feature, flow in truth.flows.items():
        assert solution.feature_flow(feature) == pytest.approx(flow, abs=2e-3 * max(abs(flow), 0.05 * moved)), feature
