"""Which of the followed lines are curves: doubles and remnants of the frame are left out."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from curvefit.trace.centre import Line

__all__ = ["is_frame", "own_ink", "without_doubles"]

Array = NDArray[np.float64]


def is_frame(line: Line, rows: Array, cols: Array, shape: tuple[int, ...], margin: int) -> bool:
    """Whether a line is what is left of the frame or of a grid line: straight and parallel to it.

    rows, cols : (n, 2) place and thickness of the paper's own lines [array px].
    """
    for axis, lines, size in ((1, rows, shape[0]), (0, cols, shape[1])):
        place = line.xy[:, axis]
        trend = np.polyfit(np.arange(len(place)), place, 1)[0] * len(place)
        if np.ptp(place) > 2.5 + 0.004 * len(place) or abs(trend) > 2.5:
            continue
        middle = float(np.median(place))
        known = np.r_[lines[:, 0], margin, size - 1 - margin]
        if np.abs(known - middle).min() < 2.5 + line.width:
            return True
    return False


def without_doubles(lines: list[Line], least: float) -> list[int]:
    """Indices of the lines that show enough ink that no better line has taken.

    least : ink that a line must have for itself [px], or half of its own where that is less.
    """
    order = sorted(range(len(lines)), key=lambda i: -float(lines[i].good.sum()))
    kept: list[int] = []
    for i in order:
        enough = min(least, 0.5 * float((lines[i].ink > 0.45).sum()))
        if own_ink(lines[i], [lines[k] for k in kept]) >= max(enough, 4.0):
            kept.append(i)
    return sorted(kept)


def own_ink(line: Line, others: list[Line]) -> float:
    """Length of ink along a line that is away from all others [px]."""
    from scipy.spatial import cKDTree

    own = line.ink > 0.45
    for other in others:
        distance, _ = cKDTree(other.xy).query(line.xy, distance_upper_bound=60.0)
        own &= distance > 0.55 * (line.width + other.width)
    return float(own.sum())
