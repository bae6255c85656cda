"""A well near a straight shore, a strip between two, and a leaky stream (checks 4, 6 and 11e)."""

import numpy as np
import pytest
from wellshed.elements.aquifer import Aquifer
from wellshed.elements.lake import LakeEdge
from wellshed.elements.outline import Outline
from wellshed.elements.recharge import RechargeArea
from wellshed.elements.regional_flow import RegionalFlow
from wellshed.elements.stream import Stream
from wellshed.elements.well import PumpingWell
from wellshed.solver.boundary import solve

CONFINED = Aquifer(10.0, 0.0, 20.0)


@pytest.mark.parametrize(("rate", "x", "y", "value"), [(60, 40, 0, 7.04394923), (300, 40, 25, -26.49491763)])
def test_well_near_a_straight_shore(rate, x, y, value):
    # Newsom and Wilson 1988 (checks 4a, 4b): the image well; a shore of half length l errs by 0.26 (d/l)^2
    d, q = 85.0, 0.42
    image = np.log(abs(complex(x - d, y)) / abs(complex(x + d, y)))
    assert q * x + rate / (2 * np.pi) * image == pytest.approx(value, rel=1e-9)
    half = 60 * d
    shore = LakeEdge("shore", [0, 0], [-half, half], 30.0, closed=False)
    # the uniform flow comes from beyond: on a finite shore it needs the exact potential of its far end
    solution = solve(CONFINED, [shore, PumpingWell("w", d, 0.0, rate)], tolerance=1e-4)
    drawn = float(solution.flow.potential(x, y)) - float(CONFINED.potential(30.0))
    assert drawn == pytest.approx(rate / (2 * np.pi) * image, rel=3e-4)
    assert solution.feature_flow("shore") == pytest.approx(rate, rel=1e-9)


def strip(length, width, left, right, elements, aquifer, tolerance=1e-4):
    """Heads left and right, impermeable sides above and below: flow along x alone."""
    shores = [
        LakeEdge("left", [0, 0], [0, width], left, closed=False),
        LakeEdge("right", [length, length], [0, width], right, closed=False),
    ]
    sides = [
        Outline("south", [0, length], [0, 0], closed=False),
        Outline("north", [length, 0], [width, width], closed=False),
    ]
    return solve(aquifer, [*shores, *sides, *elements], tolerance=tolerance)


def test_strip_between_two_canals():
    # h^2 = h1^2 - (h1^2 - h2^2) x/L + (N/K)(L - x) x (Fetter, Applied Hydrogeology, from memory; checks 6a; feet)
    length, h1, h2, rain, k = 1500.0, 31.0, 27.0, 0.5 / 365, 1.2
    x = np.array([500.0, 682.256])
    h = np.sqrt(h1**2 - (h1**2 - h2**2) * x / length + rain / k * (length - x) * x)
    assert h == pytest.approx([38.13715934, 38.63110349], rel=1e-9)
    width = 300.0
    ring = [0, length, length, 0], [0, 0, width, width]
    solution = strip(length, width, h1, h2, [RechargeArea("rain", *ring, rain)], Aquifer(k, 0.0))
    assert solution.flow.head(x, [100.0, 200.0]) == pytest.approx(h, abs=2e-3)
    # the shores exchange water with the ground beyond them too: the flow inside is read from the field
    flow = k * (h1**2 - h2**2) / (2 * length) - rain * (length / 2 - x)
    assert solution.flow.discharge(x, [100.0, 200.0])[0] == pytest.approx(flow, abs=1e-3)
    assert flow[1] == pytest.approx(0.0, abs=1e-6)  # the divide
    ends = solution.flow.discharge([1.0, length - 1.0], [150.0, 150.0])[0]
    assert ends == pytest.approx([-0.9345972603 + rain, 1.12019726 - rain], abs=1e-3)


def test_leaky_stream_between_fixed_heads():
    # h0 = (T h1/L1 + T h2/L2 + w hs/c)/(T/L1 + T/L2 + w/c), gain = (w/c)(h0 - hs) (derived here; checks 11e)
    t, l1, h1, l2, h2, hs, w, c = 200.0, 300.0, 52.0, 500.0, 49.0, 48.5, 6.0, 4.0
    h0 = (t * h1 / l1 + t * h2 / l2 + w * hs / c) / (t / l1 + t / l2 + w / c)
    assert (h0, w / c * (h0 - hs)) == pytest.approx((49.48701299, 1.480519481), rel=1e-9)
    width = 200.0
    stream = Stream("brook", [l1, l1], [0, width], hs, width=w, resistance=c)
    solution = strip(l1 + l2, width, h1, h2, [stream], CONFINED)
    assert float(solution.flow.head(l1, 0.4 * width)) == pytest.approx(h0, abs=1e-3)
    assert -solution.feature_flow("brook") / width == pytest.approx(1.480519481, rel=2e-3)


def test_no_lines_and_no_level_is_refused_in_words():
    with pytest.raises(ArithmeticError, match="no lake, stream or reference head"):
        solve(CONFINED, [RegionalFlow(0.1, 0.0), PumpingWell("w", 0, 0, 10.0)])
