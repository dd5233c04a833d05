"""Linear least squares by orthogonal triangles, a chunk of rows at a time."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

__all__ = ["least_squares"]

Array = NDArray[np.float64]
CHUNK = 20_000  #: rows of the design held at a time, so that a million points need little memory


def least_squares(design: Callable[[slice], Array], value: Array) -> tuple[Array, Array, Array]:
    """The solution, the triangle R of the design, and the residuals.

    Parameters
    ----------
    design : gives the rows (n, k) of the design for a slice of the points
    value : (m,)

    Returns
    -------
    free : (k,) coefficients
    root : (k, k) upper triangle with RᵀR = XᵀX: the covariance is s²·(RᵀR)⁻¹
    residual : (m,)

    Notes
    -----
    The normal equations are never formed: they square the condition. One step of refinement on
    the residuals brings the last digits.
    """
    root, free = _solved(design, value)
    residual = _residual(design, value, free)
    free = free + _solved(design, residual)[1]
    return free, root, _residual(design, value, free)


def _parts(count: int) -> list[slice]:
    return [slice(start, start + CHUNK) for start in range(0, count, CHUNK)]


def _solved(design: Callable[[slice], Array], value: Array) -> tuple[Array, Array]:
    held: Array | None = None
    for part in _parts(len(value)):
        rows = np.c_[design(part), value[part]]
        stacked = rows if held is None else np.concatenate([held, rows])
        held = np.asarray(np.linalg.qr(stacked, mode="r"))
    assert held is not None
    k = held.shape[1] - 1
    root = held[:k, :k]
    return root, np.asarray(np.linalg.solve(root, held[:k, k]))


def _residual(design: Callable[[slice], Array], value: Array, free: Array) -> Array:
    out = np.empty(len(value))
    for part in _parts(len(value)):
        out[part] = value[part] - design(part) @ free
    return out
