"""Wells and uniform flow.

Well (Thiem 1906): Phi = Q/(2 pi) ln(r/R), discharge -Q/(2 pi) (x - xw)/r^2, Q > 0 taken out (m3/d). Within the
screen radius the potential is that of the screen and the discharge falls to zero at the centre: finite everywhere.
"""

import numpy as np

from .jit import kernel


@kernel
def potential_well(dx, dy, rate, radius, scale):
    """Potential (m3/d) at dx, dy (m) from the centre; ``scale`` is the length R inside the logarithm (m)."""
    r2 = max(dx * dx + dy * dy, radius * radius)
    return rate / (4.0 * np.pi) * np.log(r2 / (scale * scale))


@kernel
def discharge_well(dx, dy, rate, radius):
    """Discharge vector (m2/d) at dx, dy (m) from the centre."""
    f = -rate / (2.0 * np.pi * max(dx * dx + dy * dy, radius * radius))
    return f * dx, f * dy
