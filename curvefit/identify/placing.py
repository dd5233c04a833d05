"""Where a label stands with respect to the lines of its panel, in heights of its text."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import project
from curvefit.identify.wording import Meaning, meanings
from curvefit.records import Panel, Trace, Word
from curvefit.units import fold

__all__ = [
    "Label",
    "Spot",
    "label_of",
    "labels_of",
    "on_scale",
    "same_place",
    "spot",
    "text_height",
]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Label:
    """One word of a panel in straightened box pixels, with what it can mean.

    centre, half : (2,) centre and half size of its upright box; height : of the text.
    masked : it stands in an area without curves (a legend).
    """

    word: Word
    centre: Array
    half: Array
    height: float
    meanings: tuple[Meaning, ...]
    masked: bool = False

    @property
    def text(self) -> str:
        return self.word.text.strip()

    def means(self, kind: str) -> tuple[Meaning, ...]:
        return tuple(m for m in self.meanings if m.kind == kind)


@dataclass(frozen=True, slots=True)
class Spot:
    """A label as seen from one line: distances in heights of the text.

    gap : box to nearest point of the line; start, end : box to the line's left and right end.
    above : how far the label's centre stands above the line (negative: below), at its own x.
    near : one distance for all, in which a label in line with an end beats one beside it.
    """

    gap: float
    start: float
    end: float
    above: float
    near: float


def labels_of(panel: Panel) -> tuple[Label, ...]:
    """The words in and near the box that are no title of an axis."""
    titles = {fold(a.title) for a in panel.axes if a.title}
    width, height = panel.warp.size
    size = text_height(panel)
    found = []
    for word in (*panel.words, *_joined(panel)):
        label = label_of(panel, word)
        x, y = label.centre
        inside = 0 < x < width and 0 < y < height
        near = -0.1 * width < x < 1.25 * width and -6 * size < y < height + size
        fits = 0.45 < label.height / size < 2.2 and not on_scale(label, panel)
        if near and fits and (inside or not _is_title(word, titles)):
            found.append(label)
    return tuple(found)


def on_scale(label: Label, panel: Panel) -> bool:
    """Whether a bare number stands where the numbers of an axis do, so that it is one of them."""
    if any(m.plain for m in label.meanings) or not any(c.isdigit() for c in label.text):
        return False
    width, height = panel.warp.size
    (x, y), (hx, hy) = label.centre, label.half
    sides = {a.side for a in panel.axes}
    beside = (x + hx < 0 and "left" in sides) or (x - hx > width and "right" in sides)
    return beside or (y - hy > height and "bottom" in sides) or (y + hy < 0 and "top" in sides)


def _joined(panel: Panel) -> list[Word]:
    """Words of one label that stand apart ("50" "Hz", "6" "1/2\""), put together."""
    words = [w for w in panel.words if len(w.text.strip()) < 12]
    following = _following(words)
    found: list[Word] = []
    for i, first in enumerate(words):
        whole, k = first, following[i]
        for _ in range(2):
            if k < 0:
                break
            box = np.array([whole.box[0], words[k].box[1], words[k].box[2], whole.box[3]])
            text = f"{whole.text.strip()} {words[k].text.strip()}"
            whole = Word(text, box, min(whole.score, words[k].score))
            if any(c.isdigit() for c in text) and len(text) < 16:
                found.append(whole)
            k = following[k]
    return found


def _following(words: Sequence[Word]) -> list[int]:
    """For each word the one that follows on its line, a blank apart; −1 for none."""
    if len(words) < 2:
        return [-1] * len(words)
    boxes = np.array([w.box for w in words])
    start, end = (boxes[:, 0] + boxes[:, 3]) / 2, (boxes[:, 1] + boxes[:, 2]) / 2
    height = np.maximum(np.hypot(*(boxes[:, 3] - boxes[:, 0]).T), 1e-9)
    along = (end - start) / np.maximum(np.hypot(*(end - start).T), 1e-9)[:, None]
    step = start[None] - end[:, None]  # from the end of i to the start of j
    gap = (step * along[:, None]).sum(2) / height[:, None]
    aside = np.abs(step[..., 1] * along[:, None, 0] - step[..., 0] * along[:, None, 1])
    alike = (height[None] > 0.5 * height[:, None]) & (height[None] < 2.0 * height[:, None])
    same = (along[:, None] * along[None]).sum(2) > 0.9
    fits = (gap > -0.3) & (gap < 1.4) & (aside < 0.35 * height[:, None]) & alike & same
    np.fill_diagonal(fits, False)
    best = np.where(fits, gap, np.inf).argmin(1)
    return [int(j) if fits[i, j] else -1 for i, j in enumerate(best)]


def text_height(panel: Panel) -> float:
    """Usual height of the text of a panel [box px]: of words rather than of scraps."""
    sure = [w for w in panel.words if len(w.text.strip()) > 2 and w.score > 0.7]
    sizes = [w.height for w in sure or panel.words]
    found = float(np.median(sizes)) * _scale(panel) if sizes else 0.03 * panel.warp.size[1]
    return max(found, 1.0)


def label_of(panel: Panel, word: Word) -> Label:
    """One word of a panel with its place in the straightened box and its meanings."""
    box = project(panel.warp.matrix, word.box)
    low, high = box.min(0), box.max(0)
    size = word.height * _scale(panel)
    return Label(
        word,
        (low + high) / 2,
        (high - low) / 2,
        max(size, 1.0),
        meanings(word.text),
        _masked(panel, word),
    )


def same_place(label: Label, labels: Sequence[Label]) -> set[int]:
    """Ids of the words that stand where a label does: other readings of the same print."""
    return {
        id(w.word)
        for w in (label, *labels)
        if np.hypot(*(w.centre - label.centre)) < 1.5 * label.height
    }


def spot(label: Label, trace: Trace) -> Spot:
    """The label as seen from a line."""
    far = np.maximum(np.abs(trace.flat - label.centre) - label.half, 0.0)
    gaps = np.hypot(far[:, 0], far[:, 1]) / label.height
    nearest = int(np.argmin(gaps))
    if trace.path:
        y = float(trace.flat[nearest, 1])
    else:
        y = float(np.interp(label.centre[0], trace.flat[:, 0], trace.flat[:, 1]))
    above = (y - float(label.centre[1])) / label.height
    aside = np.minimum(np.abs(trace.flat[[0, -1], 1] - label.centre[1]) / label.height, 3.0)
    near = min(
        float(gaps[nearest]) + 0.3 * min(abs(above), 3.0),
        float(gaps[0] + 0.4 * aside[0]),
        float(gaps[-1] + 0.4 * aside[1]),
    )
    return Spot(float(gaps[nearest]), float(gaps[0]), float(gaps[-1]), above, near)


def _scale(panel: Panel) -> float:
    """Box pixels to a page pixel, about."""
    sides = np.hypot(*np.diff(panel.corners[[0, 1, 2]], axis=0).T)
    width, height = panel.warp.size
    return float(np.sqrt(width * height / max(sides[0] * sides[1], 1e-9)))


def _is_title(word: Word, titles: set[str]) -> bool:
    text = fold(word.text)
    return any(text == title or (len(text) > 3 and text in title) for title in titles)


def _masked(panel: Panel, word: Word) -> bool:
    return any(_holds(polygon, word.centre) for polygon in panel.masks)


def _holds(polygon: Array, point: Array) -> bool:
    """Whether a polygon holds a point (crossings of a ray to the right)."""
    a, b = polygon, np.roll(polygon, -1, axis=0)
    straddles = (a[:, 1] > point[1]) != (b[:, 1] > point[1])
    rise = np.where(b[:, 1] == a[:, 1], 1e-12, b[:, 1] - a[:, 1])
    x = a[:, 0] + (point[1] - a[:, 1]) / rise * (b[:, 0] - a[:, 0])
    return bool((straddles & (x > point[0])).sum() % 2)
