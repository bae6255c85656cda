"""The superposition: the kernels that solver and tracer share, and the drivers behind ``FlowField``.

``potential_at`` and the others that end in ``_at`` take one point in local coordinates and a ``FieldArrays``;
``discharges`` takes points in blocks with the panels outside, five times as fast as one point after the other.
"""

import numpy as np

from .blocks import BLOCK
from .jit import driver, kernel
from .kernels_area import edge_log_integral, inside_ring_crossings, log_distance2
from .kernels_line import (
    N_WORK,
    NEAR,
    divide,
    far_series,
    far_terms,
    near_derivatives,
    near_potentials,
)
from .kernels_point import discharge_well, potential_well

NEAR2 = NEAR * NEAR
FAR_RING2 = 9.0
N_BLOCK_ROWS = 9


@kernel
def panel_place(x, y, panel, p):
    """Tau and 1 - tau of the point on panel p, each from its own end."""
    direction = complex(2.0 * panel[p, 6], 2.0 * panel[p, 7])
    tau = divide(complex(x - panel[p, 0], y - panel[p, 1]), direction)
    rest = divide(complex(panel[p, 2] - x, panel[p, 3] - y), direction)
    return tau, rest


@kernel
def from_middle(x, y, panel, p):
    """Vector from the middle of panel p to the point, the panel's half vector, and the squares of both lengths."""
    dx = x - panel[p, 4]
    dy = y - panel[p, 5]
    hx = panel[p, 6]
    hy = panel[p, 7]
    return dx, dy, hx, hy, dx * dx + dy * dy, hx * hx + hy * hy


@kernel
def near_panel_potential(x, y, p, panel, kind, n_coef, coef, log_scale, work):
    """Complex potential Omega (m3/d) of panel p by the closed form; order 0 of the imaginary part as a doublet."""
    tau, rest = panel_place(x, y, panel, p)
    near_potentials(kind[p], tau, rest, n_coef[p], work[0], work[1])
    length = panel[p, 8]
    re = coef[p, 0] * (np.log(length) - log_scale)
    im = 0.0
    for n in range(n_coef[p]):
        re += coef[p, n] * work[1, n].real
        im += coef[p, n] * work[1, n].imag
    c = length / (2.0 * np.pi)
    return c * re, c * im


@kernel
def constant_doublet(x, y, panel, p):
    """Potential of a unit constant jump along panel p: the angle under which it is seen / (2 pi)."""
    tau, rest = panel_place(x, y, panel, p)
    return np.arctan2(-(tau * np.conj(rest)).imag, -(tau * np.conj(rest)).real) / (2.0 * np.pi)


@kernel
def near_discharge(x, y, p, panel, kind, n_coef, coef, work):
    """Qx and -Qy (m2/d) of panel p as a sink by the closed form: W = -dOmega/dz."""
    tau, rest = panel_place(x, y, panel, p)
    near_derivatives(kind[p], tau, rest, n_coef[p], work[0], work[1])
    total = 0.0j
    for n in range(n_coef[p]):
        total += coef[p, n] * work[1, n]
    w = divide(-panel[p, 8] / (2.0 * np.pi) * total, complex(2.0 * panel[p, 6], 2.0 * panel[p, 7]))
    return w.real, w.imag


@kernel
def far_discharges(px, py, n, p, panel, moment, k_max, block):
    """Add the far series of panel p, k_max terms, to W = Qx - i Qy (block rows 0, 1) at points px, py (n,).

    Block row 2 holds the squared distances from the middle of the panel; points nearer than NEAR are left out.
    """
    re, im, d2, b1, b2, tr, s, r, inv = (
        block[0],
        block[1],
        block[2],
        block[3],
        block[4],
        block[5],
        block[6],
        block[7],
        block[8],
    )
    cx, cy, hx, hy = panel[p, 4], panel[p, 5], panel[p, 6], panel[p, 7]
    h2 = hx * hx + hy * hy
    limit = NEAR2 * h2
    for i in range(n):
        v = 1.0 / d2[i] if d2[i] > limit else 0.0
        t = (hx * (px[i] - cx) + hy * (py[i] - cy)) * v
        inv[i] = v
        tr[i] = t
        s[i] = 2.0 * t
        r[i] = h2 * v
        b1[i] = 0.0
        b2[i] = 0.0
    for k in range(k_max - 1, 0, -1):  # Goertzel's scheme for real coefficients
        m = moment[p, k]
        for i in range(n):
            b0 = (m - r[i] * b2[i]) + s[i] * b1[i]
            b2[i] = b1[i]
            b1[i] = b0
    m0 = moment[p, 0]
    for i in range(n):
        dx = px[i] - cx
        dy = py[i] - cy
        sr = m0 + tr[i] * b1[i] - r[i] * b2[i]
        si = (hy * dx - hx * dy) * inv[i] * b1[i]
        re[i] -= (sr * dx + si * dy) * inv[i]
        im[i] -= (si * dx - sr * dy) * inv[i]


@kernel
def panel_discharges(px, py, n, p, panel, kind, n_coef, coef, moment, block, work):
    """Add W = Qx - i Qy (m2/d) of panel p as a sink to block rows 0 and 1 at points px, py (n,)."""
    d2 = block[2]
    cx, cy, hx, hy = panel[p, 4], panel[p, 5], panel[p, 6], panel[p, 7]
    h2 = hx * hx + hy * hy
    limit = NEAR2 * h2
    nearest_far = np.inf
    near = 0
    for i in range(n):
        dx = px[i] - cx
        dy = py[i] - cy
        d = dx * dx + dy * dy
        d2[i] = d
        close = d <= limit
        near += 1 if close else 0
        nearest_far = min(nearest_far, np.inf if close else d)
    if near < n:
        far_discharges(px, py, n, p, panel, moment, far_terms(nearest_far / h2), block)
    if near > 0:
        for i in range(n):
            if d2[i] <= limit:
                a, b = near_discharge(px[i], py[i], p, panel, kind, n_coef, coef, work)
                block[0, i] += a
                block[1, i] += b


@kernel
def ring_at(x, y, r, ring, ring_start, ring_moment, edge, log_scale):
    """Potential (m3/d) and discharge (m2/d) of recharge ring r; what the caller drops, the compiler leaves out."""
    dx = x - ring[r, 0]
    dy = y - ring[r, 1]
    radius = ring[r, 2]
    rate = ring[r, 3] / (2.0 * np.pi)
    if rate == 0.0:
        return 0.0, 0.0, 0.0
    d2 = dx * dx + dy * dy
    z2 = d2 / (radius * radius)
    if z2 > FAR_RING2:
        inv = complex(dx, -dy) / d2
        t = radius * inv
        total = 0.0j
        logs = 0.0j
        for k in range(far_terms(z2) - 1, 0, -1):
            m = ring_moment[r, k]
            total = (total + m) * t
            logs = (logs + m / k) * t
        w = rate * inv * (ring_moment[r, 0] + total)
        return -rate * (ring[r, 4] * (0.5 * np.log(d2) - log_scale) - logs.real), w.real, -w.imag
    phi = rate * ring[r, 4] * log_scale
    qx = 0.0
    qy = 0.0
    first = ring_start[r]
    log1 = log_distance2(x, y, edge[first, 0], edge[first, 1])
    for e in range(first, ring_start[r + 1]):
        log2 = log_distance2(x, y, edge[e, 2], edge[e, 3])
        integral, d = edge_log_integral(x, y, edge, e, log1, log2)
        log1 = log2
        qx -= rate * edge[e, 5] * integral
        qy += rate * edge[e, 4] * integral
        phi -= rate * d * (0.5 * integral - 0.25 * edge[e, 6])
    return phi, qx, qy


@kernel
def ring_covers(x, y, r, f):
    """Recharge rate (m/d) that ring r brings to the point (a hole counts negative)."""
    crossings = 0
    for e in range(f.ring_start[r], f.ring_start[r + 1]):
        crossings += inside_ring_crossings(x, y, f.edge[e, 0], f.edge[e, 1], f.edge[e, 2], f.edge[e, 3])
    if crossings % 2 == 0:
        return 0.0
    return f.ring[r, 3] if f.ring[r, 4] > 0.0 else -f.ring[r, 3]


@kernel
def recharge_at(x, y, f):
    """Recharge rate (m/d) at the point: the sum over the rings that hold it."""
    rate = 0.0
    for r in range(f.ring.shape[0]):
        rate += ring_covers(x, y, r, f)
    return rate


@kernel
def potential_at(x, y, f, work):
    """Discharge potential Phi (m3/d) at a point in local coordinates (m)."""
    u = f.uniform
    phi = u[4] - u[0] * (x - u[2]) - u[1] * (y - u[3])
    wells = f.wells
    scale = np.exp(u[5])
    for w in range(wells.shape[0]):
        phi += potential_well(x - wells[w, 0], y - wells[w, 1], wells[w, 2], wells[w, 3], scale)
    panel, kind, vortex, n_coef, coef = f.panel, f.kind, f.vortex, f.n_coef, f.coef
    moment, log_moment, jump = f.moment, f.log_moment, f.jump
    for p in range(kind.shape[0]):
        dx, dy, hx, hy, d2, h2 = from_middle(x, y, panel, p)
        if d2 > NEAR2 * h2:
            inv = 1.0 / d2
            tr = (hx * dx + hy * dy) * inv
            ti = (hy * dx - hx * dy) * inv
            sr, si = far_series(log_moment, p, far_terms(d2 / h2), tr, ti)
            if vortex[p] == 0:
                phi += moment[p, 0] * (0.5 * np.log(d2) - u[5]) - sr
            else:
                # as a doublet, order 0 has ln((z - c)/(z - z2)) = -ln(1 - t) in place of ln(z - c); a constant
                # jump has ln((z - z1)/(z - z2)) = ln((1 + t)/(1 - t))
                phi += moment[p, 0] * -np.arctan2(-ti, 1.0 - tr) - si
                phi += jump[p] * np.arctan2(2.0 * ti, 1.0 - tr * tr - ti * ti) / (2.0 * np.pi)
        else:
            re, im = near_panel_potential(x, y, p, panel, kind, n_coef, coef, u[5], work)
            phi += re if vortex[p] == 0 else im + jump[p] * constant_doublet(x, y, panel, p)
    for r in range(f.ring.shape[0]):
        area, _, _ = ring_at(x, y, r, f.ring, f.ring_start, f.ring_moment, f.edge, u[5])
        phi += area
    return phi


@kernel
def stream_function_at(x, y, f, work):
    """Stream function Psi (m3/d) of a field without recharge; cuts run from wells and line ends towards -x."""
    u = f.uniform
    psi = -u[0] * (y - u[3]) + u[1] * (x - u[2])
    for w in range(f.wells.shape[0]):
        psi += f.wells[w, 2] / (2.0 * np.pi) * np.arctan2(y - f.wells[w, 1], x - f.wells[w, 0])
    for p in range(f.kind.shape[0]):
        tau, rest = panel_place(x, y, f.panel, p)
        near_potentials(f.kind[p], tau, rest, f.n_coef[p], work[0], work[1])
        c = f.panel[p, 8] / (2.0 * np.pi)
        re = f.coef[p, 0] * (np.log(f.panel[p, 8]) - u[5])
        im = f.coef[p, 0] * np.arctan2(y - f.panel[p, 3], x - f.panel[p, 2])
        for n in range(f.n_coef[p]):
            re += f.coef[p, n] * work[1, n].real
            im += f.coef[p, n] * work[1, n].imag
        psi += c * im if f.vortex[p] == 0 else -c * re
    return psi


@driver
def potentials(x, y, f, out):
    """Potential at points x, y (n,) into out (n,)."""
    work = np.empty((2, N_WORK), np.complex128)
    for i in range(x.size):
        out[i] = potential_at(x[i], y[i], f, work)


@driver
def discharges(x, y, f, qx, qy):
    """Discharge vector at points x, y (n,) into qx, qy (n,).

    Points in blocks with the panels outside: the loops over a block have no branch, and the compiler makes vectors
    of them. The nearest point of a block sets how many terms of a far series all of it takes.
    """
    work = np.empty((2, N_WORK), np.complex128)
    block = np.empty((N_BLOCK_ROWS, BLOCK))
    u, wells = f.uniform, f.wells
    panel, kind, vortex, n_coef, coef, moment = f.panel, f.kind, f.vortex, f.n_coef, f.coef, f.moment
    for start in range(0, x.size, BLOCK):
        n = min(BLOCK, x.size - start)
        px = x[start : start + n]
        py = y[start : start + n]
        for turn in range(2):  # sinks, then vortices, whose W is that of sinks times -i
            for i in range(n):
                block[0, i] = 0.0
                block[1, i] = 0.0
            for p in range(kind.size):
                if vortex[p] == turn:
                    panel_discharges(px, py, n, p, panel, kind, n_coef, coef, moment, block, work)
            for i in range(n):
                if turn == 0:
                    qx[start + i] = u[0] + block[0, i]
                    qy[start + i] = u[1] - block[1, i]
                else:
                    qx[start + i] += block[1, i]
                    qy[start + i] += block[0, i]
        for i in range(n):
            for w in range(wells.shape[0]):
                a, b = discharge_well(px[i] - wells[w, 0], py[i] - wells[w, 1], wells[w, 2], wells[w, 3])
                qx[start + i] += a
                qy[start + i] += b
            for r in range(f.ring.shape[0]):
                _, a, b = ring_at(px[i], py[i], r, f.ring, f.ring_start, f.ring_moment, f.edge, u[5])
                qx[start + i] += a
                qy[start + i] += b


@driver
def stream_functions(x, y, f, out):
    """Stream function at points x, y (n,) into out (n,)."""
    work = np.empty((2, N_WORK), np.complex128)
    for i in range(x.size):
        out[i] = stream_function_at(x[i], y[i], f, work)


@driver
def recharges(x, y, f, out):
    """Recharge rate (m/d) at points x, y (n,) into out (n,)."""
    for i in range(x.size):
        out[i] = recharge_at(x[i], y[i], f)
