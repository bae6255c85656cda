"""What the benchmarks share: a JSON line for each row, the conditions of the run, and repeated timing."""

import json
import os
import platform
import sys
import time
from pathlib import Path

import numpy as np


def row(benchmark, **values):
    """Print one row."""
    print(json.dumps({"benchmark": benchmark, **values}, default=float), flush=True)


def one_thread():
    """Start this script anew with every library on one thread: the number is read when a library loads.

    CPU time of one thread is hardly disturbed by other programs; that of threads waiting for each other is.
    """
    names = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS", "NUMBA_NUM_THREADS")
    if any(os.environ.get(name) != "1" for name in names):
        os.execve(sys.executable, [sys.executable, *sys.argv], {**os.environ, **dict.fromkeys(names, "1")})


def conditions(benchmark, **more):
    """Print the row that says under which conditions the others were measured."""
    import numba
    import scipy

    model = next(
        (line.split(":", 1)[1].strip() for line in _lines("/proc/cpuinfo") if line.startswith("model name")),
        platform.machine(),
    )
    row(
        benchmark,
        row="conditions",
        cpu=model,
        cores=os.cpu_count(),
        numba_threads=int(numba.config.NUMBA_NUM_THREADS),
        load=round(os.getloadavg()[0], 2) if hasattr(os, "getloadavg") else None,
        python=platform.python_version(),
        numpy=np.__version__,
        scipy=scipy.__version__,
        numba=numba.__version__,
        **more,
    )


def _lines(path):
    try:
        with Path(path).open(encoding="utf-8", errors="replace") as file:
            return file.readlines()
    except OSError:
        return []


def best_of(work, repeats=7, clock=time.perf_counter):
    """Least time (s) of several calls, the spread (largest / least) and the last result.

    The least one is what the machine can do: other programs on it only add.
    """
    times, result = [], None
    for _ in range(repeats):
        start = clock()
        result = work()
        times.append(clock() - start)
    return min(times), max(times) / min(times), result


def alternately(works, repeats=7, clock=time.perf_counter):
    """Least time (s) of each of several calls, taken in turns so that a busy spell falls on all of them alike."""
    least = [np.inf] * len(works)
    for _ in range(repeats):
        for k, work in enumerate(works):
            start = clock()
            work()
            least[k] = min(least[k], clock() - start)
    return least
