"""How many pathlines a second, against a general integrator at equal accuracy of the end points?

    python tests/benchmarks/bench_pathlines.py        # about two minutes

The field: 200 order-4 panels along four meandering streams, regional flow, three wells, a confined aquifer. Particles
that touch no stream and reach no well are followed for a fixed time. The rival is ``scipy.integrate.solve_ivp``, all
particles in one system (the better of RK45 and DOP853), once with the field in numpy and once with the very field of
the package, compiled. Each gets the loosest tolerance, in steps of half a decade, that brings every end point within
1e-4 m of a reference traced at 1e-10 m a step; the reference is itself held to DOP853 at 1e-10. One thread.
"""

import argparse
import sys
import time

import numpy as np
import shapely
from bench_kernels import SIDE, network
from rows import best_of, conditions, one_thread, row
from scipy.integrate import solve_ivp
from wellshed import Aquifer, PumpingWell, RegionalFlow, Stream, trace
from wellshed.elements.field_arrays import panel_moments
from wellshed.elements.flow_field import superpose
from wellshed.tracing.endings import Ending

GOAL = 1e-4  # m
THICK, POROSITY = 20.0, 0.25
AQUIFER = Aquifer(10.0, 0.0, THICK, POROSITY)
FLOW = RegionalFlow(0.4, 0.05)
WELLS = (
    PumpingWell("a", 0.35 * SIDE, 0.31 * SIDE, 350.0, 0.3),
    PumpingWell("b", 0.62 * SIDE, 0.52 * SIDE, -250.0, 0.3),
    PumpingWell("c", 0.55 * SIDE, 0.69 * SIDE, 200.0, 0.3),
)
BOX = (-0.5 * SIDE, 1.5 * SIDE, -0.5 * SIDE, 1.5 * SIDE)
NEAR = 2.5  # half lengths: the numpy field's closed form within, 40 terms of the far series beyond
TERMS = 40


def make_field():
    """The flow field, its panels and strengths, and the streams as lines that a pathline can end at."""
    panels, coef = network(200, 4, seed=4)
    coef = 0.03 * coef
    flow = superpose(
        AQUIFER, constant=float(AQUIFER.potential(80.0)), scale=SIDE, flow=FLOW, wells=WELLS, panels=panels, coef=coef
    )
    lines = []
    for k in range(4):
        part = panels.panel[50 * k : 50 * (k + 1)]
        x, y = np.append(part[:, 0], part[-1, 2]), np.append(part[:, 1], part[-1, 3])
        lines.append(Stream(f"stream {k}", x, y, np.zeros(x.size)))
    return flow, panels, coef, lines


def numpy_discharge(panels, coef):
    """Discharge as a numpy programmer would write it: all pairs at once, complex numbers."""
    z1 = panels.panel[:, 0] + 1j * panels.panel[:, 1]
    z2 = panels.panel[:, 2] + 1j * panels.panel[:, 3]
    middle, half = 0.5 * (z1 + z2), 0.5 * (z2 - z1)
    moments = panel_moments(panels, coef)[:, :TERMS]
    n_coef = int(panels.n_coef.max())
    wells = np.array([[w.x + 1j * w.y, w.rate] for w in WELLS])

    def discharge(z):
        scaled = (z[:, None] - middle) / half
        t = 1.0 / scaled
        total = np.zeros_like(t)
        for k in range(TERMS - 1, -1, -1):
            total = total * t + moments[:, k]
        w = -total * t / half
        i, p = np.nonzero(abs(scaled) < NEAR)
        close = scaled[i, p]
        before = 0.5 * np.log((close + 1.0) / (close - 1.0))
        after = close * before - 1.0
        total = coef[p, 0] * before + coef[p, 1] * after
        for n in range(1, n_coef - 1):
            before, after = after, ((2 * n + 1) * close * after - n * before) / (n + 1)
            total += coef[p, n + 1] * after
        w[i, p] = -total * abs(half[p]) / (np.pi * half[p])
        sum_w = w.sum(axis=1) + FLOW.qx - 1j * FLOW.qy
        sum_w -= np.sum(wells[:, 1].real / (2.0 * np.pi) / (z[:, None] - wells[:, 0]), axis=1)
        return sum_w.real, -sum_w.imag

    return discharge


def candidates(kind):
    """Starting points, direction and days: back from rings of 1 m round the pumped wells, or anywhere."""
    ring = np.exp(2j * np.pi * (np.arange(96) + 0.5) / 96)
    rings = np.concatenate([w.x + 1j * w.y + ring for w in WELLS if w.rate > 0])
    rng = np.random.default_rng(7)
    anywhere = rng.uniform(0.05 * SIDE, 0.6 * SIDE, 1500) + 1j * rng.uniform(0.1 * SIDE, 0.9 * SIDE, 1500)
    if kind == "back from wells":
        return rings.real, rings.imag, -1, 5000.0
    if kind == "back from wells and anywhere":  # one step serves the whole system of solve_ivp, fast and slow alike
        mixed = np.stack([rings, anywhere[: rings.size] + 0.4 * SIDE], axis=1).ravel()
        return mixed.real, mixed.imag, -1, 5000.0
    return anywhere.real, anywhere.imag, 1, 20_000.0


def clear_of_streams(paths, lines):
    """Indices of particles that ended at their time without touching a stream."""
    streams = shapely.union_all([shapely.LineString(np.stack([line.x, line.y], axis=1)) for line in lines])
    apart = [shapely.LineString(p[:, :2]).distance(streams) > 2.0 if len(p) > 1 else False for p in paths.points]
    return np.flatnonzero((paths.endings == int(Ending.TIME)) & np.array(apart))


def ends_of(paths):
    """Last places of pathlines, complex."""
    return np.array([p[-1, 0] + 1j * p[-1, 1] for p in paths.points])


def follow(velocity, start, days, method, tolerance):
    """End points by solve_ivp, all particles as one system, and the number of evaluations."""

    def rate(_, state):
        return velocity(state[: start.size] + 1j * state[start.size :]).ravel()

    # a relative tolerance means nothing on map coordinates; scipy takes none below 100 epsilon
    done = solve_ivp(rate, (0.0, days), np.concatenate([start.real, start.imag]), method, rtol=2.3e-14, atol=tolerance)
    if not done.success:
        sys.exit(f"solve_ivp failed: {done.message}")
    return done.y[: start.size, -1] + 1j * done.y[start.size :, -1], done.nfev


def loosest(run, reference):
    """The loosest tolerance at which every end point is within the goal, and the largest error there."""
    for exponent in np.arange(-1.0, -10.0, -0.5):
        tolerance = 10.0**exponent
        error = float(abs(run(tolerance) - reference).max())
        if error <= GOAL:
            return tolerance, error
    sys.exit("no tolerance reaches the goal")


def compare(kind, count, repeats):
    """The rows of one set of particles."""
    flow, panels, coef, lines = make_field()
    x, y, direction, days = candidates(kind)
    settings = {"lines": lines, "box": BOX, "direction": direction, "t_max": days}
    warm_up = time.perf_counter()
    use = clear_of_streams(trace(flow, x, y, **settings), lines)[:count]
    warm_up = time.perf_counter() - warm_up
    if use.size < count:
        sys.exit(f"only {use.size} of {count} particles stay clear of streams and wells")
    x, y = x[use], y[use]
    start = x + 1j * y
    slow = direction / (POROSITY * THICK)
    as_numpy = numpy_discharge(panels, coef)
    fields = {
        "compiled field": lambda z: slow * np.array(flow.discharge(z.real, z.imag)),
        "numpy field": lambda z: slow * np.array(as_numpy(z)),
    }
    here = [f(start) for f in fields.values()]
    if abs(here[0] - here[1]).max() > 1e-10 * abs(here[0]).max():
        sys.exit("the numpy field is not the compiled one")

    def ours(tolerance):
        return trace(flow, x, y, tolerance=tolerance, most_points=20_000, **settings)

    reference = ends_of(ours(1e-10))
    other, _ = follow(fields["compiled field"], start, days, "DOP853", 1e-10)
    checked = float(abs(reference - other).max())
    if checked > 0.1 * GOAL:
        sys.exit(f"the reference differs from solve_ivp's by {checked:.1e} m")
    tolerance, error = loosest(lambda t: ends_of(ours(t)), reference)
    seconds, spread, paths = best_of(lambda: ours(tolerance), repeats, time.thread_time)
    row(
        "pathlines",
        row="wellshed",
        particles=kind,
        count=x.size,
        panels=200,
        tolerance=tolerance,
        error=error,
        pathlines_a_second=round(x.size / seconds, 1),
        steps_a_second=round(float(paths.tried.sum()) / seconds),
        steps_a_pathline=round(float(paths.tried.mean()), 1),
        spread=round(spread, 2),
        repeats=repeats,
        reference_to_solve_ivp=checked,
        warm_up_seconds=round(warm_up, 2),
    )
    for name, velocity in fields.items():
        results = []
        for method in ("RK45", "DOP853"):
            # the tolerance is found on the quicker field: the two are the same
            tolerance, _ = loosest(
                lambda t, m=method: follow(fields["compiled field"], start, days, m, t)[0], reference
            )
            runs = repeats if name == "compiled field" else 1
            spent, _, (ends, evaluations) = best_of(
                lambda m=method, t=tolerance, v=velocity: follow(v, start, days, m, t), runs, time.thread_time
            )
            error = float(abs(ends - reference).max())
            results.append((spent, method, tolerance, error, evaluations, runs))
        spent, method, tolerance, error, evaluations, runs = min(results)
        row(
            "pathlines",
            row=f"solve_ivp, {name}",
            particles=kind,
            method=method,
            tolerance=tolerance,
            error=error,
            evaluations=evaluations,
            pathlines_a_second=round(x.size / spent, 2),
            repeats=runs,
            wellshed_is_faster_by=round(spent / seconds, 1),
        )


def main():
    """Print the rows."""
    parser = argparse.ArgumentParser(description="pathlines against solve_ivp")
    parser.add_argument("--particles", type=int, default=128)
    parser.add_argument("--repeats", type=int, default=3)
    options = parser.parse_args()
    one_thread()
    conditions("pathlines", threads_used=1)
    for kind in ("back from wells", "back from wells and anywhere", "forward from anywhere"):
        compare(kind, options.particles, options.repeats)


if __name__ == "__main__":
    main()
