"""Least squares with a few exact side conditions, factorised once for many right-hand sides."""

from dataclasses import dataclass

import numpy as np
import scipy.linalg

from ..elements.field_arrays import Floats


@dataclass(frozen=True)
class Factor:
    """min |A x - b| subject to B x = d: columns scaled to unit norm, conditions eliminated by Householder
    reflections, normal equations by Cholesky with one step of refinement (QR where Cholesky fails).
    """

    matrix: Floats  # A Q of the scaled columns, (m, n)
    scale: Floats  # (n,)
    reflectors: tuple[np.ndarray, np.ndarray] | None  # raw QR of B^T
    triangle: Floats  # R of B^T, (k, k)
    cholesky: tuple[np.ndarray, bool] | None
    qr: tuple[np.ndarray, np.ndarray] | None

    def solve(self, b: Floats, d: Floats) -> Floats:
        """Solution x (n,) or (n, r) of b (m,) or (m, r) and d (k,) or (k, r)."""
        k = self.triangle.shape[0]
        fixed = scipy.linalg.solve_triangular(self.triangle, d, trans="T") if k else np.zeros((0, *b.shape[1:]))
        free_matrix = self.matrix[:, k:]
        rest = b - self.matrix[:, :k] @ fixed
        free = self._inner(rest)
        free = free + self._inner(rest - free_matrix @ free)
        y = np.concatenate([fixed, free])
        if self.reflectors is not None:
            y = _multiply(self.reflectors, y if y.ndim == 2 else y[:, None], "L").reshape(y.shape)
        return y * (self.scale if y.ndim == 1 else self.scale[:, None])

    def _inner(self, b: Floats) -> Floats:
        k = self.triangle.shape[0]
        if self.cholesky is not None:
            return scipy.linalg.cho_solve(self.cholesky, self.matrix[:, k:].T @ b, check_finite=False)
        assert self.qr is not None
        return scipy.linalg.solve_triangular(self.qr[1], self.qr[0].T @ b)


def factorise(matrix: Floats, conditions: Floats) -> Factor:
    """Factor of A (m, n) with conditions B (k, n); raises LinAlgError when the unknowns are not determined."""
    norm = np.linalg.norm(matrix, axis=0)
    scale = 1.0 / np.where(norm > 0, norm, 1.0)
    scaled = np.asfortranarray(matrix * scale)
    k = conditions.shape[0]
    reflectors, triangle = None, np.zeros((0, 0))
    if k:
        raw = scipy.linalg.qr((conditions * scale).T, mode="raw")
        reflectors, triangle = raw[0], np.triu(raw[1][:k])
        scaled = _multiply(reflectors, scaled, "R")
    free = scaled[:, k:]
    normal = free.T @ free
    try:
        return Factor(scaled, scale, reflectors, triangle, scipy.linalg.cho_factor(normal, check_finite=False), None)
    except np.linalg.LinAlgError:
        q, r = scipy.linalg.qr(free, mode="economic")
        diagonal = abs(np.diag(r))
        if diagonal.min() < 1e-13 * diagonal.max():
            raise
        return Factor(scaled, scale, reflectors, triangle, None, (q, r))


def _multiply(reflectors: tuple[np.ndarray, np.ndarray], c: Floats, side: str) -> Floats:
    """Q c (side L) or c Q (side R) with Q in LAPACK's reflector form."""
    if c.size == 0:  # no rows: a field that its side conditions fix alone
        return c
    out, _, info = scipy.linalg.lapack.dormqr(
        side, "N", reflectors[0], reflectors[1], np.asfortranarray(c), 64 * max(c.shape)
    )
    if info != 0:
        raise np.linalg.LinAlgError("the reflections could not be applied")
    return out
