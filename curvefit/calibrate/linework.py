"""Curves and other long strokes inside the plot boxes, told from the characters that touch them."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

__all__ = ["character_size", "crossings", "long_strokes"]

Image = NDArray[np.uint8]
Mask = NDArray[np.bool_]

_SIZE = 16  # of a character [px] on the copy that strokes are looked for on
_LONGEST = 1.7  # no stroke of a character runs on so straight for so many times its size
_DIRECTIONS = 40


def character_size(dark: Image, smallest: float, tallest: float) -> float | None:
    """The usual long side of a character [px]; None where there are too few to tell.

    dark : 0/1 ink where text stands alone. tallest : of a character [px].
    """
    import cv2

    _, _, stats, _ = cv2.connectedComponentsWithStats(dark, connectivity=8)
    w, h, area = stats[1:, 2:].T.astype(float)
    size = np.maximum(w, h)
    some = (size >= smallest) & (size <= tallest) & (np.minimum(w, h) > 0.35 * size)
    some &= area < 0.75 * w * h
    return float(np.median(size[some])) if some.sum() >= 6 else None


def long_strokes(dark: Image, size: float) -> Mask:
    """Where strokes run straight for longer than characters do.

    Parameters
    ----------
    dark : array of shape (height, width), uint8
        0/1 ink, of the plot boxes alone.
    size : of a character [px].

    Notes
    -----
    Morphological opening by line elements in many directions on a copy on which characters are
    16 px tall; a curve is straight over that length to within its own thickness.

    References
    ----------
    Soille, P., Morphological Image Analysis, 2nd ed., Springer 2004, ch. 4.
    """
    import cv2

    k = min(1.0, _SIZE / size)
    small = cv2.resize(dark * 255, None, fx=k, fy=k, interpolation=cv2.INTER_AREA)
    small = (small > 90).astype(np.uint8)
    opened = np.zeros_like(small)
    for angle in np.arange(_DIRECTIONS) * np.pi / _DIRECTIONS:
        element = _element(_LONGEST * size * k, float(angle))
        opened |= cv2.morphologyEx(small, cv2.MORPH_OPEN, element)
    opened = cv2.dilate(opened, np.ones((3, 3), np.uint8))
    found = cv2.resize(opened, dark.shape[::-1], interpolation=cv2.INTER_NEAREST)
    return np.asarray(dark & found) > 0


def crossings(left: Image, strokes: Mask, margin: float) -> Mask:
    """Pieces of the strokes that close the gaps in what crosses them.

    left : 0/1 ink without the strokes. margin : how much wider than a stroke the gap in it is [px].
    """
    import cv2

    closed = np.zeros_like(left)
    reach = _thickness(strokes) + margin
    for angle in np.arange(8) * np.pi / 8:
        closed |= cv2.morphologyEx(left, cv2.MORPH_CLOSE, _element(reach, float(angle)))
    return np.asarray(strokes & (closed > 0))


def _element(length: float, angle: float) -> Image:
    import cv2

    r = round(length / 2)
    out = np.zeros((2 * r + 1, 2 * r + 1), np.uint8)
    x, y = r * np.cos(angle), r * np.sin(angle)
    cv2.line(out, (round(r - x), round(r - y)), (round(r + x), round(r + y)), 1, 1)
    return out


def _thickness(strokes: Mask) -> float:
    """Thickness of the thickest lines among the strokes [px]."""
    import cv2

    depth = cv2.distanceTransform(strokes.astype(np.uint8), cv2.DIST_L2, 3)[strokes]
    return 2.0 * float(np.percentile(depth, 95)) if depth.size else 1.0
