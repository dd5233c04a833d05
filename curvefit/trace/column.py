"""A left-to-right line as a function of the column, and the run of ink that it stands in."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.trace.centre import Line
from curvefit.trace.ink import Layer

__all__ = ["Run", "columns_of", "run_around", "slope_of"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Run:
    """The vertical run of ink around a line in each column: top, bottom edge [px]; NaN: none."""

    top: Array
    bottom: Array

    @property
    def height(self) -> Array:
        """[px]"""
        return self.bottom - self.top


def columns_of(line: Line) -> tuple[Array, Array]:
    """Whole columns under a line and its height in each."""
    order = np.argsort(line.xy[:, 0], kind="stable")
    x, y = line.xy[order].T
    at = np.arange(np.ceil(x[0]), np.floor(x[-1]) + 1)
    return at, np.interp(at, x, y)


def slope_of(x: Array, y: Array, reach: int = 15) -> Array:
    """Smoothed slope dy/dx in each column."""
    from scipy.ndimage import gaussian_filter1d

    if len(y) < 5:
        return np.zeros_like(y)
    return np.asarray(np.gradient(gaussian_filter1d(y, reach / 2.5, mode="nearest"), x))


def run_around(layer: Layer, x: Array, y: Array, reach: float) -> Run:
    """The run of ink that contains (x, y), up to `reach` px to either side of y."""
    import cv2

    step = 0.25
    offsets = np.arange(-reach, reach + step / 2, step)
    px = np.broadcast_to(x[:, None], (len(x), len(offsets))).astype(np.float32)
    py = (y[:, None] + offsets).astype(np.float32)
    strip = cv2.remap(layer.lines, np.ascontiguousarray(px), py, cv2.INTER_LINEAR)
    middle = len(offsets) // 2
    near = slice(middle - int(1.5 / step), middle + int(1.5 / step) + 1)
    start = middle - int(1.5 / step) + strip[:, near].argmax(1)
    peak = strip[np.arange(len(x)), start]
    above = strip > np.maximum(0.5 * np.minimum(peak, 1.0), 0.15)[:, None]
    index = np.arange(len(offsets))
    left = np.where(~above & (index <= start[:, None]), index, -1).max(1)
    right = np.where(~above & (index >= start[:, None]), index, len(offsets)).min(1)
    ok = (peak > 0.3) & (left >= 0) & (right < len(offsets))
    top = np.where(ok, y + offsets[np.clip(left, 0, None)] + step / 2, np.nan)
    bottom = np.where(ok, y + offsets[np.clip(right, 0, len(offsets) - 1)] - step / 2, np.nan)
    return Run(top, bottom)
