"""The flow field: a superposition that anyone can evaluate, immutable and picklable."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from . import kernels_field
from .aquifer import Aquifer
from .blocks import in_blocks
from .field_arrays import FieldArrays, Floats, Panels, log_moments, no_panels, panel_moments, ring_arrays
from .kernels_line import N_COEF
from .recharge import RechargeArea
from .regional_flow import RegionalFlow
from .well import PumpingWell


@dataclass(frozen=True)
class FlowField:
    """Steady flow in one layer.

    All methods take x, y in map coordinates (m), scalars or arrays of one shape, and return float64 of that shape.
    ``origin`` (m) is subtracted first, so that map coordinates of seven digits lose nothing.
    """

    aquifer: Aquifer
    arrays: FieldArrays
    origin: tuple[float, float]

    def potential(self, x: ArrayLike, y: ArrayLike) -> NDArray[np.float64]:
        """Discharge potential Phi (m3/d); negative where the aquifer is dry."""
        return self._evaluate(kernels_field.potentials, x, y, 1)[0]

    def head(self, x: ArrayLike, y: ArrayLike) -> NDArray[np.float64]:
        """Head (m); the base of the aquifer where it is dry."""
        return self.aquifer.head(self.potential(x, y))

    def discharge(self, x: ArrayLike, y: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Discharge vector Qx, Qy (m2/d) = -grad Phi; on a line sink the mean of its two sides."""
        qx, qy = self._evaluate(kernels_field.discharges, x, y, 2)
        return qx, qy

    def velocity(self, x: ArrayLike, y: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Mean velocity of the water vx, vy (m/d): discharge / (porosity x saturated thickness); inf where dry."""
        qx, qy = self.discharge(x, y)
        with np.errstate(divide="ignore"):
            slow = 1.0 / (self.aquifer.porosity * self.aquifer.saturated_thickness(self.potential(x, y)))
        return qx * slow, qy * slow

    def stream_function(self, x: ArrayLike, y: ArrayLike) -> NDArray[np.float64]:
        """Stream function Psi (m3/d), with cuts from wells and line ends towards -x.

        Raises ValueError where recharge acts: no stream function exists there.
        """
        if np.any(self.arrays.ring[:, 3] != 0.0):
            raise ValueError("no stream function exists where recharge acts")
        return self._evaluate(kernels_field.stream_functions, x, y, 1)[0]

    def recharge(self, x: ArrayLike, y: ArrayLike) -> NDArray[np.float64]:
        """Recharge rate (m/d) at each point."""
        return self._evaluate(kernels_field.recharges, x, y, 1)[0]

    def _evaluate(self, driver: Callable, x: ArrayLike, y: ArrayLike, n_out: int) -> list[NDArray[np.float64]]:
        """Broadcast, localise, run a driver over contiguous points, give back the shape."""
        xs, ys = np.broadcast_arrays(np.asarray(x, dtype=float), np.asarray(y, dtype=float))
        local_x = np.ascontiguousarray(xs.ravel() - self.origin[0])
        local_y = np.ascontiguousarray(ys.ravel() - self.origin[1])
        out = [np.empty(local_x.size) for _ in range(n_out)]
        in_blocks(lambda s: driver(local_x[s], local_y[s], self.arrays, *(a[s] for a in out)), local_x.size)
        return [a.reshape(xs.shape) for a in out]


def superpose(
    aquifer: Aquifer,
    *,
    origin: tuple[float, float] = (0.0, 0.0),
    scale: float = 1.0,
    constant: float = 0.0,
    flow: RegionalFlow | None = None,
    wells: Sequence[PumpingWell] = (),
    areas: Sequence[RechargeArea] = (),
    panels: Panels | None = None,
    coef: Floats | None = None,
    jump: Floats | None = None,
) -> FlowField:
    """Flow field of elements whose strengths are all known.

    origin (m): map coordinates of the local zero; scale (m): the length inside every logarithm; constant (m3/d).
    panels (p): in local coordinates, with coef (p, N_COEF) in m2/d and jump (p,) in m3/d.
    """
    x0, y0 = origin
    uniform = np.array([0.0, 0.0, 0.0, 0.0, constant, np.log(scale)])
    if flow is not None:
        uniform[:4] = flow.qx, flow.qy, flow.x0 - x0, flow.y0 - y0
    rows = [[w.x - x0, w.y - y0, w.rate, w.radius] for w in wells]
    shape = no_panels() if panels is None else panels
    strengths = np.zeros((len(shape.kind), N_COEF)) if coef is None else np.ascontiguousarray(coef, dtype=float)
    jumps = np.zeros(len(shape.kind)) if jump is None else np.ascontiguousarray(jump, dtype=float)
    moment = panel_moments(shape, strengths)
    arrays = FieldArrays(
        uniform,
        np.array(rows, dtype=float).reshape(-1, 4),
        *shape,
        strengths,
        jumps,
        moment,
        log_moments(moment),
        *ring_arrays(list(areas), x0, y0),
    )
    return FlowField(aquifer, arrays, origin)
