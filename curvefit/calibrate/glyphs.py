"""Printed characters on a straightened page, and the lines of text that they stand in."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["TextLine", "letters_of", "text_lines"]

Array = NDArray[np.float64]
Mask = NDArray[np.uint8]

_TIGHT = 0.32  # letters of one word stand closer than this share of their height
_LOOSE = 0.72  # words of one line stand closer than this


@dataclass(frozen=True, slots=True, eq=False)
class TextLine:
    """A row of characters: box (left, top, right, bottom) on the straightened page [px].

    vertical : the characters stand above each other (the text reads up or down).
    letters : (n, 4) their own boxes, in order along the line; zone : where it was found.
    """

    box: tuple[float, float, float, float]
    vertical: bool
    letters: Array
    zone: int

    @property
    def height(self) -> float:
        """Across the line [px]."""
        x0, y0, x1, y1 = self.box
        return (x1 - x0) if self.vertical else (y1 - y0)

    @property
    def length(self) -> float:
        x0, y0, x1, y1 = self.box
        return (y1 - y0) if self.vertical else (x1 - x0)


def letters_of(dark: Mask, tallest: float) -> tuple[Array, NDArray[np.int32], NDArray[np.int64]]:
    """Boxes (n, 4) of the components that may be characters, the label image and their labels.

    dark : 0/1 ink without the long lines. tallest : of a character [px].
    """
    import cv2

    count, label, stats, _ = cv2.connectedComponentsWithStats(dark, connectivity=8)
    x, y, w, h, area = stats[:, :5].T.astype(float)
    long_side = np.maximum(w, h)
    fill = area / (w * h)
    keep = (long_side <= tallest) & (area >= 3) & ~((long_side > 0.5 * tallest) & (fill > 0.9))
    keep[0] = False
    index = np.flatnonzero(keep)
    if len(index) > 6000:  # speckles: the largest are the text
        index = index[np.argsort(-area[index])[:6000]]
    boxes = np.c_[x, y, x + w, y + h][index]
    return boxes, label, index


def text_lines(boxes: Array, zones: NDArray[np.int64]) -> list[TextLine]:
    """Lines of text made of character boxes; characters of different zones never join.

    boxes : (n, 4) left, top, right, bottom. zones : (n,) inside which plot box each stands.
    """
    if not len(boxes):
        return []
    size = np.maximum(boxes[:, 2] - boxes[:, 0], boxes[:, 3] - boxes[:, 1])
    across = _blobs(boxes, zones, _TIGHT, along_x=True)
    upright = _blobs(boxes, zones, _TIGHT, along_x=False)
    strong = size >= 0.5 * np.median(size[size >= 5]) if (size >= 5).any() else size > 0
    n_across = np.bincount(across, strong.astype(float))[across]
    n_upright = np.bincount(upright, strong.astype(float))[upright]
    row = _blobs(boxes, zones, _LOOSE, along_x=True)
    in_row = np.bincount(row, strong.astype(float))[row]
    vertical = (n_upright > n_across) & (n_upright >= 2) & (n_upright >= in_row)
    lines = []
    for up in (False, True):
        mine = np.flatnonzero(vertical == up)
        if not len(mine):
            continue
        blob = _blobs(boxes[mine], zones[mine], _LOOSE, along_x=not up)
        for b in range(blob.max() + 1):
            line = _line(boxes[mine[blob == b]], up, int(zones[mine[blob == b][0]]))
            if line is not None:
                lines.append(line)
    return lines


def _line(letters: Array, vertical: bool, zone: int) -> TextLine | None:
    lo, hi = letters[:, :2].min(0), letters[:, 2:].max(0)
    thick = (hi - lo)[0 if vertical else 1]
    tall = (letters[:, 2:] - letters[:, :2])[:, 0 if vertical else 1].max()
    if thick < 5 or tall < 5:
        return None
    order = np.argsort(letters[:, 1 if vertical else 0])
    return TextLine((*lo, *hi), vertical, letters[order], zone)


def _blobs(
    boxes: Array, zones: NDArray[np.int64], reach: float, along_x: bool
) -> NDArray[np.int64]:
    """Numbers of the chains of characters that follow each other along one direction."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    a, b = (0, 1) if along_x else (1, 0)
    order = np.argsort(boxes[:, a], kind="stable")
    s = boxes[order]
    n = len(s)
    lo, hi = s[:, a], s[:, a + 2]
    low, high = s[:, b], s[:, b + 2]
    tall = high - low
    middle = (low + high) / 2
    zone = zones[order]
    rows, cols = [], []
    biggest = float(tall.max())
    last = np.searchsorted(lo, hi + reach * biggest, side="right")
    for i in range(n):
        j = np.arange(i + 1, last[i])
        if not len(j):
            continue
        h = np.maximum(tall[i], tall[j])
        small = np.minimum(tall[i], tall[j])
        larger_low = np.where(tall[j] > tall[i], low[j], low[i])
        smaller_mid = np.where(tall[j] > tall[i], middle[i], middle[j])
        near = lo[j] - hi[i] <= reach * h
        level = (smaller_mid > larger_low - 0.12 * h) & (smaller_mid < larger_low + 1.12 * h)
        alike = (small > 0.3 * h) | (np.minimum(hi[i] - lo[i], hi[j] - lo[j]) < 0.9 * h)
        j = j[near & level & alike & (zone[j] == zone[i])]
        rows.append(np.full(len(j), i))
        cols.append(j)
    r = np.concatenate(rows) if rows else np.zeros(0, int)
    c = np.concatenate(cols) if cols else np.zeros(0, int)
    graph = coo_array((np.ones(len(r)), (r, c)), shape=(n, n))
    blob = connected_components(graph, directed=False)[1]
    out = np.empty(n, np.int64)
    out[order] = blob
    return out
