"""The page made straight: skew and perspective taken out by the directions of its lines."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

__all__ = ["rectification", "segments"]

Array = NDArray[np.float64]

_STEEPEST = np.radians(20.0)  # a page is skewed by less than this
_RIDGE = 2e-4  # holds the vanishing points at infinity where one line alone says nothing of them


def segments(ink: NDArray[np.uint8], shortest: float) -> Array:
    """Straight pieces of ink edges, (n, 4): x0, y0, x1, y1 [px], longer than `shortest`."""
    import cv2

    found = cv2.createLineSegmentDetector(cv2.LSD_REFINE_STD).detect(255 - ink)[0]
    if found is None:
        return np.zeros((0, 4))
    lines = np.asarray(found, float).reshape(-1, 4)
    return np.asarray(
        lines[np.hypot(lines[:, 2] - lines[:, 0], lines[:, 3] - lines[:, 1]) > shortest]
    )


def rectification(lines: Array, size: tuple[int, int]) -> Array:
    """The 3×3 map page px → straight px that sets both families of lines square.

    Parameters
    ----------
    lines : array of shape (n, 4)
        Segments x0, y0, x1, y1 [px].
    size : (width, height) of the page [px]; the page's centre keeps its place and scale.

    Notes
    -----
    Lines of one family pass through one vanishing point (1, a, p) (homogeneous, from the page
    centre): slope = a + p·(x·slope − y), linear in a and p at each segment's middle. Both are
    fitted by iteratively reweighted least squares with a small ridge on p.
    """
    scale = max(size) / 2.0
    centre = np.array([(size[0] - 1) / 2.0, (size[1] - 1) / 2.0])
    ends = (lines.reshape(-1, 2, 2) - centre) / scale
    mid, step = ends.mean(1), ends[:, 1] - ends[:, 0]
    weight = (step**2).sum(1)
    a, p = _vanishing(mid[:, 0], mid[:, 1], step[:, 0], step[:, 1], weight)
    b, q = _vanishing(mid[:, 1], mid[:, 0], step[:, 1], step[:, 0], weight)
    horizon = np.cross([1.0, a, p], [b, 1.0, q])
    tilt = np.eye(3)
    tilt[2] = horizon / horizon[2]
    square = np.eye(3)
    square[:2, :2] = np.linalg.inv([[1.0, b], [a, 1.0]])
    norm = np.array(
        [[1 / scale, 0, -centre[0] / scale], [0, 1 / scale, -centre[1] / scale], [0, 0, 1]]
    )
    matrix = np.linalg.inv(norm) @ square @ tilt @ norm
    return np.asarray(matrix / matrix[2, 2])


def _vanishing(x: Array, y: Array, dx: Array, dy: Array, weight: Array) -> tuple[float, float]:
    near = np.abs(dy) < np.tan(_STEEPEST) * np.abs(dx)
    if near.sum() < 2:
        return 0.0, 0.0
    x, y, w = x[near], y[near], weight[near]
    slope = dy[near] / dx[near]
    a, p = _mode(slope, w), 0.0
    for spread in (0.03, 0.02, 0.01, 0.005, 0.004, 0.003, 0.003):
        lever = x * slope - y
        off = slope - a - p * lever
        k = w / (1.0 + (off / spread) ** 2) ** 2
        normal = np.array([[k.sum(), (k * lever).sum()], [0.0, (k * lever**2).sum()]])
        normal[1, 0] = normal[0, 1]
        normal[1, 1] += _RIDGE * k.sum()
        a, p = np.linalg.solve(normal, [(k * slope).sum(), (k * lever * slope).sum()])
    return float(a), float(p)


def _mode(slope: Array, weight: Array) -> float:
    edges = np.linspace(-0.37, 0.37, 186)
    count = np.histogram(slope, edges, weights=weight)[0]
    smooth = np.convolve(count, [0.5, 1.0, 1.0, 1.0, 0.5], "same")
    i = int(np.argmax(smooth))
    return float((edges[i] + edges[i + 1]) / 2)
