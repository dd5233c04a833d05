"""Raw path segments → Stroke records: curves flattened, everything in page px."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import project
from curvefit.records import Stroke

__all__ = ["smoothed", "strokes_of"]

Array = NDArray[np.float64]
MOVE, BEZIER, CLOSE = 0, 2, 4
FLATNESS = 0.01  #: px between a curve and the chords that stand for it
HAIRLINE = 1.0  #: px; a width of 0 asks for the thinnest line that the device can draw


def strokes_of(
    styles: list[dict[str, Any]],
    points: bytes,
    kinds: bytes,
    to_page: Array,
    size: tuple[int, int],
) -> tuple[Stroke, ...]:
    """The strokes of a page, those outside it left out.

    Parameters
    ----------
    styles : colours, width and dashes of each path, its matrix and its number of segments
    points : (x, y) of every segment's point, page points, float64; kinds : a byte each, 0 move,
        1 line, 2 one of three points of a Bézier curve, + 4 closes the subpath
    to_page : array of shape (3, 3), page points → page px
    size : (width, height) of the page [px]
    """
    xy = project(to_page, np.frombuffer(points, float).reshape(-1, 2))
    codes = np.frombuffer(kinds, np.uint8)
    if not len(codes):
        return ()
    path = np.repeat(np.arange(len(styles)), [style["segments"] for style in styles])
    fresh = np.append(True, np.diff(path) > 0)  # a path begins with a move, whatever it says
    begins = np.nonzero(((codes & 3) == MOVE) | fresh)[0]
    closed = np.bitwise_or.reduceat(codes, begins) & CLOSE > 0
    dense, place = smoothed(xy, codes & np.uint8(3))
    starts = place[begins]
    stops = np.append(starts[1:], len(dense))
    low, high = np.minimum.reduceat(dense, starts), np.maximum.reduceat(dense, starts)
    seen = (stops - starts > 1) & (high > -0.5).all(1) & (low < size).all(1)
    scale = float(np.sqrt(abs(np.linalg.det(to_page[:2, :2]))))
    strokes: list[Stroke] = []
    for i in np.nonzero(seen)[0].tolist():
        number = int(path[begins[i]])
        line = dense[starts[i] : stops[i]]
        strokes += _painted(line, bool(closed[i]), styles[number], scale, number)
    return tuple(strokes)


def _painted(
    line: Array, closed: bool, style: dict[str, Any], scale: float, number: int
) -> Iterator[Stroke]:
    a, b, c, d, _, _ = style["matrix"]
    scale = scale * abs(a * d - b * c) ** 0.5
    outline = line if not closed or np.array_equal(line[0], line[-1]) else np.r_[line, line[:1]]
    if style["fill"] is not None and len(line) > 2:
        yield Stroke(outline, 0.0, tuple(style["fill"]), (), True, number)
    if style["stroke"] is not None:
        width = style["width"] * scale or HAIRLINE
        dash = tuple(v * scale for v in style["dash"])
        if not any(dash) or (dash[1::2] and not any(dash[1::2])):
            dash = ()
        yield Stroke(outline, width, tuple(style["stroke"]), dash, False, number)


def smoothed(xy: Array, codes: NDArray[np.uint8]) -> tuple[Array, NDArray[np.intp]]:
    """Path points with chords in place of Bézier curves, and where each given point went.

    Parameters
    ----------
    xy : array of shape (n, 2) [px]
    codes : array of shape (n,); 2 for each of the three points that follow a curve's first

    Notes
    -----
    m equal steps of the parameter keep the chords within 0.75 M/m² of the curve, M the largest
    second difference of the control points: a sixth of the second derivative's bound, which is
    divided by 8 m² for a chord.
    """
    count = np.ones(len(codes), np.intp)
    ends = _curve_ends(codes)
    control = xy[ends[:, None] + np.arange(-3, 1)]
    bend = control[:, :-2] - 2 * control[:, 1:-1] + control[:, 2:]
    most = np.hypot(bend[..., 0], bend[..., 1]).max(1, initial=0.0)
    steps = np.clip(np.ceil(np.sqrt(0.75 * most / FLATNESS)), 1, 2000).astype(np.intp)
    count[ends - 1] = count[ends - 2] = 0
    count[ends] = steps
    place = np.cumsum(count) - count
    dense = np.empty((int(count.sum()), 2))
    plain = np.ones(len(codes), bool)
    plain[(ends[:, None] + np.arange(-2, 1)).ravel()] = False
    dense[place[plain]] = xy[plain]
    for m in np.unique(steps):
        these = np.nonzero(steps == m)[0]
        t = (np.arange(1, m + 1) / m)[:, None]
        basis = np.hstack([(1 - t) ** 3, 3 * (1 - t) ** 2 * t, 3 * (1 - t) * t * t, t**3])
        dense[place[ends[these]][:, None] + np.arange(m)] = basis @ control[these]
    return dense, place


def _curve_ends(codes: NDArray[np.uint8]) -> NDArray[np.intp]:
    """Indices of the last points of Bézier curves; points that make no whole curve are lines."""
    curved = codes == BEZIER
    change = np.diff(np.r_[False, curved, False].astype(np.int8))
    first, stop = np.nonzero(change > 0)[0], np.nonzero(change < 0)[0]
    ends = [np.arange(a + 2, b, 3) for a, b in zip(first, stop, strict=True) if a > 0]
    return np.concatenate(ends) if ends else np.zeros(0, np.intp)
