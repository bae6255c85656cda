"""Compile what follows water, so that a first run can have it done by a process beside it.

Compiling takes longer than all else in a first run and uses one core; what another process has compiled is found in
the cache when it is needed.
"""

import os
import subprocess
import sys

import numpy as np

from ..elements.aquifer import Aquifer
from ..elements.flow_field import superpose
from ..elements.jit import in_cache
from ..elements.local_arrays import local_arrays
from ..elements.well import PumpingWell
from .apart import farthest
from .integrator import follow_all
from .obstacles import make_obstacles


def rehearse() -> None:
    """Follow one particle to a well, by the very calls that ``pathlines.trace`` makes."""
    flow = superpose(Aquifer(1.0, 0.0, 1.0, 0.2), constant=1.0, wells=[PumpingWell("w", 0.0, 0.0, 1.0, 0.1)])
    obstacles = make_obstacles([], (-1.0, 1.0, -1.0, 1.0)).arrays(flow.origin)
    tree = local_arrays(flow.arrays, (-1.0, 1.0, -1.0, 1.0), 1)
    place, marks = np.array([0.5]), np.zeros(0)
    points = np.zeros((1, 100, 3))
    follow_all(
        place, np.zeros(1), np.ones(1), 1.0, tree, np.array([1.0, 1.0, 0.2]), obstacles, np.inf, 1e-3, 1e-9, marks,
        np.zeros((1, 0, 2)), points, np.zeros((1, 1)), np.zeros((1, 4), dtype=np.int64),
    )  # fmt: skip
    path = np.ascontiguousarray(points[0, :2])
    farthest([path, path], np.array([0]), np.array([1]), 2)


def compile_beside() -> subprocess.Popen[bytes] | None:
    """Start a process that compiles, if nothing is in the cache yet and there is a core for it."""
    if (os.cpu_count() or 1) == 1 or in_cache("follow_all"):
        return None
    command = [sys.executable, "-P", "-c", "from wellshed.tracing.rehearsal import rehearse; rehearse()"]
    nothing = subprocess.DEVNULL
    return subprocess.Popen(command, stdin=nothing, stdout=nothing, stderr=nothing, start_new_session=True)
