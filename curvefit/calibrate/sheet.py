"""A page's ink, made straight, with its long lines."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.lines import Line, long_lines
from curvefit.calibrate.rectify import rectification, segments
from curvefit.geometry import project

__all__ = ["Settings", "Sheet", "straighten"]

Array = NDArray[np.float64]
Image = NDArray[np.uint8]


@dataclass(frozen=True, slots=True)
class Settings:
    """work : long side [px] of the copy on which lines are looked for; shortest : the shortest
    line of interest, as a share of that side; smallest : the smallest plot box, as a share of the
    page's area; most_lines : of text read on a page, the nearest to the boxes first; most_pixels :
    of the straightened page; bow : a side that sags by more [px] bends the warp.
    """

    work: int = 2000
    shortest: float = 0.04
    smallest: float = 0.008
    most_lines: int = 420
    most_pixels: int = 60_000_000
    bow: float = 0.7


@dataclass(frozen=True, slots=True, eq=False)
class Sheet:
    """The ink of a page, and the same made straight.

    matrix : page px → straightened px. across, upright : long lines along x and y there.
    """

    ink: Image
    flat: Image
    matrix: Array
    across: list[Line]
    upright: list[Line]


def straighten(ink: Image, s: Settings) -> Sheet:
    """The page set square by the directions of its lines, and its long lines."""
    import cv2

    scale = min(1.0, s.work / max(ink.shape))
    small = _resized(ink, scale)
    shortest = int(s.shortest * max(small.shape))
    size = (small.shape[1], small.shape[0])
    rough = rectification(segments(small, 0.5 * shortest), size)
    to_small = np.array([[scale, 0, scale / 2 - 0.5], [0, scale, scale / 2 - 0.5], [0, 0, 1]])
    matrix, extent = _fitted(np.linalg.inv(to_small) @ rough @ to_small, ink.shape)
    flat = ink
    if extent[0] * extent[1] > s.most_pixels:  # the directions found are no page's
        matrix = np.eye(3)
    elif not np.array_equal(matrix, np.eye(3)):
        flat = np.asarray(cv2.warpPerspective(ink, matrix, extent), np.uint8)
    small = _resized(flat, scale)
    across, upright = (
        [_scaled(x, 1 / scale) for x in long_lines(small, along_x, shortest)]
        for along_x in (True, False)
    )
    return Sheet(ink, flat, matrix, across, upright)


def _fitted(matrix: Array, shape: tuple[int, ...]) -> tuple[Array, tuple[int, int]]:
    """The map shifted so that the whole page has positive places, and the (width, height) of it.

    A map that moves nothing by half a pixel is none: the pixels stay as they are.
    """
    h, w = shape[:2]
    corners = np.array([[0, 0], [w - 1, 0], [w - 1, h - 1], [0, h - 1]], float)
    moved = project(matrix, corners)
    if np.abs(moved - corners).max() < 0.4:
        return np.eye(3), (w, h)
    low = np.floor(moved.min(0))
    wide, tall = (int(v) for v in np.ceil(moved.max(0) - low) + 1)
    return np.array([[1, 0, -low[0]], [0, 1, -low[1]], [0, 0, 1]]) @ matrix, (wide, tall)


def _resized(image: Image, scale: float) -> Image:
    import cv2

    if scale >= 1:
        return image
    return np.asarray(
        cv2.resize(image, None, fx=scale, fy=scale, interpolation=cv2.INTER_AREA), np.uint8
    )


def _scaled(line: Line, k: float) -> Line:
    at, lo, hi = ((v + 0.5) * k - 0.5 for v in (line.at, line.lo, line.hi))
    return Line(at, lo, hi, line.weight)
