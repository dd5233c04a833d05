"""Curves that a program drew as thin filled shapes: the middle between their two sides."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import arc_length, resample

__all__ = ["middle_line"]

Array = NDArray[np.float64]
THICK = 14.0  #: px: a line is no wider
LONG = 2.5  #: … and so many times longer than wide
TURNED = -0.4  #: cosine between the directions before and after a tip


def middle_line(outline: Array) -> tuple[Array, float] | None:
    """The centre line and width [px] of a thin filled shape; None where it is no line.

    Parameters
    ----------
    outline : array of shape (n, 2), closed or not

    Notes
    -----
    The tips are where the outline turns back within its own width; the centre line halves the
    way between the two sides at like shares of their lengths.
    """
    ring = outline[:-1] if np.allclose(outline[0], outline[-1]) else outline
    if len(ring) < 4:
        return None
    x, y = ring.T
    area = 0.5 * abs(float(x @ np.roll(y, -1) - y @ np.roll(x, -1)))
    closed = np.vstack([ring, ring[:1]])
    around = float(arc_length(closed)[-1])
    width = 2 * area / max(around, 1e-9)
    if not 0.05 < width < THICK or around / 2 < LONG * width:
        return None
    tips = _tips(closed, around, width)
    if tips is None:
        return None
    one, other = _sides(closed, around, *tips)
    n = int(np.clip(around / 4, 8, 2000))
    share = np.linspace(0.0, 1.0, n)
    middle = (_along(one, share) + _along(other, share)) / 2
    apart = np.hypot(*(_along(one, share) - _along(other, share)).T)
    if np.median(apart) > 1.6 * width or apart.max() > 3 * width + 1:
        return None
    return _between_caps(middle, width), float(np.median(apart))


def _tips(closed: Array, around: float, width: float) -> tuple[float, float] | None:
    """Distances along the outline of the two places where it turns back."""
    step = max(width / 4, around / 6000)
    points = resample(closed, step)[:-1]
    n = max(round(2.0 * width / step), 2)
    ahead = np.roll(points, -n, 0) - points
    behind = points - np.roll(points, n, 0)
    cosine = (ahead * behind).sum(1) / np.maximum(np.hypot(*ahead.T) * np.hypot(*behind.T), 1e-9)
    turned = cosine < TURNED
    if not turned.any() or turned.all():
        return None
    start = int(np.nonzero(~turned)[0][0])
    rolled = np.roll(turned, -start)
    edges = np.diff(np.r_[0, rolled.astype(int), 0])
    first, last = np.nonzero(edges > 0)[0], np.nonzero(edges < 0)[0] - 1
    if len(first) != 2:
        return None
    spacing = around / len(points)
    at = ((first + last) / 2 + start) % len(points) * spacing
    return float(min(at)), float(max(at))


def _sides(closed: Array, around: float, a: float, b: float) -> tuple[Array, Array]:
    """The outline between the two tips, both ways."""
    s = arc_length(closed)

    def place(d: float) -> Array:
        return np.array([np.interp(d, s, closed[:, k]) for k in (0, 1)])

    inner = (s > a) & (s < b)
    one = np.vstack([place(a), closed[inner], place(b)])
    after, before = closed[:-1][s[:-1] > b], closed[:-1][s[:-1] < a]
    other = np.vstack([place(b), after, before, place(a)])[::-1]
    return one, other


def _along(line: Array, share: Array) -> Array:
    s = arc_length(line)
    return np.column_stack([np.interp(share * s[-1], s, line[:, k]) for k in (0, 1)])


def _between_caps(middle: Array, width: float) -> Array:
    """The centre line with its first and last stretch, where the sides meet, made straight on."""
    s = arc_length(middle)
    inner = (s > width) & (s < s[-1] - width)
    if inner.sum() < 4:
        return middle[[0, -1]]
    core = middle[inner]
    return np.vstack([_end(core[::-1], middle[0])[::-1], core, _end(core, middle[-1])])


def _end(core: Array, tip: Array) -> Array:
    """The tip moved onto the line that the last points of the core point along."""
    direction = core[-1] - core[-min(4, len(core))]
    size = float(np.hypot(*direction))
    if size < 1e-9:
        return tip[None]
    direction = direction / size
    return np.asarray((core[-1] + max(float((tip - core[-1]) @ direction), 0.0) * direction)[None])
