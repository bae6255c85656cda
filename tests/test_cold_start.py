"""A first run has what follows water compiled by a process beside it: the very machine code that it needs later."""

import numpy as np
import pytest
from wellshed import Aquifer, PumpingWell, RegionalFlow, Stream, trace
from wellshed.elements import jit
from wellshed.elements.flow_field import superpose
from wellshed.elements.kernels_local import grow
from wellshed.elements.recharge import RechargeArea
from wellshed.tracing import apart, rehearsal
from wellshed.tracing.integrator import follow_all


def test_the_rehearsal_compiles_what_is_used():
    rehearsal.rehearse()
    square = np.array([-400.0, 400.0, 400.0, -400.0]), np.array([-400.0, -400.0, 400.0, 400.0])
    flow = superpose(
        Aquifer(5.0, 0.0, 10.0, 0.2), constant=400.0, flow=RegionalFlow(0.3, 0.1),
        wells=[PumpingWell("w", 0.0, 0.0, 90.0, 0.2)], areas=[RechargeArea("rain", *square, 1e-3)],
    )  # fmt: skip
    stream = Stream("brook", np.array([-300.0, 300.0]), np.array([200.0, 250.0]), np.zeros(2))
    starts = np.linspace(-150.0, 150.0, 250)
    paths = trace(flow, starts, starts[::-1], lines=[stream], box=(-500.0, 500.0, -500.0, 500.0), times=[10.0])
    apart.farthest(paths.points, np.arange(3), np.arange(3) + 1, 4)
    for function in (follow_all, grow, apart._farthest):
        assert len(function.signatures) == 1, function


def test_nothing_is_compiled_twice(monkeypatch):
    assert jit.in_cache("follow_all")
    assert not jit.in_cache("follow_nothing")
    monkeypatch.setattr(rehearsal.subprocess, "Popen", lambda *_, **__: pytest.fail("compiled again"))
    assert rehearsal.compile_beside() is None
