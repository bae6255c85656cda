"""What does one thread pay for the discharge of one panel at one point, against C written for the same sum?

    python tests/benchmarks/bench_kernels.py          # about a minute; needs gcc (or $CC)

The C (``sums.c``) is compiled with -O3 -march=native into a temporary folder: (a) eight terms of the far series
everywhere, the floor of any summation; (b) the tiered sum to the digits that the package keeps; (c) the tiered sum
to nine digits. Everything runs on one thread, in turns; CPU time of the thread; results compared before timing.
"""

import argparse
import ctypes
import os
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
from rows import alternately, conditions, one_thread, row
from wellshed import Aquifer
from wellshed.elements.field_arrays import make_panels, panel_moments
from wellshed.elements.flow_field import superpose
from wellshed.elements.kernels_line import N_COEF

SIDE = 4000.0  # m: the network's box
AGREE = 1e-10  # of the largest discharge


def network(n_panels, order, seed):
    """Plain panels along four meandering streams, with random strengths."""
    rng = np.random.default_rng(seed)
    ends = []
    each = n_panels // 4
    for k in range(4):
        s = np.linspace(0.0, 1.0, each + 1)
        phases, bends = rng.uniform(0, 2 * np.pi, 3), rng.uniform(2, 9, 3)
        across = (0.2 + 0.2 * k) * SIDE + sum(
            60.0 / (i + 1) * np.sin(2 * np.pi * bends[i] * s + phases[i]) for i in range(3)
        )
        z = s * SIDE + 1j * across
        ends.append(np.stack([z[:-1], z[1:]], axis=1))
    z = np.concatenate(ends)
    ones = np.ones(len(z))
    panels = make_panels(z[:, 0], z[:, 1], ones, 0 * ones, (order + 1) * ones)
    coef = np.zeros((len(z), N_COEF))
    coef[:, : order + 1] = rng.normal(size=(len(z), order + 1)) / (1.0 + np.arange(order + 1)) ** 2
    return panels, coef


def along_z_order(x, y):
    """Indices that sort points along a space-filling curve (bits of both coordinates in turn)."""
    i, j = (np.clip(c / SIDE * 1024, 0, 1023).astype(np.int64) for c in (x, y))
    code = sum(((i >> b) & 1) << (2 * b) | ((j >> b) & 1) << (2 * b + 1) for b in range(10))
    return np.argsort(code, kind="stable")


def build(folder):
    """The C library of sums.c."""
    library = Path(folder) / "sums.so"
    compiler = os.environ.get("CC", "gcc")
    source = Path(__file__).with_name("sums.c")
    command = [compiler, "-O3", "-march=native", "-shared", "-fPIC", "-o", str(library), str(source), "-lm"]
    try:
        subprocess.run(command, check=True)
    except (OSError, subprocess.CalledProcessError) as error:
        sys.exit(f"this benchmark needs a C compiler: {error}")
    return ctypes.CDLL(str(library))


def pointer(array):
    """Address of a contiguous float64 array for C."""
    assert array.flags.c_contiguous
    assert array.dtype == np.float64
    return array.ctypes.data_as(ctypes.c_void_p)


def compare(library, order, n_panels, x, y, placing, repeats):
    """The row of one order and one placing of the points."""
    panels, coef = network(n_panels, order, seed=order)
    moment = np.ascontiguousarray(panel_moments(panels, coef))
    flow = superpose(Aquifer(10.0, 0.0), panels=panels, coef=coef)
    out = {name: np.empty((2, x.size)) for name in ("floor", "same digits", "nine digits")}
    long = ctypes.c_long
    head = (long(x.size), pointer(x), pointer(y), long(n_panels), pointer(panels.panel), pointer(moment),
            long(moment.shape[1]))  # fmt: skip
    strengths = (pointer(coef), long(N_COEF), ctypes.c_int(order + 1))

    def floor():
        library.far_only(*head, pointer(out["floor"][0]), pointer(out["floor"][1]))

    def same():
        o = out["same digits"]
        library.tiered(*head, *strengths, ctypes.c_int(0), pointer(o[0]), pointer(o[1]))

    def nine():
        o = out["nine digits"]
        library.tiered(*head, *strengths, ctypes.c_int(1), pointer(o[0]), pointer(o[1]))

    def ours():
        return flow.discharge(x, y)

    warm_up = time.perf_counter()
    got = np.array(ours())
    warm_up = time.perf_counter() - warm_up
    for work in (floor, same, nine):
        work()
    largest = np.hypot(*got).max()
    apart = {name: float(np.hypot(*(o - got)).max() / largest) for name, o in out.items()}
    if apart["same digits"] > AGREE or apart["nine digits"] > 1e-7:
        sys.exit(f"the sums disagree: {apart}")
    # the floor is a true discharge only far off: eight terms are enough five boxes away
    away = np.empty((2, x.size))
    beyond = np.ascontiguousarray(x + 5 * SIDE)
    library.far_only(head[0], pointer(beyond), *head[2:], pointer(away[0]), pointer(away[1]))
    true = np.array(flow.discharge(beyond, y))
    if np.hypot(*(away - true)).max() > AGREE * np.hypot(*true).max():
        sys.exit("the floor's sum is wrong far off")
    seconds = alternately([floor, same, nine, ours], repeats, time.thread_time)
    ns = [1e9 * t / (x.size * n_panels) for t in seconds]
    row(
        "kernels",
        row="discharge",
        order=order,
        panels=n_panels,
        points=x.size,
        placing=placing,
        ns_floor=round(ns[0], 2),
        ns_c=round(ns[1], 2),
        ns_c_nine_digits=round(ns[2], 2),
        ns_wellshed=round(ns[3], 2),
        to_floor=round(ns[3] / ns[0], 2),
        to_c=round(ns[3] / ns[1], 2),
        to_c_nine_digits=round(ns[3] / ns[2], 2),
        difference=apart["same digits"],
        difference_nine_digits=apart["nine digits"],
        warm_up_seconds=round(warm_up, 2),
        repeats=repeats,
    )


def main():
    """Print the rows."""
    parser = argparse.ArgumentParser(description="discharge kernel against C")
    parser.add_argument("--points", type=int, default=8192)
    parser.add_argument("--panels", type=int, default=200)
    parser.add_argument("--repeats", type=int, default=9)
    options = parser.parse_args()
    one_thread()
    rng = np.random.default_rng(1)
    x, y = rng.uniform(0, SIDE, options.points), rng.uniform(0, SIDE, options.points)
    order = along_z_order(x, y)
    n_panels = options.panels // 4 * 4
    with tempfile.TemporaryDirectory() as folder:
        library = build(folder)
        version = subprocess.run([os.environ.get("CC", "gcc"), "--version"], capture_output=True, text=True)
        conditions("kernels", compiler=version.stdout.splitlines()[0], threads_used=1)
        for degree in (4, 8):
            compare(library, degree, n_panels, x[order], y[order], "along a space-filling curve", options.repeats)
            compare(library, degree, n_panels, x, y, "shuffled", options.repeats)
        line = np.linspace(0.0, SIDE, options.points)
        compare(library, 8, n_panels, line, 0.41 * SIDE + 20 * np.sin(line / 90), "along a stream", options.repeats)


if __name__ == "__main__":
    main()
