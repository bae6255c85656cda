"""The superposition at a point: the very kernels that solver and tracer share.

``potential_at`` and ``discharge_at`` take one point in local coordinates, a ``FieldArrays`` and a work array
(2, N_WORK) complex; the drivers at the end run over points, elements inside.
"""

import numpy as np

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
def rings_at(x, y, ring, ring_start, ring_moment, edge, log_scale):
    """Potential (m3/d) and discharge (m2/d) of all recharge rings; what the caller drops, the compiler leaves out."""
    phi = 0.0
    qx = 0.0
    qy = 0.0
    for r in range(ring.shape[0]):
        dx = x - ring[r, 0]
        dy = y - ring[r, 1]
        radius = ring[r, 2]
        rate = ring[r, 3] / (2.0 * np.pi)
        if rate == 0.0:
            continue
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
            qx += w.real
            qy -= w.imag
            phi -= rate * (ring[r, 4] * (0.5 * np.log(d2) - log_scale) - logs.real)
            continue
        first = ring_start[r]
        log1 = log_distance2(x, y, edge[first, 0], edge[first, 1])
        for e in range(first, ring_start[r + 1]):
            log2 = log_distance2(x, y, edge[e, 2], edge[e, 3])
            integral, d = edge_log_integral(x, y, edge, e, log1, log2)
            log1 = log2
            qx -= rate * edge[e, 5] * integral
            qy += rate * edge[e, 4] * integral
            phi -= rate * d * (0.5 * integral - 0.25 * edge[e, 6])
        phi += rate * ring[r, 4] * log_scale
    return phi, qx, qy


@kernel
def recharge_at(x, y, f):
    """Recharge rate (m/d) at the point: the sum over the rings that hold it (holes count negative)."""
    rate = 0.0
    for r in range(f.ring.shape[0]):
        crossings = 0
        for e in range(f.ring_start[r], f.ring_start[r + 1]):
            crossings += inside_ring_crossings(x, y, f.edge[e, 0], f.edge[e, 1], f.edge[e, 2], f.edge[e, 3])
        if crossings % 2 == 1:
            rate += f.ring[r, 3] if f.ring[r, 4] > 0.0 else -f.ring[r, 3]
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
    area, _, _ = rings_at(x, y, f.ring, f.ring_start, f.ring_moment, f.edge, u[5])
    return phi + area


@kernel
def discharge_at(x, y, f, work):
    """Discharge vector Qx, Qy (m2/d) at a point in local coordinates (m)."""
    u = f.uniform
    qx = u[0]
    qy = u[1]
    wells = f.wells
    for w in range(wells.shape[0]):
        a, b = discharge_well(x - wells[w, 0], y - wells[w, 1], wells[w, 2], wells[w, 3])
        qx += a
        qy += b
    # the arrays by name: a call with the whole field would copy it for every panel
    panel, kind, vortex, n_coef, coef, moment = f.panel, f.kind, f.vortex, f.n_coef, f.coef, f.moment
    for p in range(kind.shape[0]):
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
    _, a, b = rings_at(x, y, f.ring, f.ring_start, f.ring_moment, f.edge, u[5])
    return qx + a, qy + b


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
    """Discharge vector at points x, y (n,) into qx, qy (n,)."""
    work = np.empty((2, N_WORK), np.complex128)
    for i in range(x.size):
        qx[i], qy[i] = discharge_at(x[i], y[i], f, work)


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
