"""Which of the followed lines are curves: no doubles, remnants of the frame, leader lines."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from curvefit.trace.centre import Line

__all__ = ["is_frame", "own_ink", "pointers", "without_doubles"]

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

    least : ink that a line must have for itself [px], or half of its own where that is less; a
        line that shares more than nine tenths of its ink is no other in any case.
    """
    order = sorted(range(len(lines)), key=lambda i: -float(lines[i].good.sum()))
    kept: list[int] = []
    for i in order:
        own = float((lines[i].ink > 0.45).sum())
        enough = min(max(least, 0.1 * own), 0.5 * own)
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


def pointers(lines: list[Line], words: Array, longest: float) -> set[int]:
    """Indices of the lines that lead from a label to a curve.

    Parameters
    ----------
    words : (n, 4) left, top, right, bottom of the labels, those of lines of equal efficiency,
        which may end on a curve themselves, left out [array px].
    longest : how long such a line may be [px].

    Notes
    -----
    A leader is thinner than the curve that its tip touches, begins within 1.2 text heights of a
    word, and is straight but for a shelf in the third of it next to the word.
    """
    long = [x for x in lines if np.hypot(*np.ptp(x.xy, axis=0)) > longest]
    return {
        i
        for i, line in enumerate(lines)
        if np.hypot(*np.ptp(line.xy, axis=0)) <= longest and len(line.xy) > 8
        if any(
            _beside_word(way[-1], words) and _straight(way) and _touches(line, way[0], long)
            for way in (line.xy, line.xy[::-1])
        )
    }


def _beside_word(end: Array, words: Array) -> bool:
    if not len(words):
        return False
    left, top, right, bottom = words.T
    reach = 1.2 * np.minimum(right - left, bottom - top)
    away = np.max([left - end[0], end[0] - right, top - end[1], end[1] - bottom], axis=0)
    return bool((away < reach).any())


def _straight(way: Array) -> bool:
    """Whether a line is straight over the two thirds from its tip."""
    part = way[: max(2 * len(way) // 3, 2)]
    chord = part[-1] - part[0]
    off = part - part[0]
    size = max(float(np.hypot(*chord)), 1e-9)
    bow = np.abs(off[:, 0] * chord[1] - off[:, 1] * chord[0]).max() / size
    return bool(bow < 0.8 + 0.012 * size)


def _touches(line: Line, tip: Array, curves: list[Line]) -> bool:
    """Whether the tip lies on a broader curve."""
    for curve in curves:
        away = np.hypot(*(curve.xy - tip).T).min()
        if away < 0.6 * (curve.width + line.width) + 3.0 and line.width < 0.85 * curve.width:
            return True
    return False
