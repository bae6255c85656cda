"""The tree of ``local_arrays`` as the kernels see it."""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from .field_arrays import Floats, Ints
from .jit import kernel, unowned


class LocalArrays(NamedTuple):
    """Tree over a field. Square 1 is the box; square 0 stands for everywhere else and lists every element as near."""

    uniform: Floats  # what is taken from FieldArrays
    wells: Floats
    panel: Floats
    kind: Ints
    vortex: Ints
    n_coef: Ints
    coef: Floats
    moment: Floats
    edge: Floats
    edge_rate: Floats  # (e,) m/d
    square: Floats  # (n, 3) centre x, y, half diagonal (m, local coordinates)
    child: Ints  # (n,) first of four squares that lie within, -1 for none
    series: NDArray[np.complex128]  # (n, 2, N_TERM) of A (m2/d) and G (m/d) in (z - c) / half diagonal
    part: Ints  # (n, 4) in ``near``: first panel, first well, first edge, end
    near: Ints  # indices of near panels, wells, edges, one square's after the other's


@kernel
def held_elsewhere(tree: LocalArrays) -> LocalArrays:
    """The tree for the time of a call, see ``unowned``."""
    return LocalArrays(
        unowned(tree.uniform),
        unowned(tree.wells),
        unowned(tree.panel),
        unowned(tree.kind),
        unowned(tree.vortex),
        unowned(tree.n_coef),
        unowned(tree.coef),
        unowned(tree.moment),
        unowned(tree.edge),
        unowned(tree.edge_rate),
        unowned(tree.square),
        unowned(tree.child),
        unowned(tree.series),
        unowned(tree.part),
        unowned(tree.near),
    )
