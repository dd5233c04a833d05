"""Points and maps in the plane: pixel frames, homographies, polylines.

Pixels: x to the right, y down, the centre of the top-left pixel at (0, 0).
Points are arrays of shape (n, 2), float64.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

__all__ = ["Warp", "arc_length", "homography", "project", "resample"]

Array = NDArray[np.float64]


def project(matrix: ArrayLike, xy: ArrayLike) -> Array:
    """Points mapped by a 3×3 homography.

    Parameters
    ----------
    matrix : array of shape (3, 3)
    xy : array of shape (n, 2)

    Returns
    -------
    array of shape (n, 2)
    """
    points = np.asarray(xy, float).reshape(-1, 2)
    h = np.c_[points, np.ones(len(points))] @ np.asarray(matrix, float).T
    return np.asarray(h[:, :2] / h[:, 2:])


def homography(source: ArrayLike, target: ArrayLike) -> Array:
    """The 3×3 matrix that maps four or more source points onto target points (least squares, DLT).

    Parameters
    ----------
    source, target : arrays of shape (n, 2), n >= 4

    Notes
    -----
    Points are centred and scaled first (Hartley's normalisation), so that the result does not
    depend on the pixel unit.

    References
    ----------
    Hartley, R., "In defense of the eight-point algorithm", IEEE TPAMI 19 (1997) 580.
    """
    src, dst = np.asarray(source, float), np.asarray(target, float)
    ts, td = _normaliser(src), _normaliser(dst)
    s, d = project(ts, src), project(td, dst)
    zero, one = np.zeros(len(s)), np.ones(len(s))
    rows_x = np.c_[s, one, zero, zero, zero, -d[:, :1] * s, -d[:, 0]]
    rows_y = np.c_[zero, zero, zero, s, one, -d[:, 1:] * s, -d[:, 1]]
    _, _, vt = np.linalg.svd(np.vstack([rows_x, rows_y]))
    matrix = np.linalg.inv(td) @ vt[-1].reshape(3, 3) @ ts
    return np.asarray(matrix / matrix[2, 2])


def _normaliser(points: Array) -> Array:
    centre = points.mean(0)
    spread = max(float(np.sqrt(((points - centre) ** 2).sum(1)).mean()), 1e-12)
    k = np.sqrt(2) / spread
    return np.array([[k, 0, -k * centre[0]], [0, k, -k * centre[1]], [0, 0, 1]])


@dataclass(frozen=True, slots=True)
class Warp:
    """The map between page pixels and the straightened pixels of one plot box.

    A homography takes out skew and perspective; `bend` takes out a smooth bow (page curl) that
    is left: straight = h + P(h), where P is a polynomial in u = 2x/w − 1, v = 2y/h − 1 with the
    terms of :meth:`terms`.

    Parameters
    ----------
    matrix : array of shape (3, 3)
        Page → box: the plot box is [0, width] × [0, height].
    size : (width, height) of the straightened plot box [px]
    bend : array of shape (n_terms, 2) or None
        Coefficients of P [px].
    """

    matrix: Array
    size: tuple[float, float]
    bend: Array | None = None

    @staticmethod
    def terms(u: Array, v: Array) -> Array:
        """The bend polynomial's terms, shape (n, 10): all products u^i v^j with i + j <= 3."""
        return np.stack([u**i * v**j for i in range(4) for j in range(4 - i)], axis=-1)

    def _bow(self, xy: Array) -> Array:
        if self.bend is None:
            return np.zeros_like(xy)
        w, h = self.size
        return np.asarray(self.terms(2 * xy[:, 0] / w - 1, 2 * xy[:, 1] / h - 1) @ self.bend)

    def to_panel(self, xy: ArrayLike) -> Array:
        """Page pixels → straightened box pixels; arrays of shape (n, 2)."""
        flat = project(self.matrix, xy)
        return np.asarray(flat + self._bow(flat))

    def to_page(self, xy: ArrayLike) -> Array:
        """Straightened box pixels → page pixels; arrays of shape (n, 2)."""
        flat = np.asarray(xy, float).reshape(-1, 2)
        straight = flat.copy()
        if self.bend is not None:
            for _ in range(20):  # the bow is a small fraction of the box: a fixed point
                straight = flat - self._bow(straight)
        return project(np.linalg.inv(self.matrix), straight)

    def then(self, other: Array) -> Warp:
        """This warp for pages whose pixels were mapped by `other` (new page → this page)."""
        return Warp(self.matrix @ other, self.size, self.bend)


def arc_length(xy: ArrayLike) -> Array:
    """Length along a polyline at each of its points; shape (n,)."""
    points = np.asarray(xy, float)
    return np.asarray(np.r_[0.0, np.cumsum(np.hypot(*np.diff(points, axis=0).T))])


def resample(xy: ArrayLike, step: float) -> Array:
    """The polyline with a point every `step` (its ends kept); shape (m, 2)."""
    points = np.asarray(xy, float)
    s = arc_length(points)
    n = max(int(np.ceil(s[-1] / step)), 1)
    t = np.linspace(0.0, s[-1], n + 1)
    return np.asarray(np.c_[np.interp(t, s, points[:, 0]), np.interp(t, s, points[:, 1])])
