"""The words printed in and around the plot boxes: found by their characters, read by OCR."""

from __future__ import annotations

import re
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.glyphs import TextLine, letters_of, text_lines
from curvefit.geometry import project
from curvefit.records import Word

__all__ = ["Lettering", "find_text", "read_lines"]

Array = NDArray[np.float64]
Image = NDArray[np.uint8]

_TALLEST = 0.034  # of a character, as a share of the page's long side
_MARGIN = 0.22  # of the line's height, left white around a crop


@dataclass(frozen=True, slots=True, eq=False)
class Lettering:
    """The text of a straightened page, before it is read.

    image : black on white, lines and curves taken out. lines : where text stands.
    """

    image: Image
    lines: tuple[TextLine, ...]


def find_text(flat: Image, zone_of: NDArray[np.int16], frame: NDArray[np.bool_]) -> Lettering:
    """Where text stands on the straightened page.

    Parameters
    ----------
    flat : array of shape (height, width), uint8
        Ink of the straightened page.
    zone_of : array of the same shape
        Number of the plot box that each pixel lies in, 0 outside all of them.
    frame : array of the same shape
        Where the sides of the boxes are drawn: what touches them is a tick or a curve.
    """
    import cv2

    dark = (flat > _threshold(flat)).astype(np.uint8)
    dark[frame] = 0
    long_side = max(flat.shape)
    dark[_long_runs(dark, max(30, int(0.024 * long_side)))] = 0
    boxes, label, index = letters_of(dark, _TALLEST * long_side)
    touching = np.unique(label[cv2.dilate(frame.astype(np.uint8), np.ones((3, 3), np.uint8)) > 0])
    apart = ~np.isin(index, touching)
    boxes, index = boxes[apart], index[apart]
    middle = ((boxes[:, :2] + boxes[:, 2:]) / 2).astype(int)
    zones = zone_of[middle[:, 1], middle[:, 0]].astype(np.int64)
    lines = text_lines(boxes, zones)
    text = np.zeros(int(label.max()) + 1, bool)
    text[index] = True
    keep = text[label]
    near = cv2.dilate(keep.astype(np.uint8), np.ones((5, 5), np.uint8)).astype(bool)
    return Lettering(255 - np.where(near, flat, 0).astype(np.uint8), tuple(lines))


def _threshold(flat: Image) -> float:
    some = flat[flat > 24]
    return float(np.clip(0.4 * np.percentile(some, 95), 40, 110)) if some.size else 255.0


def _long_runs(dark: Image, shortest: int) -> NDArray[np.bool_]:
    """Where straight lines along x or y run, a pixel wider on each side."""
    import cv2

    runs = np.zeros(dark.shape, bool)
    for shape, wide in (((1, shortest), (3, 1)), ((shortest, 1), (1, 3))):
        gap = (1, 5) if shape[0] == 1 else (5, 1)
        closed = cv2.morphologyEx(dark, cv2.MORPH_CLOSE, np.ones(gap, np.uint8))
        opened = cv2.morphologyEx(closed, cv2.MORPH_OPEN, np.ones(shape, np.uint8))
        runs |= cv2.dilate(opened, np.ones(wide, np.uint8)).astype(bool)
    return runs


def crop_of(image: Image, line: TextLine, turn: int) -> Image:
    """The line cut out with a margin and turned `turn` quarters clockwise."""
    x0, y0, x1, y1 = line.box
    m = _MARGIN * line.height + 1
    left, top = max(int(x0 - m), 0), max(int(y0 - m), 0)
    cut = image[top : int(y1 + m) + 1, left : int(x1 + m) + 1]
    return np.ascontiguousarray(np.rot90(cut, -turn))


def read_lines(
    lettering: Lettering, lines: list[TextLine], matrix: Array, turn: int
) -> tuple[Word, ...]:
    """The words of the lines, in page px.

    matrix : (3, 3) page px → straightened px. turn : quarter turns clockwise that set the page
    upright.
    """
    from curvefit.ocr import readings

    back = np.linalg.inv(matrix)
    jobs: list[tuple[TextLine, int]] = []
    for line in lines:
        if line.vertical == bool(turn % 2):  # reads along the upright page's rows
            jobs.append((line, turn))
        elif len(line.letters) > 1:  # upwards or downwards: both are tried
            jobs += [(line, (turn + 1) % 4), (line, (turn + 3) % 4)]
    read = readings([crop_of(lettering.image, line, t) for line, t in jobs], (None,))
    best: dict[int, tuple[float, Word]] = {}
    for (line, t), [(text, score)] in zip(jobs, read, strict=True):
        clean = _tidy(text, line)
        worth = score * min(len(clean), 8)
        if clean and worth > best.get(id(line), (0.0, None))[0]:
            corners = project(back, _corners(line.box, t))
            best[id(line)] = (worth, Word(clean, corners, score))
    return tuple(word for _, word in best.values())


def _corners(box: tuple[float, float, float, float], turn: int) -> Array:
    """Corners of a box clockwise from the text's own top left; turned, the text is upright."""
    x0, y0, x1, y1 = box
    x1, y1 = x1 - 1, y1 - 1
    return np.roll(np.array([[x0, y0], [x1, y0], [x1, y1], [x0, y1]]), turn, axis=0)


_NUMBER = re.compile(r"^[-−–—]?\s*\d")


def _tidy(text: str, line: TextLine) -> str:
    """A dash in front of a number stays only where a dash was printed: a flat mark of its own."""
    if not _NUMBER.match(text) or text[0].isdigit():
        return text
    first = line.letters[0] if not line.vertical else line.letters[-1]
    w, h = first[2] - first[0], first[3] - first[1]
    if line.vertical:
        w, h = h, w
    return text if h < 0.35 * line.height and w < line.height else text[1:].lstrip()
