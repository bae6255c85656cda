"""Contour interval and lines (checks 12a and 12b; common practice, no source)."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from wellshed.elements.aquifer import Aquifer
from wellshed.elements.lake import LakeEdge
from wellshed.elements.recharge import RechargeArea
from wellshed.elements.well import PumpingWell
from wellshed.scenarios.contours import contour_interval, contour_levels, contour_lines
from wellshed.solver.boundary import solve


def test_the_interval_of_the_check():
    assert contour_interval(31.2, 38.4) == 1.0
    assert pytest.approx(7.2) == (38.4 - 31.2) / 1.0


@given(st.floats(-500, 9000), st.floats(1e-3, 5e3))
def test_one_two_or_five_times_a_power_of_ten_in_five_to_eight_steps(low, span):
    high = low + span
    interval = contour_interval(low, high)
    steps = (high - low) / interval
    mantissa = interval / 10.0 ** np.floor(np.log10(interval) + 1e-9)
    assert min(abs(mantissa - m) for m in (1, 2, 5)) < 1e-9
    possible = [f * 10.0**n for n in range(-6, 5) for f in (1, 2, 5) if 5.0 <= (high - low) / (f * 10.0**n) <= 8.0]
    assert 5.0 <= steps <= 8.0 if possible else 3.999 <= steps <= 10.001


def test_levels_are_round_numbers_inside_the_range():
    assert contour_levels(31.2, 38.4, 1.0) == pytest.approx([32, 33, 34, 35, 36, 37, 38])
    assert contour_levels(-0.3, 0.3, 0.1) == pytest.approx([-0.3, -0.2, -0.1, 0.0, 0.1, 0.2, 0.3], abs=1e-12)
    assert contour_levels(2.1, 2.4, 1.0).size == 0


def test_no_range_is_said():
    with pytest.raises(ValueError, match="no range"):
        contour_interval(5.0, 5.0)


def test_contours_lie_on_their_head_and_cross_the_flow_at_right_angles():
    ring = np.array([0, 600, 700, 350, -50.0]), np.array([0, -40, 380, 520, 300.0])
    elements = [
        LakeEdge("shore", *ring, 20.0, land_inside=True),
        RechargeArea("rain", [-100, 800, 800, -100], [-100, -100, 600, 600], 8e-4),
        PumpingWell("well", 400.0, 250.0, 150.0, 0.2),
    ]
    flow = solve(Aquifer(14.0, 0.0), elements).flow
    x, y = np.linspace(150, 450, 601), np.linspace(100, 350, 501)
    head = flow.head(*np.meshgrid(x, y))
    levels = contour_levels(head.min(), head.max(), 0.02)
    # next to the well the head is too steep for a grid of half a metre
    lines = [p for p in contour_lines(x, y, head, levels) if np.hypot(p[1][:, 0] - 400, p[1][:, 1] - 250).min() > 25]
    assert len(lines) >= 4
    angles = []
    for level, line in lines:
        middle = 0.5 * (line[1:] + line[:-1])
        assert flow.head(*line.T) == pytest.approx(level, abs=2e-4)  # the grid's linear interpolation
        along = line[1:] - line[:-1]
        long = np.hypot(*along.T) > 0.2  # shorter chords turn with the interpolation
        q = np.stack(flow.discharge(*middle.T), axis=1)
        cosine = np.sum(along * q, axis=1) / np.hypot(*along.T) / np.hypot(*q.T)
        angles.append(np.degrees(np.arccos(cosine[long])))
    assert np.median(np.concatenate(angles)) == pytest.approx(90.0, abs=0.05)
    assert np.abs(np.concatenate(angles) - 90.0).max() < 3.0


def test_no_line_runs_where_there_is_no_head():
    x, y = np.linspace(0, 10, 21), np.linspace(0, 10, 21)
    head = np.add.outer(y, x)
    head[8:13, 8:13] = np.nan
    for _, line in contour_lines(x, y, head, np.array([10.0])):
        assert not np.any((np.abs(line[:, 0] - 5) < 0.9) & (np.abs(line[:, 1] - 5) < 0.9))
