"""The smooth line through the corner points of a drawn polyline, and how well it is known.

Programs draw a curve as chords between points of it, rounded to a few decimals of a point. The
curve between two such points is not the chord: a cubic through the points comes closer by orders
of magnitude where the points lie on a smooth curve, and is no better where they do not.
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import arc_length

__all__ = ["smooth"]

Array = NDArray[np.float64]
FLOOR = 0.012  #: px: coordinates in steps of 0.01 pt, the coarsest that is common
CORNER = 25.0  #: degrees: a sharper turn is a corner of the line itself
STEP = 2.0  #: px between the points that come out


def smooth(xy: Array, bridged: NDArray[np.bool_]) -> tuple[Array, Array, NDArray[np.bool_], float]:
    """Points on the line, sigma [px], whether nothing was drawn there, distance of its corners.

    Parameters
    ----------
    xy : array of shape (n, 2), the drawn points
    bridged : array of shape (n,), whether nothing is drawn between a point and the one before

    Notes
    -----
    sigma holds the scatter of the drawn points about the smooth line (rounding, points left out
    by the program) and a third of the distance between chord and cubic between them.
    """
    keep = _apart(xy)
    bridged = np.bitwise_or.reduceat(bridged, keep)  # an empty stretch stays one
    xy = xy[keep]
    s = arc_length(xy)
    breaks = _corners(xy, bridged)
    points, sigmas, gaps = [], [], []
    for first, stop in pairwise(breaks):
        part = slice(first, stop + 1)
        p, u, g = _run(xy[part], s[part] - s[first], bridged[part])
        begin = 0 if first == 0 else 1
        points.append(p[begin:])
        sigmas.append(u[begin:])
        gaps.append(g[begin:])
    spacing = float(np.median(np.diff(s)))
    return np.concatenate(points), np.concatenate(sigmas), np.concatenate(gaps), spacing


def _apart(xy: Array) -> NDArray[np.intp]:
    """Indices of points that do not crowd: rounding would bend a cubic between such neighbours."""
    s = arc_length(xy)
    step = np.diff(s)
    least = min(1.0, 0.3 * float(np.median(step[step > 1e-6], axis=0))) if s[-1] > 0 else 0.0
    keep = [0]
    for i in range(1, len(s) - 1):
        if s[i] - s[keep[-1]] > least:
            keep.append(i)
    if len(keep) > 1 and s[-1] - s[keep[-1]] <= least:
        keep.pop()
    return np.array([*keep, len(s) - 1], np.intp)


def _corners(xy: Array, bridged: NDArray[np.bool_]) -> list[int]:
    """Indices of the ends and of every corner of the line; where nothing is drawn is none."""
    if len(xy) < 3:
        return [0, len(xy) - 1]
    d = np.diff(xy, axis=0)
    angle = np.unwrap(np.arctan2(d[:, 1], d[:, 0]))
    turn = np.degrees(np.abs(np.diff(angle)))
    usual = np.median(turn)
    sharp = (turn > CORNER) & (turn > 6 * usual) & ~bridged[1:-1] & ~bridged[2:]
    return [0, *(np.nonzero(sharp)[0] + 1).tolist(), len(xy) - 1]


def _run(xy: Array, s: Array, bridged: NDArray[np.bool_]) -> tuple[Array, Array, NDArray[np.bool_]]:
    """A stretch without corners, a point at each drawn one and every two px between."""
    from scipy.interpolate import CubicSpline

    at = _places(s)
    chord = np.column_stack([np.interp(at, s, xy[:, k]) for k in (0, 1)])
    gap = bridged[np.clip(np.searchsorted(s, at - 1e-9), 1, len(s) - 1)] & (at > 0)
    if len(s) < 4:
        return chord, np.where(gap, 0.03 * _span(at, s), 2 * FLOOR), gap
    noise = _scatter(xy, s)
    curve = CubicSpline(s, xy, axis=0)(at)
    between = np.hypot(*(curve - chord).T)
    sane = (between < 0.5 + 6 * noise + 0.02 * _span(at, s)) | gap
    curve = np.where(sane[:, None], curve, chord)
    sigma = np.hypot(np.hypot(FLOOR, noise), between / 3)
    sigma = np.where(gap, np.hypot(sigma, 0.006 * _span(at, s)), sigma)
    return curve, sigma, gap


def _places(s: Array) -> Array:
    """Arc lengths of all given points and of more between them, at most `STEP` apart."""
    n = np.maximum(np.ceil(np.diff(s) / STEP).astype(int), 1)
    if n.sum() > 4000:
        n = np.maximum((n * (4000 / n.sum())).astype(int), 1)
    parts = [np.linspace(a, b, k, endpoint=False) for a, b, k in zip(s[:-1], s[1:], n, strict=True)]
    return np.append(np.concatenate(parts), s[-1])


def _span(at: Array, s: Array) -> Array:
    """Distance between the drawn points around each place."""
    i = np.clip(np.searchsorted(s, at), 1, len(s) - 1)
    return np.asarray(s[i] - s[i - 1])


def _scatter(xy: Array, s: Array) -> float:
    """How far the drawn points lie off a smooth line [px].

    Each point is compared with the cubic through its four neighbours; the weights of the
    neighbours tell how much of the difference is the point's own.
    """
    if len(s) < 7:
        return 2 * FLOOR
    i = np.arange(2, len(s) - 2)
    others = np.stack([i - 2, i - 1, i + 1, i + 2])
    weight = np.ones((4, len(i)))
    for j in range(4):
        for k in range(4):
            if k != j:
                weight[j] *= (s[i] - s[others[k]]) / (s[others[j]] - s[others[k]])
    guess = (weight[:, :, None] * xy[others]).sum(0)
    off = xy[i] - guess
    tangent = xy[i + 1] - xy[i - 1]
    size = np.maximum(np.hypot(*tangent.T), 1e-9)
    across = np.abs(off[:, 0] * tangent[:, 1] - off[:, 1] * tangent[:, 0]) / size
    return float(np.median(across / np.sqrt(1 + (weight**2).sum(0))) * 1.4826)
