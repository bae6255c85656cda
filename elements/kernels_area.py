"""Uniform recharge on polygons, exact inside, outside, on edges and at corners.

With rho = x' - x and r = |rho|, div(rho (ln r / 2 - 1/4)) = ln r, so that (divergence theorem; derived here)

    Phi = -(N / 2 pi) int ln r dA = -(N / 2 pi) sum_edges d (I / 2 - l / 4)
    Q   = -grad Phi               = -(N / 2 pi) sum_edges n I,      I = int ln r dl along the edge,

d the distance of the edge's line from the point along the outward normal n, l its length. Edges run with the ground
on their left. Phi and Q are continuous everywhere; d ln r and I have finite limits at corners.
"""

import numpy as np

from .jit import kernel


@kernel
def edge_log_integral(x, y, x1, y1, x2, y2):
    """I (m), d (m) and outward normal (nx, ny) of the edge 1 -> 2 seen from x, y: I = int ln r dl (r in m)."""
    ex = x2 - x1
    ey = y2 - y1
    length = np.sqrt(ex * ex + ey * ey)
    tx = ex / length
    ty = ey / length
    nx = ty
    ny = -tx
    ax = x1 - x
    ay = y1 - y
    bx = x2 - x
    by = y2 - y
    s1 = ax * tx + ay * ty
    s2 = bx * tx + by * ty
    d = ax * nx + ay * ny if abs(s1) < abs(s2) else bx * nx + by * ny
    r1 = ax * ax + ay * ay
    r2 = bx * bx + by * by
    total = -length
    if r1 > 0.0:
        total -= 0.5 * s1 * np.log(r1)
    if r2 > 0.0:
        total += 0.5 * s2 * np.log(r2)
    if d != 0.0:
        # the angle under which the edge is seen, in (-pi, pi)
        total += d * np.arctan2(d * (s2 - s1), d * d + s1 * s2)
    return total, d, nx, ny


@kernel
def inside_ring_crossings(x, y, x1, y1, x2, y2):
    """1 where a ray from x, y towards +x crosses the edge (half-open rule), else 0."""
    if (y1 > y) != (y2 > y) and x < x1 + (y - y1) * (x2 - x1) / (y2 - y1):
        return 1
    return 0
