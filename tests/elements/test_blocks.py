"""Work in blocks: every point once, errors raised, and the same bits whatever the number of threads."""

import numba
import numpy as np
import pytest
from wellshed.elements.aquifer import Aquifer
from wellshed.elements.blocks import in_blocks
from wellshed.elements.lake import LakeEdge
from wellshed.elements.recharge import RechargeArea
from wellshed.elements.well import PumpingWell
from wellshed.solver.boundary import solve
from wellshed.tracing.pathlines import trace


@pytest.mark.parametrize("threads", [1, 2, 5])
@pytest.mark.parametrize("n", [0, 1, 1024, 1025, 4000])
def test_every_point_is_worked_on_once(monkeypatch, threads, n):
    monkeypatch.setattr(numba.config, "NUMBA_NUM_THREADS", threads)
    seen = np.zeros(n, dtype=int)

    def work(part):
        seen[part] += 1

    in_blocks(work, n)
    assert np.all(seen == 1)


def test_an_error_in_a_block_is_raised(monkeypatch):
    monkeypatch.setattr(numba.config, "NUMBA_NUM_THREADS", 2)

    def work(part):
        if part.start > 0:
            raise ZeroDivisionError

    with pytest.raises(ZeroDivisionError):
        in_blocks(work, 5000)


def test_one_thread_gives_the_bits_of_many(monkeypatch):
    def answers():
        box = np.array([-400.0, 400.0, 400.0, -400.0]), np.array([-300.0, -300.0, 300.0, 300.0])
        elements = [
            LakeEdge("shore", *box, 20.0, land_inside=True),
            RechargeArea("rain", 2 * box[0], 2 * box[1], 0.001),
            PumpingWell("w", 50.0, 40.0, 200.0, 0.2),
        ]
        flow = solve(Aquifer(12.0, 0.0), elements).flow
        x = np.linspace(-380.0, 380.0, 300)
        paths = trace(flow, x[::10], 0.5 * x[::10], lines=[elements[0]], box=(-450, 450, -350, 350))
        return np.concatenate([flow.head(x, 0.3 * x), *flow.discharge(x, 0.3 * x), *(p.ravel() for p in paths.points)])

    monkeypatch.setattr(numba.config, "NUMBA_NUM_THREADS", 1)
    one = answers()
    monkeypatch.setattr(numba.config, "NUMBA_NUM_THREADS", 3)
    assert np.array_equal(one, answers())
