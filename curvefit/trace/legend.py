"""Legends inside the plot box: their frame, line samples and text are no curves."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from curvefit.records import Panel, Word
from curvefit.trace.grid import Inked
from curvefit.trace.ink import MARGIN

__all__ = ["without_legends"]

Image = NDArray[np.float32]
Box = tuple[float, float, float, float]  # left, top, right, bottom [array px]

SAMPLE = 8.0  #: reach beside a text within which its line sample begins and ends, in text heights


@dataclass(frozen=True, slots=True)
class Row:
    """One line of a legend: its text and the sample of a line beside it."""

    text: Box
    sample: Box

    @property
    def height(self) -> float:
        """Of the text [px]."""
        return self.text[3] - self.text[1]

    @property
    def middle(self) -> float:
        """Row through the middle of the text."""
        return (self.text[1] + self.text[3]) / 2


def without_legends(panel: Panel, dark: Image, inked: Inked) -> Inked:
    """The ink without the legends in the box; what may lie behind them stays half unknown."""
    texts = [_box(panel, w) for w in panel.words if any(c.isalnum() for c in w.text)]
    boxes = list(_framed(dark, inked, texts))
    boxes += _unframed(inked.ink, _level(panel))
    if not boxes:
        return inked
    ink, known = inked.ink.copy(), inked.known.copy()
    for left, top, right, bottom in boxes:
        part = np.s_[max(int(top), 0) : int(bottom) + 1, max(int(left), 0) : int(right) + 1]
        ink[part] = 0.0
        known[part] = np.minimum(known[part], 0.3)
    return replace(inked, ink=ink, known=known)


def _box(panel: Panel, word: Word) -> Box:
    at = panel.warp.to_panel(word.box) + MARGIN
    left, top = at.min(0)
    right, bottom = at.max(0)
    return float(left), float(top), float(right), float(bottom)


def _level(panel: Panel) -> list[Box]:
    """Where the words stand that are read from left to right."""
    found = []
    for word in panel.words:
        if not any(c.isalnum() for c in word.text) or word.score < 0.4:
            continue
        side = panel.warp.to_panel(word.box[:2])
        along = side[1] - side[0]
        if along[0] > 3 * abs(along[1]):
            found.append(_box(panel, word))
    return found


def _framed(dark: Image, inked: Inked, texts: Sequence[Box]) -> Iterator[Box]:
    """Rectangles around a text that nothing runs through and that are no cells of the grid.

    Notes
    -----
    A frame is a hole in the ink that fills its bounding box to nine tenths. The drawing is looked
    at with and without its grid, since a grid line may run under the frame, and at two levels of
    ink, since frames are often pale.
    """
    import cv2

    rows, cols = dark.shape
    seen: list[Box] = []
    for image, level in ((inked.ink, 0.35), (dark, 0.35), (inked.ink, 0.12), (dark, 0.12)):
        mask = cv2.morphologyEx((image > level).astype(np.uint8), cv2.MORPH_CLOSE, np.ones((3, 3)))
        contours, tree = cv2.findContours(mask, cv2.RETR_CCOMP, cv2.CHAIN_APPROX_NONE)
        if tree is None:
            continue
        for contour, links in zip(contours, tree[0], strict=True):
            x, y, w, h = cv2.boundingRect(contour)
            if links[3] < 0 or not (0.05 * cols < w < 0.7 * cols and 0.025 * rows < h < 0.7 * rows):
                continue
            box = (float(x), float(y), float(x + w - 1), float(y + h - 1))
            if cv2.contourArea(contour) < 0.9 * w * h or _is_cell(box, inked):
                continue
            if any(_holds(other, _middle(box)) for other in seen):
                continue
            if any(_holds(box, _middle(t)) for t in texts) and _closed(inked.ink, box):
                seen.append(box)
                yield x - 5.0, y - 5.0, x + w + 4.0, y + h + 4.0


def _is_cell(box: Box, inked: Inked) -> bool:
    """Whether more than two sides of a rectangle are lines of the grid or the frame."""
    ruled = 0
    for place, lines in zip(box, (inked.cols, inked.rows, inked.cols, inked.rows), strict=True):
        if len(lines):
            away = np.abs(lines[:, 0] - place) - lines[:, 1] / 2
            ruled += bool(away.min() < 3.0)
    return ruled > 2


def _closed(ink: Image, box: Box) -> bool:
    """Whether nothing runs through the sides: a ring just inside them is blank."""
    left, top, right, bottom = (int(v) for v in box)
    part = ink[top + 2 : bottom - 1, left + 2 : right - 1] > 0.4
    if min(part.shape) < 8:
        return False
    ring = np.concatenate([part[1], part[-2], part[:, 1], part[:, -2]])
    return bool(ring.mean() < 0.01)


def _holds(box: Box, at: tuple[float, float]) -> bool:
    return box[0] < at[0] < box[2] and box[1] < at[1] < box[3]


def _middle(box: Box) -> tuple[float, float]:
    return (box[0] + box[2]) / 2, (box[1] + box[3]) / 2


def _unframed(ink: Image, texts: Sequence[Box]) -> list[Box]:
    """Columns of at least two texts with a line sample at the same place beside each."""
    found = []
    for side in (-1, 1):
        rows = [
            Row(text, sample) for text in texts if (sample := _sample(ink, text, side)) is not None
        ]
        while rows:
            first = min(rows, key=lambda r: r.middle)
            column = [first]
            for row in sorted(rows, key=lambda r: r.middle):
                apart = row.middle - column[-1].middle
                if 0.8 * row.height < apart < 3.0 * row.height and _aligned(row, first):
                    column.append(row)
            rows = [r for r in rows if r not in column]
            if len(column) > 1:
                found.append(_around(column))
    return found


def _aligned(a: Row, b: Row) -> bool:
    slack = 0.3 * max(a.height, b.height) + 1.0
    start = abs(a.sample[0] - b.sample[0]) < slack  # a dashed sample may end in a gap
    return start and abs(a.text[0] - b.text[0]) < 2 * slack


def _around(column: list[Row]) -> Box:
    edges = np.array([r.text for r in column] + [r.sample for r in column])
    pad = 0.3 * column[0].height
    left, top = edges[:, :2].min(0) - pad
    right, bottom = edges[:, 2:].max(0) + pad
    return float(left), float(top), float(right), float(bottom)


def _sample(ink: Image, text: Box, side: int) -> Box | None:
    """A short straight level stroke beside a text, solid or dashed, blank paper at its far end."""
    left, top, right, bottom = text
    height = bottom - top
    low, high = max(int(top + 0.1 * height), 0), int(bottom - 0.1 * height) + 1
    reach, near = int(SAMPLE * height), max(int(0.15 * height), 1)
    start = int(left) - near - 1 if side < 0 else int(right) + near + 1
    columns = start + side * np.arange(reach)
    columns = columns[(columns >= 0) & (columns < ink.shape[1])]
    strip = ink[low:high, columns]
    if strip.shape[1] < 2 * height or not strip.shape[0]:
        return None
    drawn = np.flatnonzero((strip > 0.4).any(0))
    if not len(drawn) or drawn[0] > 2.5 * height:
        return None
    breaks = np.flatnonzero(np.diff(drawn) > 1.1 * height)
    run = drawn[: breaks[0] + 1] if len(breaks) else drawn
    length = run[-1] - run[0] + 1
    if length < height or run[-1] > strip.shape[1] - 0.8 * height:
        return None
    part = strip[:, run]
    centre = (part * np.arange(len(part))[:, None]).sum(0) / np.maximum(part.sum(0), 1e-6)
    tall = float(np.median((part > 0.4).sum(0)))
    if np.std(centre) > 0.06 * height + 0.5 or tall > 0.4 * height:
        return None
    ends = columns[run[[0, -1]]]
    return float(ends.min()), float(low), float(ends.max()), float(high)
