"""Letters inside the plot box: ink that is probably no line."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from curvefit.records import Panel, Word
from curvefit.trace.ink import MARGIN

__all__ = ["beside_markers", "label_boxes", "lettering", "markers", "spread"]

Image = NDArray[np.float32]


def lettering(panel: Panel, ink: Image, width: float) -> NDArray[np.bool_]:
    """(rows, cols) mask of the ink of letters: small compact shapes, or shapes inside a word.

    Notes
    -----
    A shape is a letter if it is small against the panel, thicker than a stroke (1.9 w + 1) and
    does not fill its smallest rectangle as a dash does; or if it lies in the box of a word that
    was read there. Ink that runs on out of the box is a line and stays.
    """
    import cv2

    mask = (ink > 0.3).astype(np.uint8)
    edge = MARGIN + 4  # what stands in the frame's own ticks is no letter
    mask[:edge], mask[-edge:], mask[:, :edge], mask[:, -edge:] = 0, 0, 0, 0
    count, labels, stats, _ = cv2.connectedComponentsWithStats(mask, connectivity=8)
    largest = 0.045 * max(panel.warp.size) + 6 * width
    small = np.maximum(stats[:, cv2.CC_STAT_WIDTH], stats[:, cv2.CC_STAT_HEIGHT]) < largest
    small[0] = False
    worded = _within(_word_mask(panel, ink.shape), labels, count)
    letters = small & (worded > 0.6)
    for i in np.nonzero(small & ~letters & (stats[:, cv2.CC_STAT_AREA] > 3 * width))[0]:
        x, y, w, h = stats[i, :4]
        shape = labels[y : y + h, x : x + w] == i
        letters[i] = _compact(shape, int(stats[i, cv2.CC_STAT_AREA]), width)
    letters[0] = False
    return np.asarray(letters[labels])


def label_boxes(panel: Panel) -> NDArray[np.float64]:
    """(n, 4) left, top, right, bottom of the words that may name a curve, percentages left out."""
    found = []
    for word in panel.words:
        if word.score >= 0.4 and any(c.isalnum() for c in word.text) and "%" not in word.text:
            box = panel.warp.to_panel(word.box) + MARGIN
            found.append([*box.min(0), *box.max(0)])
    return np.array(found).reshape(-1, 4)


def _compact(shape: NDArray[np.bool_], area: int, width: float) -> bool:
    """Whether a shape is thicker than a stroke and no filled rectangle."""
    import cv2

    points = np.argwhere(shape)[:, ::-1].astype(np.float32)
    (_, size, _) = cv2.minAreaRect(points)
    short, long = sorted((size[0] + 1.0, size[1] + 1.0))
    fill = area / (short * long)
    dash = long > 2.2 * short and fill > 0.5
    if long > 1.6 * short and fill > 0.55:  # a ragged bit of line is no thicker than a stroke
        inside = cv2.distanceTransform(np.pad(shape, 1).astype(np.uint8), cv2.DIST_L2, 5)
        dash |= bool(2.0 * inside.max() - 1.0 < 1.5 * width + 1.0)
    return bool(short > 1.9 * width + 1.0 and fill < 0.78 and not dash)


def _word_mask(panel: Panel, shape: tuple[int, ...]) -> NDArray[np.uint8]:
    import cv2

    mask = np.zeros(shape, np.uint8)
    for word in panel.words:
        if not _is_word(word):
            continue
        box = panel.warp.to_panel(word.box) + MARGIN
        middle = box.mean(0)
        box = middle + (box - middle) * 1.06
        cv2.fillPoly(mask, [np.round(box).astype(np.int32)], 1)
    return mask


def _is_word(word: Word) -> bool:
    """Whether letters were read, and not dashes: these look like 1, l, I or signs."""
    letters = [c for c in word.text if c.isalnum()]
    return len(letters) > 1 and word.score >= 0.55 and not set(letters) <= set("1lIi")


def _within(mask: NDArray[np.uint8], labels: NDArray[np.int32], count: int) -> NDArray[np.float64]:
    """Share of each labelled shape that lies inside the mask."""
    area = np.bincount(labels.ravel(), minlength=count)
    inside = np.bincount(labels.ravel(), weights=mask.ravel(), minlength=count)
    return np.asarray(inside / np.maximum(area, 1))


def spread(letters: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """The letters with the space between them: the area of each word."""
    import cv2

    mask = letters.astype(np.uint8)
    count, _, stats, _ = cv2.connectedComponentsWithStats(mask, connectivity=8)
    if count < 2:
        return letters
    height = float(np.quantile(stats[1:, cv2.CC_STAT_HEIGHT], 0.7))
    size = (max(int(1.1 * height), 3), max(int(0.5 * height), 3))
    return np.asarray(cv2.morphologyEx(mask, cv2.MORPH_CLOSE, np.ones(size[::-1])) > 0)


def markers(ink: Image, width: float) -> NDArray[np.bool_]:
    """(rows, cols) mask of test points on the lines: filled or hollow, thicker than strokes.

    Notes
    -----
    Small round holes are filled; what survives an opening by a disc 1.8 strokes wide and is as
    tall as it is broad is a marker. Where lines run together the blot is long, and stays.
    """
    import cv2

    mask = (ink > 0.4).astype(np.uint8)
    mask = _holes_filled(mask, width)
    size = round(1.8 * width + 1) | 1
    disc = cv2.getStructuringElement(cv2.MORPH_ELLIPSE, (size, size))
    blots = cv2.morphologyEx(mask, cv2.MORPH_OPEN, disc)
    _, labels, stats, _ = cv2.connectedComponentsWithStats(blots, connectivity=8)
    w, h = stats[:, cv2.CC_STAT_WIDTH], stats[:, cv2.CC_STAT_HEIGHT]
    area = stats[:, cv2.CC_STAT_AREA]
    long, short = np.maximum(w, h), np.minimum(w, h)
    round_ones = (long < 1.5 * short) & (long < 9 * width + 6) & (area > 0.6 * w * h)
    round_ones[0] = False
    if not round_ones.any():
        return np.zeros(ink.shape, bool)
    grown = cv2.dilate(round_ones[labels].astype(np.uint8), np.ones((5, 5)))
    return np.asarray(grown > 0)


def beside_markers(
    letters: NDArray[np.bool_], blots: NDArray[np.bool_], width: float
) -> NDArray[np.bool_]:
    """(rows, cols) mask of the bits of line next to a marker: both together are read as "10"."""
    import cv2

    reach = 2 * round(width) + 1
    near = cv2.dilate(blots.astype(np.uint8), np.ones((reach, reach)))
    count, labels, stats, _ = cv2.connectedComponentsWithStats(letters.astype(np.uint8))
    w, h = stats[:, cv2.CC_STAT_WIDTH], stats[:, cv2.CC_STAT_HEIGHT]
    touching = np.bincount(labels.ravel(), near.ravel(), minlength=count) > 0
    bits = touching & (w > 1.5 * h) & (h < 1.6 * width + 3.0)
    bits[0] = False
    return np.asarray(bits[labels])


def _holes_filled(mask: NDArray[np.uint8], width: float) -> NDArray[np.uint8]:
    import cv2

    _, labels, stats, _ = cv2.connectedComponentsWithStats(1 - mask, connectivity=4)
    w, h = stats[:, cv2.CC_STAT_WIDTH], stats[:, cv2.CC_STAT_HEIGHT]
    area = stats[:, cv2.CC_STAT_AREA]
    long, short = np.maximum(w, h), np.minimum(w, h)
    small = (long < 6 * width + 6) & (long < 1.7 * short + 2) & (area > 0.55 * w * h)
    small[labels[0, 0]] = False
    return np.asarray(mask | small[labels].astype(np.uint8))
