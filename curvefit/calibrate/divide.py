"""Plot boxes that touch: one frame divided by full lines, each part with numbers of its own."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.boxes import Box
from curvefit.calibrate.lines import Line
from curvefit.geometry import project
from curvefit.records import Word

__all__ = ["divided"]

Array = NDArray[np.float64]

_NUMBER = re.compile(r"^[-−–]?\d+([.,]\d+)?$")
_FEWEST = 3  # numbers that make a scale of a part's own
_OFF = 0.02  # of a scale's range: no number of an even scale stands farther off


def divided(box: Box, words: Sequence[Word], matrix: Array) -> list[Box]:
    """The boxes that one frame holds above each other; the box itself where it is one.

    Parameters
    ----------
    words : of an upright page, page px.
    matrix : (3, 3) page px → straightened px.

    Notes
    -----
    A line divides where it runs across the whole box, as dark as the frame, and the numbers in
    the column beside the box restart there: those above it make one even scale, those below
    another, and all of them together none.
    """
    lines = _dividers(box)
    if not lines:
        return [box]
    for numbers in (_column(box, words, matrix, left) for left in (True, False)):
        cuts = _cuts(numbers, lines) if len(numbers) >= 2 * _FEWEST else None
        if cuts:
            return _parts(box, cuts)
    return [box]


def _dividers(box: Box) -> list[Line]:
    sides = [h.weight for h in box.across if min(abs(h.at - box.top), abs(h.at - box.bottom)) < 4]
    dark = 0.85 * min(sides, default=255.0)
    margin = 0.08 * (box.bottom - box.top)
    wide = box.right - box.left
    return [
        h
        for h in box.across
        if box.top + margin < h.at < box.bottom - margin
        and min(h.hi, box.right) - max(h.lo, box.left) > 0.97 * wide
        and h.weight >= dark
    ]


def _column(box: Box, words: Sequence[Word], matrix: Array, left: bool) -> Array:
    """(n, 3): place [px], value and height [px] of the numbers beside the box, from the top."""
    found = []
    for word in words:
        if not _NUMBER.match(word.text):
            continue
        (x0, y0), (x1, y1) = (f(project(matrix, word.box), axis=0) for f in (np.min, np.max))
        gap = box.left - x1 if left else x0 - box.right
        if -2 < gap < 0.06 * (box.right - box.left) and box.top < (y0 + y1) / 2 < box.bottom:
            value = float(re.sub("[−–]", "-", word.text).replace(",", "."))
            found.append(((y0 + y1) / 2, value, y1 - y0))
    return np.array(sorted(found)).reshape(-1, 3)


def _cuts(numbers: Array, lines: Sequence[Line]) -> list[Line] | None:
    """The lines at which the numbers restart, from the top; None where they make no scales."""
    if _is_scale(numbers):
        return []
    best: list[Line] | None = None
    for line in lines:
        clear = np.abs(numbers[:, 0] - line.at) > 0.6 * numbers[:, 2]
        upper = numbers[clear & (numbers[:, 0] < line.at)]
        lower = numbers[clear & (numbers[:, 0] > line.at)]
        if not _is_scale(upper):
            continue
        rest = _cuts(lower, [h for h in lines if h.at > line.at])
        if rest is not None and (best is None or line.weight > best[0].weight):
            best = [line, *rest]
    return best


def _is_scale(numbers: Array) -> bool:
    """Whether numbers fall evenly from the top down."""
    if len(numbers) < _FEWEST:
        return False
    at, value = numbers[:, 0], numbers[:, 1]
    slope, start = np.polyfit(at, value, 1)
    off = np.abs(value - slope * at - start).max()
    return bool(slope < 0 and off < _OFF * (value.max() - value.min()))


def _parts(box: Box, cuts: Sequence[Line]) -> list[Box]:
    edges = [box.top, *(line.at for line in cuts), box.bottom]
    parts = []
    for k, (top, bottom) in enumerate(pairwise(edges)):
        seen = (k > 0 or box.seen[0], box.seen[1], k < len(cuts) or box.seen[2], box.seen[3])
        across = tuple(h for h in box.across if top - 2 <= h.at <= bottom + 2)
        parts.append(replace(box, top=top, bottom=bottom, seen=seen, across=across))
    return parts
