"""Series of the far elements in square cells, so that a point pays for its neighbourhood alone.

The ground of a box is cut into a tree of squares. In each, all elements farther from its centre c than APART times
its half diagonal act through two Taylor series in z - c: W = Qx - i Qy = A(z) + conj(z - c) G(z) / 2. Without
recharge G = 0. Every edge of a recharge area is an element of its own: by Cauchy-Pompeiu the area with rate N gives

    W = sum_edges -(N/2) (1/2 pi i) int conj(z' - z)/(z' - z) dz' = sum_edges [E(z) + (N/2) conj(z - c) g(z)],

g = ln((z2 - z)/(z1 - z))/(2 pi i), E the same integral with conj(z' - c): both are analytic off the edge, and the sum
of N g over all edges is the recharge at z. So G is the rate that covers the square where no edge is near.

Truncation: a term of order k falls by APART^-k at the corners, so that N_TERM terms leave at most APART^-N_TERM
(3e-13) of each far element's own discharge there. The coefficients come from N_TERM places on the circle through the
corners (Cauchy's integral by the trapezoidal rule, whose aliasing is of the same size).
"""

import numpy as np

from .field_arrays import FieldArrays
from .kernels_local import N_TERM, grow
from .local_tree import LocalArrays

DEEPEST = 7  # halvings of the box
FEW = 2  # a square with no more elements near it is not cut
ROOM = 4096  # squares to begin with


def local_arrays(field: FieldArrays, box: tuple[float, float, float, float], deepest: int = DEEPEST) -> LocalArrays:
    """The tree over a box x0, x1, y0, y1 (local m); ``deepest`` 0 leaves direct summation everywhere."""
    x0, x1, y0, y1 = box
    half = max(x1 - x0, y1 - y0, 1e-9) / 2.0**0.5
    rates = np.repeat(field.ring[:, 3], np.diff(field.ring_start))
    elements = (
        field.uniform, field.wells, field.panel, field.kind, field.vortex, field.n_coef, field.coef, field.moment,
        field.edge, rates,
    )  # fmt: skip
    n_elements = len(field.kind) + len(field.wells) + len(rates)
    squares = ROOM if deepest > 0 else 2
    while True:
        tree = LocalArrays(
            *elements, np.zeros((squares, 3)), np.full(squares, -1, dtype=np.int64),
            np.zeros((squares, 2, N_TERM), dtype=np.complex128), np.zeros((squares, 4), dtype=np.int64),
            np.zeros(8 * squares + 2 * n_elements, dtype=np.int64),
        )  # fmt: skip
        n, n_near = grow(tree, 0.5 * (x0 + x1), 0.5 * (y0 + y1), half, deepest, FEW)
        if n > 0:
            break
        squares *= 2
    return tree._replace(
        square=tree.square[:n].copy(), child=tree.child[:n].copy(), series=tree.series[:n].copy(),
        part=tree.part[:n].copy(), near=tree.near[:n_near].copy(),
    )  # fmt: skip
