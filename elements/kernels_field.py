"""The superposition at a point: the very kernels that solver and tracer share.

``potential_at`` and ``discharge_at`` take one point in local coordinates, a ``FieldArrays`` and a work array
(2, N_WORK) complex; the drivers at the end run over points in parallel, elements inside, so that a result does
not depend on the number of threads.
"""

import numpy as np

from .jit import kernel, parallel_kernel, prange
from .kernels_area import edge_log_integral, inside_ring_crossings
from .kernels_line import (
    N_WORK,
    NEAR,
    far_log_series,
    far_series,
    far_terms,
    near_derivatives,
    near_potentials,
)
from .kernels_point import discharge_well, potential_well

NEAR2 = NEAR * NEAR


@kernel
def panel_place(x, y, panel, p):
    """Tau and 1 - tau of the point on panel p, each from its own end."""
    direction = complex(2.0 * panel[p, 6], 2.0 * panel[p, 7])
    tau = complex(x - panel[p, 0], y - panel[p, 1]) / direction
    rest = complex(panel[p, 2] - x, panel[p, 3] - y) / direction
    return tau, rest


@kernel
def far_place(x, y, panel, p):
    """|Z|^2 and t = h/(z - c) of the point, and 1/(z - c) (zero where the point is the middle)."""
    dx = x - panel[p, 4]
    dy = y - panel[p, 5]
    hx = panel[p, 6]
    hy = panel[p, 7]
    d2 = dx * dx + dy * dy
    h2 = hx * hx + hy * hy
    inv = 1.0 / d2 if d2 > 0.0 else 0.0
    return d2 / h2, (hx * dx + hy * dy) * inv, (hy * dx - hx * dy) * inv, dx * inv, -dy * inv, d2


@kernel
def panel_potential(x, y, p, f, work):
    """Complex potential Omega (m3/d) of panel p as a sink; order 0 of the imaginary part in doublet form."""
    z2, tr, ti, _, _, d2 = far_place(x, y, f.panel, p)
    log_scale = f.uniform[5]
    if z2 > NEAR2 and f.vortex[p] == 0:
        sr, si = far_log_series(f.moment[p], far_terms(z2), tr, ti)
        return f.moment[p, 0] * (0.5 * np.log(d2) - log_scale) - sr, -si
    tau, rest = panel_place(x, y, f.panel, p)
    near_potentials(f.kind[p], tau, rest, f.n_coef[p], work[0], work[1])
    length = f.panel[p, 8]
    re = f.coef[p, 0] * (np.log(length) - log_scale)
    im = 0.0
    for n in range(f.n_coef[p]):
        re += f.coef[p, n] * work[1, n].real
        im += f.coef[p, n] * work[1, n].imag
    c = length / (2.0 * np.pi)
    return c * re, c * im


@kernel
def constant_doublet(x, y, panel, p):
    """Potential of a unit constant jump along panel p: the angle under which it is seen / (2 pi)."""
    tau, rest = panel_place(x, y, panel, p)
    return np.arctan2(-(tau * np.conj(rest)).imag, -(tau * np.conj(rest)).real) / (2.0 * np.pi)


@kernel
def panel_discharge(x, y, p, f, work):
    """Qx and -Qy (m2/d) of panel p as a sink: W = -dOmega/dz."""
    z2, tr, ti, ir, ii, _ = far_place(x, y, f.panel, p)
    if z2 > NEAR2:
        sr, si = far_series(f.moment[p], far_terms(z2), tr, ti)
        return -(sr * ir - si * ii), -(sr * ii + si * ir)
    tau, rest = panel_place(x, y, f.panel, p)
    near_derivatives(f.kind[p], tau, rest, f.n_coef[p], work[0], work[1])
    total = 0.0j
    for n in range(f.n_coef[p]):
        total += f.coef[p, n] * work[1, n]
    w = -f.panel[p, 8] / (2.0 * np.pi) * total / complex(2.0 * f.panel[p, 6], 2.0 * f.panel[p, 7])
    return w.real, w.imag


@kernel
def rings_at(x, y, f, want_potential):
    """Potential (m3/d, if wanted) and discharge (m2/d) of all recharge rings."""
    phi = 0.0
    qx = 0.0
    qy = 0.0
    log_scale = f.uniform[5]
    for r in range(f.ring.shape[0]):
        dx = x - f.ring[r, 0]
        dy = y - f.ring[r, 1]
        radius = f.ring[r, 2]
        rate = f.ring[r, 3] / (2.0 * np.pi)
        if rate == 0.0:
            continue
        d2 = dx * dx + dy * dy
        z2 = d2 / (radius * radius)
        if z2 > NEAR2:
            inv = complex(dx, -dy) / d2
            t = radius * inv
            total = 0.0j
            logs = 0.0j
            for k in range(far_terms(z2) - 1, 0, -1):
                m = f.ring_moment[r, k]
                total = (total + m) * t
                if want_potential:
                    logs = (logs + m / k) * t
            w = rate * inv * (f.ring_moment[r, 0] + total)
            qx += w.real
            qy -= w.imag
            if want_potential:
                phi -= rate * (f.ring[r, 4] * (0.5 * np.log(d2) - log_scale) - logs.real)
            continue
        for e in range(f.ring_start[r], f.ring_start[r + 1]):
            integral, d, nx, ny = edge_log_integral(x, y, f.edge[e, 0], f.edge[e, 1], f.edge[e, 2], f.edge[e, 3])
            qx -= rate * nx * integral
            qy -= rate * ny * integral
            if want_potential:
                length = np.sqrt((f.edge[e, 2] - f.edge[e, 0]) ** 2 + (f.edge[e, 3] - f.edge[e, 1]) ** 2)
                phi -= rate * d * (0.5 * integral - 0.25 * length)
        phi += rate * f.ring[r, 4] * log_scale
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
    for w in range(f.wells.shape[0]):
        phi += potential_well(x - f.wells[w, 0], y - f.wells[w, 1], f.wells[w, 2], f.wells[w, 3], np.exp(u[5]))
    for p in range(f.kind.shape[0]):
        re, im = panel_potential(x, y, p, f, work)
        if f.vortex[p] == 0:
            phi += re
        else:
            phi += im + f.jump[p] * constant_doublet(x, y, f.panel, p)
    area, _, _ = rings_at(x, y, f, True)
    return phi + area


@kernel
def discharge_at(x, y, f, work):
    """Discharge vector Qx, Qy (m2/d) at a point in local coordinates (m)."""
    u = f.uniform
    qx = u[0]
    qy = u[1]
    for w in range(f.wells.shape[0]):
        a, b = discharge_well(x - f.wells[w, 0], y - f.wells[w, 1], f.wells[w, 2], f.wells[w, 3])
        qx += a
        qy += b
    for p in range(f.kind.shape[0]):
        a, b = panel_discharge(x, y, p, f, work)
        if f.vortex[p] == 0:
            qx += a
            qy -= b
        else:  # times -i: W = b - i a
            qx += b
            qy += a
    _, a, b = rings_at(x, y, f, False)
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


@parallel_kernel
def potentials(x, y, f, out):
    """Potential at points x, y (n,) into out (n,)."""
    for i in prange(x.size):
        work = np.empty((2, N_WORK), np.complex128)
        out[i] = potential_at(x[i], y[i], f, work)


@parallel_kernel
def discharges(x, y, f, qx, qy):
    """Discharge vector at points x, y (n,) into qx, qy (n,)."""
    for i in prange(x.size):
        work = np.empty((2, N_WORK), np.complex128)
        qx[i], qy[i] = discharge_at(x[i], y[i], f, work)


@parallel_kernel
def stream_functions(x, y, f, out):
    """Stream function at points x, y (n,) into out (n,)."""
    for i in prange(x.size):
        work = np.empty((2, N_WORK), np.complex128)
        out[i] = stream_function_at(x[i], y[i], f, work)


@parallel_kernel
def recharges(x, y, f, out):
    """Recharge rate (m/d) at points x, y (n,) into out (n,)."""
    for i in prange(x.size):
        out[i] = recharge_at(x[i], y[i], f)
