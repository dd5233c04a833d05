"""Raw path segments → Stroke records: curves flattened, everything in page px."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import project
from curvefit.records import Stroke

__all__ = ["flattened", "strokes_of"]

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
    scale = float(np.sqrt(abs(np.linalg.det(to_page[:2, :2]))))
    strokes: list[Stroke] = []
    start = 0
    for number, style in enumerate(styles):
        stop = start + style["segments"]
        for line, closed in _subpaths(xy[start:stop], codes[start:stop]):
            if _inside(line, size):
                strokes += _painted(line, closed, style, scale, number)
        start = stop
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


def _inside(line: Array, size: tuple[int, int]) -> bool:
    low, high = line.min(0), line.max(0)
    return bool(
        np.isfinite(line).all() and (high >= -0.5).all() and low[0] < size[0] and low[1] < size[1]
    )


def _subpaths(xy: Array, codes: NDArray[np.uint8]) -> Iterator[tuple[Array, bool]]:
    """(polyline, whether it is closed) for each subpath of two points or more."""
    begins = np.nonzero((codes & 3) == MOVE)[0]
    for first, stop in zip(begins, [*begins[1:], len(codes)], strict=True):
        if stop - first < 2:
            continue
        part = codes[first:stop]
        line = xy[first:stop]
        if ((part & 3) == BEZIER).any():
            line = _smooth(line, part)
        yield line, bool((part & CLOSE).any())


def _smooth(points: Array, codes: NDArray[np.uint8]) -> Array:
    """One subpath with its Bézier curves flattened."""
    pieces = [points[:1]]
    i = 1
    while i < len(points):
        if codes[i] & 3 == BEZIER and i + 2 < len(points):
            pieces.append(flattened(np.r_[pieces[-1][-1:], points[i : i + 3]])[1:])
            i += 3
        else:
            pieces.append(points[i : i + 1])
            i += 1
    return np.concatenate(pieces)


def flattened(control: Array) -> Array:
    """A cubic Bézier curve as a polyline that stays within 0.01 px of it; shape (n, 2).

    Parameters
    ----------
    control : array of shape (4, 2), the control points [px]

    Notes
    -----
    n equal steps of the parameter keep the chords within 0.75 M/n² of the curve, M the largest
    second difference of the control points: a sixth of the second derivative's bound, which is
    divided by 8 n² for a chord.
    """
    bend = control[:-2] - 2 * control[1:-1] + control[2:]
    most = float(np.hypot(*bend.T).max())
    n = int(np.clip(np.ceil(np.sqrt(0.75 * most / FLATNESS)), 1, 2000))
    t = np.linspace(0.0, 1.0, n + 1)[:, None]
    s = 1.0 - t
    basis = np.hstack([s**3, 3 * s * s * t, 3 * s * t * t, t**3])
    return np.asarray(basis @ control)
