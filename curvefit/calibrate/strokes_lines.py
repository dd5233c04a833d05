"""The straight lines of a vector page that run along its edges: frames, grids, ticks."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.records import Stroke

__all__ = ["Rules", "rules_of"]

Array = NDArray[np.float64]
STRAIGHT = 0.06  #: px that a line along an edge may lean
THIN = 8.0  #: px: a filled area no wider than this is a line
RATIO = 3.0  #: … and so many times longer than wide
DASHES = 4  #: so many short pieces in a row make one line
PIECE = 45.0  #: px: the longest piece of a line that was dashed by hand


@dataclass(frozen=True, slots=True, eq=False)
class Rules:
    """Lines of one direction: at (n,) where, lo, hi (n,) from where to where, width (n,) [px].

    style (n,) : lines of one style carry one number. solid (n,) : not dashed.
    """

    at: Array
    lo: Array
    hi: Array
    width: Array
    style: NDArray[np.intp]

    @property
    def length(self) -> Array:
        """(n,) px."""
        return self.hi - self.lo

    def where(self, keep: NDArray[np.bool_]) -> Rules:
        """Those of the lines."""
        return Rules(
            self.at[keep], self.lo[keep], self.hi[keep], self.width[keep], self.style[keep]
        )


def rules_of(strokes: Sequence[Stroke], frame: Array) -> tuple[Rules, Rules]:
    """Horizontal and vertical lines, in upright px.

    Parameters
    ----------
    frame : array of shape (3, 3), page px → upright px
    """
    styles: dict[tuple[object, ...], int] = {}
    found: tuple[list[tuple[float, ...]], list[tuple[float, ...]]] = ([], [])
    for stroke in strokes:
        xy = stroke.xy @ frame[:2, :2].T + frame[:2, 2]
        pieces = _thin_area(xy) if stroke.fill else _pieces(xy)
        key = (stroke.colour, round(stroke.width, 2), stroke.dash, stroke.fill)
        for axis, at, lo, hi, width in pieces:
            style = styles.setdefault(key, len(styles))
            found[axis].append((at, lo, hi, width or stroke.width, style))
    return _rules(found[0]), _rules(found[1])


def _pieces(xy: Array) -> Iterator[tuple[int, float, float, float, float]]:
    """(axis, at, lo, hi, 0) of the straight pieces of a path that has no others."""
    step = np.diff(xy, axis=0)
    size = np.abs(step)
    moves = size.max(1) > 1e-3
    if not moves.any():
        return
    step, size = step[moves], size[moves]
    start = xy[:-1][moves]
    along = size.min(1) < STRAIGHT
    if not along.all():
        return
    axis = (size[:, 1] > size[:, 0]).astype(int)
    first = 0
    for i in range(1, len(step) + 1):  # pieces that carry each other on are one line
        if i < len(step) and axis[i] == axis[first]:
            continue
        part = np.vstack([start[first:i], start[i - 1] + step[i - 1]])
        k = int(axis[first])
        yield k, float(part[:, 1 - k].mean()), float(part[:, k].min()), float(part[:, k].max()), 0.0
        first = i


def _thin_area(xy: Array) -> Iterator[tuple[int, float, float, float, float]]:
    """A line that is drawn as a thin filled rectangle."""
    if not 4 <= len(xy) <= 6:
        return
    low, high = xy.min(0), xy.max(0)
    size = high - low
    corners = np.minimum(np.abs(xy - low), np.abs(xy - high)).max()
    if corners > STRAIGHT or size.min() > THIN or size.max() < RATIO * size.min():
        return
    k = int(size[1] > size[0])
    middle = (low + high) / 2
    yield k, float(middle[1 - k]), float(low[k]), float(high[k]), float(max(size[1 - k], 0.1))


def _rules(found: list[tuple[float, ...]]) -> Rules:
    rows = np.array(found, float).reshape(-1, 5)
    rows = rows[rows[:, 2] - rows[:, 1] > 0.5]
    rows = _unbroken(rows[np.lexsort((rows[:, 1], np.round(rows[:, 0], 1), rows[:, 4]))])
    at, lo, hi, width, style = rows.T
    return Rules(at, lo, hi, width, style.astype(np.intp))


def _unbroken(rows: Array) -> Array:
    """Rows (at, lo, hi, width, style), sorted, with hand-made dashes joined to one line."""
    if len(rows) < DASHES:
        return rows
    gap = rows[1:, 1] - rows[:-1, 2]
    short = (rows[:, 2] - rows[:, 1]) < PIECE
    on = (
        (np.abs(np.diff(rows[:, 0])) < STRAIGHT)
        & (rows[1:, 4] == rows[:-1, 4])
        & (gap > -0.5)
        & (gap < PIECE)
        & short[1:]
        & short[:-1]
    )
    joined = []
    first = 0
    for i in range(1, len(rows) + 1):
        if i < len(rows) and on[i - 1]:
            continue
        if i - first >= DASHES:
            part = rows[first:i]
            joined.append([part[:, 0].mean(), part[0, 1], part[:, 2].max(), *part[0, 3:]])
        else:
            joined += rows[first:i].tolist()
        first = i
    return np.array(joined)
