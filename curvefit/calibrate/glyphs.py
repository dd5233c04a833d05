"""Printed characters on a straightened page, and the lines of text that they stand in."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Letters", "TextLine", "letters_of", "no_dashes", "pieces_of", "text_lines", "without"]

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Mask = NDArray[np.uint8]

_TIGHT = 0.32  # letters of one word stand closer than this share of their height
_LOOSE = 0.9  # words of one line stand closer than this
_APART = 0.5  # numbers of one line that stand farther apart than this are several


@dataclass(frozen=True, slots=True, eq=False)
class Letters:
    """Components of ink that may be characters, on the straightened page [px].

    boxes : (n, 4) left, top, right, bottom. index : (n,) their labels in `label`.
    bar : (n,) whether it is one straight stroke: a dash, a 1, a piece of a curve.
    """

    boxes: Array
    index: Ints
    label: NDArray[np.int32]
    bar: NDArray[np.bool_]

    @property
    def speck(self) -> NDArray[np.bool_]:
        """Which are too small for a character of their own."""
        return np.asarray((self.boxes[:, 2:] - self.boxes[:, :2]).max(1) < 6)

    def of(self, keep: NDArray[np.bool_]) -> Letters:
        return Letters(self.boxes[keep], self.index[keep], self.label, self.bar[keep])


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


def letters_of(dark: Mask, tallest: float) -> Letters:
    """The components that may be characters.

    dark : 0/1 ink without the long lines. tallest : of a character [px].
    """
    import cv2

    _, label, stats, _ = cv2.connectedComponentsWithStats(dark, connectivity=8)
    x, y, w, h, area = stats[:, :5].T.astype(float)
    long_side = np.maximum(w, h)
    keep = (long_side <= tallest) & (area >= 3)
    keep[0] = False
    index = np.flatnonzero(keep)
    if len(index) > 6000:  # speckles: the largest are the text
        index = np.sort(index[np.argsort(-area[index])[:6000]])
    boxes = np.c_[x, y, x + w, y + h][index]
    bar = np.array(
        [_is_bar(label, b.astype(int), int(i)) for b, i in zip(boxes, index, strict=True)]
    )
    return Letters(boxes, index, label, bar.astype(bool))


def _is_bar(label: NDArray[np.int32], box: Ints, index: int) -> bool:
    """Whether a component is one straight stroke: as much ink as a bar of its two spreads holds."""
    x0, y0, x1, y1 = box
    if max(x1 - x0, y1 - y0) < 5:
        return False
    y, x = np.nonzero(label[y0:y1, x0:x1] == index)
    spread = np.linalg.eigvalsh(np.cov(np.c_[x, y].T) + np.eye(2) / 12)
    return bool(len(x) > 0.85 * 12 * np.sqrt(spread[0] * spread[1]) and spread[1] > 3.2 * spread[0])


def text_lines(letters: Letters, zones: Ints) -> list[TextLine]:
    """Lines of text made of characters; characters of different zones never join.

    zones : (n,) the plot box that each stands in, 0 outside.
    """
    boxes = letters.boxes
    if not len(boxes):
        return []
    size = np.maximum(boxes[:, 2] - boxes[:, 0], boxes[:, 3] - boxes[:, 1])
    strong = (size >= 0.5 * np.median(size[size >= 5])) if (size >= 5).any() else size > 0

    def company(reach: float, along_x: bool) -> Array:
        blob = _blobs(boxes, zones, reach, along_x)
        return np.asarray(np.bincount(blob, strong.astype(float))[blob])

    up = company(_TIGHT, False)
    vertical = (up >= 2) & (up > company(_TIGHT, True)) & (up >= company(0.72, True))
    up = np.zeros(len(boxes))
    column = _blobs(boxes[vertical], zones[vertical], _TIGHT, False)
    up[vertical] = np.bincount(column)[column] if len(column) else 0
    vertical &= up >= 2
    vertical |= _joins_column(boxes, vertical, company(_TIGHT, True))
    lines = []
    for along_x in (True, False):
        mine = np.flatnonzero(vertical != along_x)
        if not len(mine):
            continue
        blob = _blobs(boxes[mine], zones[mine], _LOOSE, along_x)
        for b in range(blob.max() + 1):
            line = _line(boxes[mine[blob == b]], not along_x, int(zones[mine[blob == b][0]]))
            if line is not None:
                lines.append(line)
    return lines


def no_dashes(letters: Letters, zones: Ints) -> NDArray[np.bool_]:
    """Which are no dashes or pieces of curves.

    Inside a box a bar counts only across the line of a character of its own height (as a 1 does).
    """
    out: NDArray[np.bool_] = np.asarray((zones == 0) | ~letters.bar, bool)
    real = letters.boxes[~letters.bar]
    if not len(real):
        return out
    tall = np.maximum(real[:, 2] - real[:, 0], real[:, 3] - real[:, 1])
    bars = letters.boxes[letters.bar]
    upright = bars[bars[:, 3] - bars[:, 1] > bars[:, 2] - bars[:, 0]]
    for i in np.flatnonzero(letters.bar & (zones > 0)):
        box = letters.boxes[i]
        size = float((box[2:] - box[:2]).max())
        along = int(np.argmin(box[2:] - box[:2]))  # the line runs across the bar
        gap = np.maximum(real[:, along] - box[along + 2], box[along] - real[:, along + 2])
        off = np.abs(real[:, [1 - along, 3 - along]] - box[[1 - along, 3 - along]]).max(1)
        near = (gap < 0.45 * size) & (off < 0.3 * size) & (np.abs(tall - size) < 0.25 * size)
        out[i] = bool(near.any()) or (along == 0 and _is_quote(box, real, tall, upright))
    return out


def _is_quote(box: Array, real: Array, tall: Array, upright: Array) -> bool:
    """Whether a short upright bar is one of a pair that hangs from the top behind a character."""
    size = box[3] - box[1]
    gap = box[0] - real[:, 2]
    behind = (gap > -0.2 * tall) & (gap < 0.8 * tall) & (np.abs(box[1] - real[:, 1]) < 0.2 * tall)
    behind &= (size > 0.2 * tall) & (size < 0.6 * tall)
    apart = np.maximum(upright[:, 0] - box[2], box[0] - upright[:, 2])
    twin = (np.abs(upright[:, [1, 3]] - box[[1, 3]]).max(1) < 0.3 * size) & (apart < size)
    return bool(behind.any() and np.count_nonzero(twin) == 2)  # itself and the other one


def _joins_column(boxes: Array, vertical: NDArray[np.bool_], in_row: Array) -> NDArray[np.bool_]:
    """Lone characters that stand right above or below a vertical word: an H before [m]."""
    out = np.zeros(len(boxes), bool)
    if not vertical.any():
        return out
    column = boxes[vertical]
    for i in np.flatnonzero(~vertical & (in_row <= 1)):
        x0, y0, x1, y1 = boxes[i]
        wide = np.maximum(column[:, 2] - column[:, 0], x1 - x0)
        gap = np.maximum(column[:, 1] - y1, y0 - column[:, 3])
        beside = np.maximum(column[:, 0] - (x0 + x1) / 2, (x0 + x1) / 2 - column[:, 2])
        alike = (x1 - x0) < 1.5 * (column[:, 2] - column[:, 0]).max()
        out[i] = bool(alike and ((gap < _LOOSE * wide) & (beside < 0)).any())
    return out


def _line(letters: Array, vertical: bool, zone: int) -> TextLine | None:
    lo, hi = letters[:, :2].min(0), letters[:, 2:].max(0)
    thick = (hi - lo)[0 if vertical else 1]
    if thick < 5:
        return None
    order = np.argsort(letters[:, 1 if vertical else 0])
    x0, y0, x1, y1 = (float(v) for v in (*lo, *hi))
    return TextLine((x0, y0, x1, y1), vertical, letters[order], zone)


def without(line: TextLine, k: int) -> TextLine | None:
    """The line without its first (0) or last (-1) character."""
    return _line(line.letters[1:] if k == 0 else line.letters[:-1], line.vertical, line.zone)


def pieces_of(line: TextLine) -> list[TextLine]:
    """The line cut where its characters stand farther apart than digits of one number do."""
    a = 1 if line.vertical else 0
    reach = np.maximum.accumulate(line.letters[:, a + 2])
    gap = line.letters[1:, a] - reach[:-1]
    tall = float(np.percentile(line.letters[:, 3 - a] - line.letters[:, 1 - a], 75))
    cuts = np.flatnonzero(gap > _APART * tall) + 1
    parts = [_line(part, line.vertical, line.zone) for part in np.split(line.letters, cuts)]
    return [p for p in parts if p is not None]


def _blobs(boxes: Array, zones: Ints, reach: float, along_x: bool) -> Ints:
    """Numbers of the chains of characters that follow each other along one direction."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    if not len(boxes):
        return np.zeros(0, np.int64)
    a, b = (0, 1) if along_x else (1, 0)
    order = np.argsort(boxes[:, a], kind="stable")
    s = boxes[order]
    lo, hi, low, high = s[:, a], s[:, a + 2], s[:, b], s[:, b + 2]
    tall, middle, zone = high - low, (low + high) / 2, zones[order]
    last = np.searchsorted(lo, hi + reach * float(tall.max()), side="right")
    rows, cols = [np.zeros(0, int)], [np.zeros(0, int)]
    for i in range(len(s)):
        j = np.arange(i + 1, last[i])
        h = np.maximum(tall[i], tall[j])
        larger_low = np.where(tall[j] > tall[i], low[j], low[i])
        smaller_mid = np.where(tall[j] > tall[i], middle[i], middle[j])
        near = lo[j] - hi[i] <= reach * h
        level = (smaller_mid > larger_low - 0.12 * h) & (smaller_mid < larger_low + 1.12 * h)
        level &= (np.abs(middle[i] - middle[j]) < 0.45 * h) | (
            np.minimum(tall[i], tall[j]) < 0.7 * h
        )
        narrow = np.minimum(hi[i] - lo[i], hi[j] - lo[j]) < 0.9 * h
        alike = (np.minimum(tall[i], tall[j]) > 0.3 * h) | narrow
        j = j[near & level & alike & (zone[j] == zone[i])]
        rows.append(np.full(len(j), i))
        cols.append(j)
    r, c = np.concatenate(rows), np.concatenate(cols)
    graph = coo_array((np.ones(len(r)), (r, c)), shape=(len(s), len(s)))
    out = np.empty(len(s), np.int64)
    out[order] = connected_components(graph, directed=False)[1]
    return out
