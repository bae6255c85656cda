"""The superposition through series of the far elements: see ``local_arrays`` for the formulas and the tree."""

import numpy as np

from .jit import driver, inlined, kernel
from .kernels_field import N_BLOCK_ROWS, NEAR2, from_middle, near_discharge, panel_discharges
from .kernels_line import N_WORK, far_series, far_terms
from .kernels_point import discharge_well
from .local_tree import held_elsewhere

APART = 2.5  # half diagonals from the centre of a square: elements farther than this are far
N_TERM = 32  # of the series, a multiple of four

_TURNS = np.exp(2j * np.pi * np.arange(N_TERM) / N_TERM)


@inlined
def find_square(x, y, tree):
    """The smallest square that holds the point; square 0, where all elements are near, outside the box."""
    square, child = tree.square, tree.child
    k = 0
    if child.size > 1:
        side = square[1, 2] * 0.5**0.5
        if abs(x - square[1, 0]) <= side and abs(y - square[1, 1]) <= side:
            k = 1
    while child[k] >= 0:
        k = child[k] + (1 if x > square[k, 0] else 0) + (2 if y > square[k, 1] else 0)
    return k


@inlined
def _taylor(series, k, which, t):
    """Sum of a series of square k at t, in four chains that the processor runs side by side."""
    t2 = t * t
    t4 = t2 * t2
    a = 0.0j
    b = 0.0j
    c = 0.0j
    d = 0.0j
    for n in range(N_TERM - 4, -1, -4):
        a = a * t4 + series[k, which, n]
        b = b * t4 + series[k, which, n + 1]
        c = c * t4 + series[k, which, n + 2]
        d = d * t4 + series[k, which, n + 3]
    return (a + t * b) + t2 * (c + t * d)


@kernel
def seen_edge(x, y, edge, e):
    """Of edge e: e^(-i theta) of its direction, d, and ln((z2 - z)/(z1 - z)); see ``local_arrays``."""
    ax = edge[e, 0] - x
    ay = edge[e, 1] - y
    bx = edge[e, 2] - x
    by = edge[e, 3] - y
    tx = edge[e, 4]
    ty = edge[e, 5]
    d1 = ay * tx - ax * ty
    d2 = by * tx - bx * ty
    a2 = ax * ax + ay * ay
    b2 = bx * bx + by * by
    if a2 == 0.0 or b2 == 0.0:  # at a corner every product with the logarithm vanishes
        return complex(tx, -ty), 0.0, 0.0j
    d = d1 if a2 < b2 else d2
    return complex(tx, -ty), d, complex(0.5 * np.log(b2 / a2), np.arctan2(by * ax - bx * ay, bx * ax + by * ay))


@kernel
def near_flow_at(x, y, k, tree, work):
    """Qx, Qy (m2/d) and recharge (m/d) from the near elements of square k at a point."""
    qx = 0.0
    qy = 0.0
    rate = 0.0
    near, part = tree.near, tree.part
    panel, kind, vortex, n_coef, coef, moment = tree.panel, tree.kind, tree.vortex, tree.n_coef, tree.coef, tree.moment
    for i in range(part[k, 0], part[k, 1]):
        p = near[i]
        dx, dy, hx, hy, d2, h2 = from_middle(x, y, panel, p)
        if d2 > NEAR2 * h2:
            inv = 1.0 / d2
            tr = (hx * dx + hy * dy) * inv
            ti = (hy * dx - hx * dy) * inv
            sr, si = far_series(moment, p, far_terms(d2 / h2), tr, ti)
            a = -(sr * dx + si * dy) * inv
            b = -(si * dx - sr * dy) * inv
        else:
            a, b = near_discharge(x, y, p, panel, kind, n_coef, coef, work)
        if vortex[p] == 0:
            qx += a
            qy -= b
        else:  # times -i: W = b - i a
            qx += b
            qy += a
    wells = tree.wells
    for i in range(part[k, 1], part[k, 2]):
        w = near[i]
        a, b = discharge_well(x - wells[w, 0], y - wells[w, 1], wells[w, 2], wells[w, 3])
        qx += a
        qy += b
    edge, edge_rate = tree.edge, tree.edge_rate
    for i in range(part[k, 2], part[k, 3]):
        e = near[i]
        turn, d, seen = seen_edge(x, y, edge, e)
        share = edge_rate[e] / (2.0 * np.pi)
        rate += share * seen.imag
        # W = -(N/2)/(2 pi i) e^(-i theta) (L - 2 i d ln(...))
        w = 0.5j * share * turn * complex(edge[e, 6] + 2.0 * d * seen.imag, -2.0 * d * seen.real)
        qx += w.real
        qy -= w.imag
    return qx, qy, rate


@inlined
def local_flow_at(x, y, tree, work):
    """Discharge vector Qx, Qy (m2/d) and recharge rate (m/d) at a point in local coordinates (m).

    Made part of its caller, since a call would copy the whole tree.
    """
    k = find_square(x, y, tree)
    square, series, part = tree.square, tree.series, tree.part
    dx = x - square[k, 0]
    dy = y - square[k, 1]
    scale = 1.0 / square[k, 2]
    t = complex(dx * scale, dy * scale)
    w = _taylor(series, k, 0, t)
    cover = series[k, 1, 0]
    if part[k, 3] > part[k, 2]:
        cover = _taylor(series, k, 1, t)
    w += 0.5 * complex(dx, -dy) * cover
    qx = w.real
    qy = -w.imag
    rate = cover.real
    if part[k, 3] > part[k, 0]:
        a, b, c = near_flow_at(x, y, k, tree, work)
        qx += a
        qy += b
        rate += c
    return qx, qy, rate


flow_at = kernel(local_flow_at.py_func)  # the same, where speed does not count: compiled once, called


@kernel
def _segment_distance(x, y, x1, y1, x2, y2):
    ex = x2 - x1
    ey = y2 - y1
    s = ((x - x1) * ex + (y - y1) * ey) / max(ex * ex + ey * ey, 1e-300)
    s = min(max(s, 0.0), 1.0)
    return np.sqrt((x - x1 - s * ex) ** 2 + (y - y1 - s * ey) ** 2)


@kernel
def _panels_apart(px, py, x, y, radius, first, last, tree, n_near, block, work):
    """Near panels of a square go to the list from n_near on, the others' W into block rows 0, 1; the list's new end."""
    near, panel, vortex = tree.near, tree.panel, tree.vortex
    kind, n_coef, coef, moment = tree.kind, tree.n_coef, tree.coef, tree.moment
    for turn in range(2):
        for i in range(first, last):
            p = near[i]
            if vortex[p] == turn:
                continue
            if _segment_distance(x, y, panel[p, 0], panel[p, 1], panel[p, 2], panel[p, 3]) < APART * radius:
                near[n_near] = p
                n_near += 1
            else:
                panel_discharges(px, py, px.size, p, panel, kind, n_coef, coef, moment, block, work)
        if turn == 0:  # vortices came first: their W is that of a sink times -i
            for m in range(N_TERM):
                re = block[0, m]
                block[0, m] = block[1, m]
                block[1, m] = -re
    return n_near


@kernel
def _edges_apart(px, py, x, y, radius, first, last, tree, n_near, block, cover):
    """The same for the edges of recharge areas: E into block rows 0, 1 and N g into cover."""
    near, edge = tree.near, tree.edge
    for i in range(first, last):
        e = near[i]
        if _segment_distance(x, y, edge[e, 0], edge[e, 1], edge[e, 2], edge[e, 3]) < APART * radius:
            near[n_near] = e
            n_near += 1
            continue
        share = tree.edge_rate[e] / (2.0 * np.pi)
        for m in range(N_TERM):
            turn, d, seen = seen_edge(px[m], py[m], edge, e)
            g = share * complex(seen.imag, -seen.real)
            w = 0.5j * share * turn * complex(edge[e, 6] + 2.0 * d * seen.imag, -2.0 * d * seen.real)
            w -= 0.5 * complex(px[m] - x, y - py[m]) * g
            block[0, m] += w.real
            block[1, m] += w.imag
            cover[m] += g
    return n_near


@driver
def grow(tree, middle_x, middle_y, half, deepest, few):
    """Fill a tree's arrays; returns how many squares and near elements there are, or 0, 0 where they have no room."""
    tree = held_elsewhere(tree)
    wells = tree.wells
    square, child, series, near, part = tree.square, tree.child, tree.series, tree.near, tree.part
    work = np.empty((2, N_WORK), np.complex128)
    block = np.empty((N_BLOCK_ROWS, N_TERM))
    cover = np.empty(N_TERM, np.complex128)
    px = np.empty(N_TERM)
    py = np.empty(N_TERM)
    depth = np.zeros(child.size, np.int64)
    parent = np.zeros(child.size, np.int64)
    n_near = 0
    for size in (tree.kind.size, wells.shape[0], tree.edge.shape[0]):
        for e in range(size):
            near[n_near] = e
            n_near += 1
    part[0, 1] = tree.kind.size
    part[0, 2] = part[0, 1] + wells.shape[0]
    part[0, 3] = n_near
    for k in range(2):
        square[k, 0] = middle_x
        square[k, 1] = middle_y
        square[k, 2] = half
    series[0, 0, 0] = complex(tree.uniform[0], -tree.uniform[1])
    n = 2 if deepest > 0 else 1
    k = 1
    while k < n:
        above = parent[k]
        if n_near + part[above, 3] - part[above, 0] > near.size or n + 4 > child.size:
            return 0, 0
        x = square[k, 0]
        y = square[k, 1]
        radius = square[k, 2]
        moved = 0.5 * complex(x - square[above, 0], square[above, 1] - y)
        for m in range(N_TERM):
            px[m] = x + radius * _TURNS[m].real
            py[m] = y + radius * _TURNS[m].imag
            block[0, m] = 0.0
            block[1, m] = 0.0
        part[k, 0] = n_near
        n_near = _panels_apart(px, py, x, y, radius, part[above, 0], part[above, 1], tree, n_near, block, work)
        part[k, 1] = n_near
        for m in range(N_TERM):
            t = complex(px[m] - square[above, 0], py[m] - square[above, 1]) / square[above, 2]
            cover[m] = _taylor(series, above, 1, t)
            w = _taylor(series, above, 0, t) + moved * cover[m]
            block[0, m] += w.real
            block[1, m] += w.imag
        for i in range(part[above, 1], part[above, 2]):
            w = near[i]
            if np.sqrt((x - wells[w, 0]) ** 2 + (y - wells[w, 1]) ** 2) < APART * radius + wells[w, 3]:
                near[n_near] = w
                n_near += 1
                continue
            for m in range(N_TERM):
                qx, qy = discharge_well(px[m] - wells[w, 0], py[m] - wells[w, 1], wells[w, 2], wells[w, 3])
                block[0, m] += qx
                block[1, m] -= qy
        part[k, 2] = n_near
        n_near = _edges_apart(px, py, x, y, radius, part[above, 2], part[above, 3], tree, n_near, block, cover)
        part[k, 3] = n_near
        orders = N_TERM if part[k, 3] > part[k, 2] else 1  # of G: no edge near, the same rate everywhere
        for j in range(N_TERM):
            total = 0.0j
            covers = 0.0j
            for m in range(N_TERM):
                back = np.conj(_TURNS[(j * m) % N_TERM])
                total += complex(block[0, m], block[1, m]) * back
                if j < orders:
                    covers += cover[m] * back
            series[k, 0, j] = total / N_TERM
            series[k, 1, j] = covers / N_TERM
        if depth[k] < deepest and n_near - part[k, 0] > few:
            child[k] = n
            step = radius * 0.5 * 0.5**0.5
            for q in range(4):
                square[n, 0] = x + (step if q % 2 == 1 else -step)
                square[n, 1] = y + (step if q // 2 == 1 else -step)
                square[n, 2] = 0.5 * radius
                depth[n] = depth[k] + 1
                parent[n] = k
                n += 1
        k += 1
    return n, n_near


@driver
def local_flows(x, y, tree, qx, qy, rate):
    """Discharge vector and recharge at points x, y (n,) into qx, qy, rate (n,)."""
    tree = held_elsewhere(tree)
    work = np.empty((2, N_WORK), np.complex128)
    for i in range(x.size):
        qx[i], qy[i], rate[i] = local_flow_at(x[i], y[i], tree, work)
