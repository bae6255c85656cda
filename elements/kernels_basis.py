"""Potential and discharge of unit strengths: the blocks of the boundary solve.

Column k of panel p is the potential (m3/d) of a_k = 1 m2/d on that panel alone; for a vortex panel in the doublet
form of ``kernels_line``, with ``doublets`` giving the potential of a unit jump along each panel beside it.
"""

import numpy as np

from .jit import driver
from .kernels_field import NEAR2, constant_doublet, from_middle, panel_place
from .kernels_line import N_WORK, far_terms, near_derivatives, near_potentials


@driver
def basis_potentials(x, y, panels, first, tables, log_scale, out):
    """Potential of every unit strength at points x, y (m,) into out (m, n).

    first (p,): the column of order 0 of each panel; tables (kinds, N_COEF, N_MOMENT): far moments by kind.
    """
    work = np.empty((2, N_WORK), np.complex128)
    powers = np.empty(tables.shape[2])
    for i in range(x.size):
        for p in range(panels.kind.size):
            c = panels.panel[p, 8] / (2.0 * np.pi)
            dx, dy, hx, hy, d2, h2 = from_middle(x[i], y[i], panels.panel, p)
            n_coef = panels.n_coef[p]
            if d2 > NEAR2 * h2 and panels.vortex[p] == 0:
                table = tables[panels.kind[p]]
                k_max = far_terms(d2 / h2)
                t = complex((hx * dx + hy * dy) / d2, (hy * dx - hx * dy) / d2)
                power = t
                powers[0] = -(0.5 * np.log(d2) - log_scale)
                for k in range(1, k_max):
                    powers[k] = power.real / k
                    power *= t
                for n in range(n_coef):
                    total = 0.0
                    for k in range(k_max):
                        total += table[n, k] * powers[k]
                    out[i, first[p] + n] = -c * total
                continue
            tau, rest = panel_place(x[i], y[i], panels.panel, p)
            near_potentials(panels.kind[p], tau, rest, n_coef, work[0], work[1])
            for n in range(n_coef):
                value = work[1, n].real if panels.vortex[p] == 0 else work[1, n].imag
                out[i, first[p] + n] = c * value
            if panels.vortex[p] == 0:
                out[i, first[p]] += c * (np.log(panels.panel[p, 8]) - log_scale)


@driver
def basis_normal_flows(x, y, nx, ny, panels, first, out):
    """Flow (m2/d) along the unit vectors nx, ny of every unit strength at points x, y (m,) into out (m, n)."""
    work = np.empty((2, N_WORK), np.complex128)
    for i in range(x.size):
        for p in range(panels.kind.size):
            tau, rest = panel_place(x[i], y[i], panels.panel, p)
            near_derivatives(panels.kind[p], tau, rest, panels.n_coef[p], work[0], work[1])
            c = -panels.panel[p, 8] / (2.0 * np.pi)
            direction = complex(2.0 * panels.panel[p, 6], 2.0 * panels.panel[p, 7])
            for n in range(panels.n_coef[p]):
                w = c * work[1, n] / direction
                if panels.vortex[p] == 1:
                    w = complex(w.imag, -w.real)
                out[i, first[p] + n] = w.real * nx[i] - w.imag * ny[i]


@driver
def doublets(x, y, panels, out):
    """Potential of a unit jump (m3/d) along every panel at points x, y (m,) into out (m, p)."""
    for i in range(x.size):
        for p in range(panels.kind.size):
            out[i, p] = constant_doublet(x[i], y[i], panels.panel, p)
