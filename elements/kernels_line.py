"""Line panels: sinks (and vortices) of Legendre order on straight stretches, plain, mapped and tip.

A panel runs from z1 to z2 (complex, m), L = |z2 - z1|, tau = (z - z1)/(z2 - z1). Its strength per unit length
sigma (m2/d, > 0 takes water out) is given through the mapped coordinate u in (0, 1), tau = u^q:

    sigma dl = L sum_n a_n P_n(2u - 1) du        kind q = 1 (plain), 2, 3, ...: singular end first
    sigma dl = L sum_n a_n P_2n(u) du            kind 0, tau = u^2: the exact form at a free tip

    Omega_n = L/(2 pi) int P_n ln(z - z') du,  Phi = Re Omega,  W = Qx - i Qy = -dOmega/dz

Since tau - u^q = prod_j (w_j zeta - u) with zeta = tau^(1/q) and w_j the q-th roots of unity, every integral is a
sum of Legendre functions of the second kind at Z_j = 2 w_j zeta - 1 (DLMF 14.7, 14.12.13 Neumann's integral:
int P_n(s)/(Z - s) ds = 2 Q_n(Z)); derived in the project's physics notes, checked against mpmath quadrature.
A vortex of the same shape is the sink times -i; its potential is the doublet form (see ``near_potentials``).

On the panel itself the potential is continuous; the discharge is the mean of its two sides. At an end the
potential is finite, the discharge infinite.
"""

from functools import cache

import numpy as np

from .jit import kernel

N_COEF = 11  # coefficients a panel can hold: orders 0 .. 10 (tip: even orders 0 .. 20)
N_MOMENT = 72  # terms of the far series at its nearest
NEAR = 1.6  # closed form within this many half lengths of the middle, far series beyond
N_WORK = 2 * N_COEF + 2
N_SERIES = 96
TWO_PI = 2.0 * np.pi
HALF_SQRT3 = 0.5 * 3.0**0.5
LN2 = float(np.log(2.0))
_RHO = 60.0 ** (1.0 / (np.arange(2 * N_WORK) + 1.0))
FORWARD = _RHO + 1.0 / _RHO
INVERSE = 1.0 / np.maximum(np.arange(4 * N_WORK), 1)
TINY = 1e-100


def _series_table() -> np.ndarray:
    """sqrt(pi) Gamma(n+1)/Gamma(n+3/2) times the coefficients of 2F1(1/2, n+1; n+3/2; .) in powers of w^-2."""
    table = np.empty((2 * N_COEF + 2, N_SERIES))
    front = 2.0  # sqrt(pi) Gamma(1)/Gamma(3/2)
    for n in range(len(table)):
        term = front
        for k in range(N_SERIES):
            table[n, k] = term
            term *= (0.5 + k) * (n + 1 + k) / ((n + 1.5 + k) * (k + 1))
        front *= (n + 1) / (n + 1.5)
    return table


SERIES = _series_table()


@kernel
def far_series(moments, row, k_max, tr, ti):
    """sum_k m_k t^k for the real m_k of a row and complex t = tr + i ti, |t| < 1, k < k_max (even), both parts.

    Goertzel's scheme in t^2 for even and odd powers apart: two chains that the processor runs side by side.
    """
    ur = tr * tr - ti * ti
    ui = 2.0 * tr * ti
    s = 2.0 * ur
    r = ur * ur + ui * ui
    e1 = 0.0
    e2 = 0.0
    o1 = 0.0
    o2 = 0.0
    for k in range(k_max - 2, 0, -2):
        e1, e2 = (moments[row, k] - r * e2) + s * e1, e1
        o1, o2 = (moments[row, k + 1] - r * o2) + s * o1, o1
    er = moments[row, 0] + ur * e1 - r * e2
    ei = ui * e1
    odd_r = moments[row, 1] + ur * o1 - r * o2
    odd_i = ui * o1
    return er + tr * odd_r - ti * odd_i, ei + tr * odd_i + ti * odd_r


@kernel
def legendre_q(zm1, zp1, n_max, q):
    """Q_0 .. Q_n_max of a complex Z into q, from Z - 1 and Z + 1 given apart (no cancellation at the ends).

    Forward recurrence (DLMF 14.10.3) where its growth rho^(n+1) stays below 60, the hypergeometric series beyond:
    |error| < about 1e-14 of Q_0. On the cut -1 < Z < 1 the mean of both sides. Singular at Z = -1, 1.
    """
    zr = 0.5 * (zm1.real + zp1.real)
    zi = 0.5 * (zm1.imag + zp1.imag)
    below2 = zm1.real * zm1.real + zm1.imag * zm1.imag
    above2 = zp1.real * zp1.real + zp1.imag * zp1.imag
    s = np.sqrt(below2) + np.sqrt(above2)  # rho + 1/rho of the ellipse through Z
    if n_max > 0 and s >= FORWARD[n_max]:
        _by_series(zm1, zp1, n_max, q)
        return
    if below2 > 16.0:
        wr = 2.0 * zm1.real / below2
        wi = -2.0 * zm1.imag / below2
        q0r = 0.25 * np.log1p(2.0 * wr + wr * wr + wi * wi)
        q0i = 0.5 * np.arctan2(wi, 1.0 + wr)
    else:
        q0r = 0.25 * np.log(above2 / below2)
        q0i = 0.0
        if not (abs(zi) <= 1e-15 and abs(zr) < 1.0):
            # arg((Z + 1)/(Z - 1)) of the product with the conjugate
            cross = zp1.imag * zm1.real - zp1.real * zm1.imag
            q0i = 0.5 * np.arctan2(cross, zp1.real * zm1.real + zp1.imag * zm1.imag)
    q[0] = complex(q0r, q0i)
    if n_max == 0:
        return
    ar = q0r
    ai = q0i
    br = zr * q0r - zi * q0i - 1.0
    bi = zr * q0i + zi * q0r
    q[1] = complex(br, bi)
    for n in range(1, n_max):
        f = (2 * n + 1) * INVERSE[n + 1]
        g = n * INVERSE[n + 1]
        cr = f * (zr * br - zi * bi) - g * ar
        ci = f * (zr * bi + zi * br) - g * ai
        ar, ai, br, bi = br, bi, cr, ci
        q[n + 1] = complex(cr, ci)


@kernel
def _by_series(zm1, zp1, n_max, q):
    """Q_0 .. Q_n_max (n_max > 0) away from the cut, where rho^(n_max + 1) > 60."""
    zr = 0.5 * (zm1.real + zp1.real)
    zi = 0.5 * (zm1.imag + zp1.imag)
    # Q_n = F_n w^-(n + 1) 2F1(1/2, n + 1; n + 3/2; w^-2), w = Z + sqrt(Z^2 - 1), |w| = rho (DLMF 14.3.7, 15.8.1);
    # the two highest orders by the series, the others downward, where Q_n is the minimal solution
    w = complex(zr, zi) + np.sqrt(zm1) * np.sqrt(zp1)
    if w.real * w.real + w.imag * w.imag < 1.0:  # rounding took the other branch, in line with the segment
        w = divide(1.0 + 0.0j, w)
    v = divide(1.0 + 0.0j, w)
    t = v * v
    rho2 = w.real * w.real + w.imag * w.imag
    k_max = min(2 * int(19.5 / np.log(rho2)) + 4, N_SERIES)
    power = v
    for _ in range(n_max - 1):
        power *= v
    sr, si = far_series(SERIES, n_max - 1, k_max, t.real, t.imag)
    low = power * complex(sr, si)
    sr, si = far_series(SERIES, n_max, k_max, t.real, t.imag)
    high = power * v * complex(sr, si)
    q[n_max] = high
    q[n_max - 1] = low
    ar = high.real
    ai = high.imag
    br = low.real
    bi = low.imag
    for n in range(n_max - 1, 0, -1):
        f = (2 * n + 1) * INVERSE[n]
        g = (n + 1) * INVERSE[n]
        cr = f * (zr * br - zi * bi) - g * ar
        ci = f * (zr * bi + zi * br) - g * ai
        ar, ai, br, bi = br, bi, cr, ci
        q[n - 1] = complex(cr, ci)


@kernel
def divide(a, b):
    """A / b of complex numbers without the scaling of the language's own division, three times as fast."""
    f = 1.0 / (b.real * b.real + b.imag * b.imag)
    return complex(f * (a.real * b.real + a.imag * b.imag), f * (a.imag * b.real - a.real * b.imag))


@kernel
def _root(tau, kind):
    """Zeta = tau^(1/kind), the principal root; kind 0 (tip) takes the square root."""
    if kind == 1:
        return tau
    order = 2 if kind == 0 else kind
    r = np.exp(np.log(tau.real * tau.real + tau.imag * tau.imag) / (2 * order))
    angle = np.arctan2(tau.imag, tau.real) / order
    return complex(r * np.cos(angle), r * np.sin(angle))


@kernel
def _ends(one_minus_tau, zeta, kind, j):
    """Z_j - 1, Z_j + 1 and w_j zeta of root j (unused for kind 0), the first without cancellation near u = 1."""
    if kind == 0:
        return divide(-one_minus_tau, zeta + 1.0), zeta + 1.0, zeta
    if j == 0:
        if kind == 1:
            return -2.0 * one_minus_tau, 2.0 * zeta, zeta
        total = 1.0 + 0.0j
        for _ in range(1, kind):
            total = total * zeta + 1.0
        return divide(-2.0 * one_minus_tau, total), 2.0 * zeta, zeta
    if kind == 3:
        turn = complex(-0.5, HALF_SQRT3) if j == 1 else complex(-0.5, -HALF_SQRT3)
    else:
        angle = TWO_PI * j / kind
        turn = complex(np.cos(angle), np.sin(angle))
    wz = turn * zeta
    return 2.0 * (wz - 1.0), 2.0 * wz, wz


@kernel
def _off_vertex(z):
    """z, or a place next to it where it is exactly zero: the potential has a limit there, the discharge has none."""
    return complex(TINY, 0.0) if z.real == 0.0 and z.imag == 0.0 else z


@kernel
def _z_log_z(z):
    """Real part of z ln z."""
    return 0.5 * z.real * np.log(z.real * z.real + z.imag * z.imag) - z.imag * np.arctan2(z.imag, z.real)


@kernel
def near_potentials(kind, tau, one_minus_tau, n_coef, q, out):
    """Closed-form potential of each order per L/(2 pi), into out (n_coef,) complex, without the ln(L/R) of order 0.

    Real part: the sink. Imaginary part: the vortex; for order 0 in doublet form, whose jump grows from 0 at z1
    to L at z2 (the point vortex left at z2 cancels along a chain of panels with no net circulation).
    q is work space (N_WORK,). Points on an end are evaluated as the limit there.
    """
    tau = _off_vertex(tau)
    one_minus_tau = _off_vertex(one_minus_tau)
    zeta = _root(tau, kind)
    for n in range(n_coef):
        out[n] = 0.0
    if kind == 0:
        zm1, zp1, wz = _ends(one_minus_tau, zeta, kind, kind)
        legendre_q(zm1, zp1, 2 * n_coef - 1, q)
        out[0] = complex(_z_log_z(zp1) - _z_log_z(zm1) - 2.0, (2.0 * wz * q[0]).imag)
        for n in range(1, n_coef):
            out[n] = 2.0 * (q[2 * n + 1] - q[2 * n - 1]) * INVERSE[4 * n + 1]
        return
    for j in range(kind):
        zm1, zp1, wz = _ends(one_minus_tau, zeta, kind, j)
        legendre_q(zm1, zp1, n_coef, q)
        sink = 0.5 * (_z_log_z(zp1) - _z_log_z(zm1)) - 1.0 - LN2
        out[0] += complex(sink, (2.0 * wz * q[0]).imag)
        for n in range(1, n_coef):
            out[n] += (q[n + 1] - q[n - 1]) * INVERSE[2 * n + 1]


@kernel
def near_derivatives(kind, tau, one_minus_tau, n_coef, q, out):
    """Int P_n / (tau - tau') du of each order into out (n_coef,) complex: dOmega/dz = L/(2 pi (z2 - z1)) out."""
    tau = _off_vertex(tau)
    one_minus_tau = _off_vertex(one_minus_tau)
    zeta = _root(tau, kind)
    if kind == 0:
        zm1, zp1, _ = _ends(one_minus_tau, zeta, kind, kind)
        legendre_q(zm1, zp1, 2 * n_coef - 2, q)
        inverse = divide(1.0 + 0.0j, zeta)
        for n in range(n_coef):
            out[n] = q[2 * n] * inverse
        return
    for n in range(n_coef):
        out[n] = 0.0
    for j in range(kind):
        zm1, zp1, wz = _ends(one_minus_tau, zeta, kind, j)
        legendre_q(zm1, zp1, n_coef - 1, q)
        f = divide(2.0 * wz, kind * tau)
        for n in range(n_coef):
            out[n] += f * q[n]


@kernel
def far_terms(z_abs2):
    """Number of terms n (even) of the far series with |Z|^-n below 1e-14, at |Z|^2 = z_abs2 (>= NEAR^2)."""
    if z_abs2 > 640.0:
        if z_abs2 > 3.2e3:
            return 8 if z_abs2 < 4.7e4 else 6
        return 10
    if z_abs2 > 100.0:
        return 12 if z_abs2 > 216.0 else 14
    if z_abs2 > 25.2:
        if z_abs2 > 56.3:
            return 16
        return 18 if z_abs2 > 36.0 else 20
    if z_abs2 > 14.7:
        return 24
    if z_abs2 > 10.0:
        return 28
    if z_abs2 > 6.7:
        return 34
    if z_abs2 > 4.65:
        return 42
    if z_abs2 > 3.3:
        return 54
    return N_MOMENT


@cache
def moment_table(kind: int, n_coef: int) -> np.ndarray:
    """Moments int s^k P_n du, s = 2 tau - 1, of each order: (n_coef, N_MOMENT); exact to rounding by Gauss rule."""
    nodes, weights = np.polynomial.legendre.leggauss(144)
    u, w = 0.5 * (nodes + 1.0), 0.5 * weights
    s = 2.0 * u ** (2 if kind == 0 else kind) - 1.0
    orders = 2 * np.arange(n_coef) if kind == 0 else np.arange(n_coef)
    basis = np.polynomial.legendre.legvander(u if kind == 0 else nodes, int(orders[-1]))[:, orders]
    powers = s[:, None] ** np.arange(N_MOMENT)[None, :]
    return np.ascontiguousarray(basis.T @ (w[:, None] * powers))
