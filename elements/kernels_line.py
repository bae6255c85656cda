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

import numpy as np

from .jit import kernel

N_COEF = 11  # coefficients a panel can hold: orders 0 .. 10 (tip: even orders 0 .. 20)
N_MOMENT = 36  # terms of the far series at its nearest, |Z| = 3
NEAR = 3.0  # closed form within this many half lengths of the middle, far series beyond
N_WORK = 2 * N_COEF + 2
TWO_PI = 2.0 * np.pi
TINY = 1e-100  # a point on a vertex is moved here: the potential has a limit, the discharge has none


@kernel
def legendre_q(zm1, zp1, n_max, q):
    """Q_0 .. Q_n_max of a complex Z into q, from Z - 1 and Z + 1 given apart (no cancellation at the ends).

    Forward recurrence where its growth rho^(n+1) stays below 60, backward continued fraction beyond (DLMF 14.10,
    3.10): |error| < about 1e-14 of Q_0. On the cut -1 < Z < 1 the mean of both sides. Singular at Z = -1, 1.
    """
    z = 0.5 * (zm1 + zp1)
    s = abs(zm1) + abs(zp1)  # rho + 1/rho of the ellipse through Z
    rho = 0.5 * (s + np.sqrt(max(s * s - 4.0, 0.0)))
    if abs(zm1) > 4.0:
        w = 2.0 / zm1
        q0 = 0.5 * complex(0.5 * np.log1p(2.0 * w.real + abs(w) ** 2), np.arctan2(w.imag, 1.0 + w.real))
    elif abs(z.imag) <= 1e-15 and abs(z.real) < 1.0:
        q0 = complex(0.5 * np.log(abs(zp1) / abs(zm1)), 0.0)
    else:
        q0 = 0.5 * np.log(zp1 / zm1)
    q[0] = q0
    if n_max == 0:
        return
    if rho ** (n_max + 1) < 60.0:
        q[1] = z * q0 - 1.0
        for n in range(1, n_max):
            q[n + 1] = ((2 * n + 1) * z * q[n] - n * q[n - 1]) / (n + 1)
        return
    r = 0.0j
    for n in range(n_max + int(20.0 / np.log(rho)) + 2, n_max, -1):
        r = n / ((2 * n + 1) * z - (n + 1) * r)
    for n in range(n_max, 0, -1):
        r = n / ((2 * n + 1) * z - (n + 1) * r)
        q[n] = r
    for n in range(1, n_max + 1):
        q[n] = q[n] * q[n - 1]


@kernel
def _root(tau, kind):
    """Zeta = tau^(1/kind), the principal root; kind 0 (tip) takes the square root."""
    if kind == 1:
        return tau
    if kind == 3:
        r = abs(tau) ** (1.0 / 3.0)
        angle = np.arctan2(tau.imag, tau.real) / 3.0
        return complex(r * np.cos(angle), r * np.sin(angle))
    if kind == 0 or kind == 2:
        return np.sqrt(tau)
    return tau ** (1.0 / kind)


@kernel
def _ends(tau, one_minus_tau, zeta, kind, j):
    """Z_j - 1, Z_j + 1 and w_j zeta of root j, the first without cancellation near u = 1."""
    if kind == 0:
        return -one_minus_tau / (zeta + 1.0), zeta + 1.0, zeta
    if j == 0:
        total = 1.0 + 0.0j
        for _ in range(1, kind):
            total = total * zeta + 1.0
        return -2.0 * one_minus_tau / total, 2.0 * zeta, zeta
    angle = TWO_PI * j / kind
    wz = complex(np.cos(angle), np.sin(angle)) * zeta
    return 2.0 * (wz - 1.0), 2.0 * wz, wz


@kernel
def near_potentials(kind, tau, one_minus_tau, n_coef, q, out):
    """Closed-form potential of each order per L/(2 pi), into out (n_coef,) complex, without the ln(L/R) of order 0.

    Real part: the sink. Imaginary part: the vortex; for order 0 in doublet form, whose jump grows from 0 at z1
    to L at z2 (the point vortex left at z2 cancels along a chain of panels with no net circulation).
    q is work space (N_WORK,). Points on an end are evaluated as the limit there.
    """
    if abs(tau) < TINY:
        tau = complex(TINY, 0.0)
    if abs(one_minus_tau) < TINY:
        one_minus_tau = complex(TINY, 0.0)
    zeta = _root(tau, kind)
    for n in range(n_coef):
        out[n] = 0.0
    if kind == 0:
        zm1, zp1, wz = _ends(tau, one_minus_tau, zeta, kind, 0)
        legendre_q(zm1, zp1, 2 * n_coef - 1, q)
        out[0] = complex((zp1 * np.log(zp1) - zm1 * np.log(zm1)).real - 2.0, (2.0 * wz * q[0]).imag)
        for n in range(1, n_coef):
            out[n] = 2.0 * (q[2 * n + 1] - q[2 * n - 1]) / (4 * n + 1)
        return
    for j in range(kind):
        zm1, zp1, wz = _ends(tau, one_minus_tau, zeta, kind, j)
        legendre_q(zm1, zp1, n_coef, q)
        sink = 0.5 * (zp1 * np.log(zp1) - zm1 * np.log(zm1)).real - 1.0 - np.log(2.0)
        out[0] += complex(sink, (2.0 * wz * q[0]).imag)
        for n in range(1, n_coef):
            out[n] += (q[n + 1] - q[n - 1]) / (2 * n + 1)


@kernel
def near_derivatives(kind, tau, one_minus_tau, n_coef, q, out):
    """Int P_n / (tau - tau') du of each order into out (n_coef,) complex: dOmega/dz = L/(2 pi (z2 - z1)) out."""
    if abs(tau) < TINY:
        tau = complex(TINY, 0.0)
    if abs(one_minus_tau) < TINY:
        one_minus_tau = complex(TINY, 0.0)
    zeta = _root(tau, kind)
    if kind == 0:
        zm1, zp1, _ = _ends(tau, one_minus_tau, zeta, kind, 0)
        legendre_q(zm1, zp1, 2 * n_coef - 2, q)
        for n in range(n_coef):
            out[n] = q[2 * n] / zeta
        return
    for n in range(n_coef):
        out[n] = 0.0
    for j in range(kind):
        zm1, zp1, wz = _ends(tau, one_minus_tau, zeta, kind, j)
        legendre_q(zm1, zp1, n_coef - 1, q)
        f = 2.0 * wz / (kind * tau)
        for n in range(n_coef):
            out[n] += f * q[n]


@kernel
def far_terms(z_abs2):
    """Number of terms of the far series that gives 1e-15 of the leading term at |Z|^2 = z_abs2 (>= 9)."""
    if z_abs2 > 1e4:
        return 9 if z_abs2 < 1e6 else 6
    if z_abs2 > 400.0:
        return 12
    if z_abs2 > 100.0:
        return 16
    if z_abs2 > 36.0:
        return 21
    if z_abs2 > 16.0:
        return 27
    return N_MOMENT


@kernel
def far_series(moments, k_max, tr, ti):
    """sum_k m_k t^k for real m_k and complex t = tr + i ti, |t| < 1/3 (Goertzel's scheme), k < k_max."""
    s = 2.0 * tr
    r = tr * tr + ti * ti
    b1 = 0.0
    b2 = 0.0
    for k in range(k_max - 1, 0, -1):
        b1, b2 = moments[k] + s * b1 - r * b2, b1
    return moments[0] + tr * b1 - r * b2, ti * b1


@kernel
def far_log_series(moments, k_max, tr, ti):
    """sum_{k>=1} m_k t^k / k, real and imaginary part; as ``far_series``."""
    s = 2.0 * tr
    r = tr * tr + ti * ti
    b1 = 0.0
    b2 = 0.0
    for k in range(k_max - 1, 0, -1):
        b1, b2 = moments[k] / k + s * b1 - r * b2, b1
    return tr * b1 - r * b2, ti * b1


def moment_table(kind: int, n_coef: int) -> np.ndarray:
    """Moments int s^k P_n du, s = 2 tau - 1, of each order: (n_coef, N_MOMENT); exact to rounding by Gauss rule."""
    nodes, weights = np.polynomial.legendre.leggauss(96)
    u, w = 0.5 * (nodes + 1.0), 0.5 * weights
    s = 2.0 * u ** (2 if kind == 0 else kind) - 1.0
    orders = 2 * np.arange(n_coef) if kind == 0 else np.arange(n_coef)
    basis = np.polynomial.legendre.legvander(u if kind == 0 else nodes, int(orders[-1]))[:, orders]
    powers = s[:, None] ** np.arange(N_MOMENT)[None, :]
    return np.ascontiguousarray(basis.T @ (w[:, None] * powers))
