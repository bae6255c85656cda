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
def log_distance2(x, y, x1, y1):
    """Ln r^2 from a corner; 0 on it, where every product with it vanishes."""
    r2 = (x1 - x) ** 2 + (y1 - y) ** 2
    return np.log(r2) if r2 > 0.0 else 0.0


@kernel
def edge_log_integral(x, y, edge, e, log1, log2):
    """I (m) and d (m) of row e of the edges seen from x, y, with ln r^2 of its ends: I = int ln r dl (r in m)."""
    tx = edge[e, 4]
    ty = edge[e, 5]
    ax = edge[e, 0] - x
    ay = edge[e, 1] - y
    bx = edge[e, 2] - x
    by = edge[e, 3] - y
    s1 = ax * tx + ay * ty
    s2 = bx * tx + by * ty
    d = ax * ty - ay * tx if abs(s1) < abs(s2) else bx * ty - by * tx
    total = 0.5 * (s2 * log2 - s1 * log1) - edge[e, 6]
    if d != 0.0:
        # the angle under which the edge is seen, in (-pi, pi)
        total += d * np.arctan2(d * (s2 - s1), d * d + s1 * s2)
    return total, d


@kernel
def inside_ring_crossings(x, y, x1, y1, x2, y2):
    """1 where a ray from x, y towards +x crosses the edge (half-open rule), else 0."""
    if (y1 > y) != (y2 > y) and x < x1 + (y - y1) * (x2 - x1) / (y2 - y1):
        return 1
    return 0
