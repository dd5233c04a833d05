"""The plot boxes that the straight lines of a vector page make."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.strokes_lines import Rules
from curvefit.records import Word

__all__ = ["Box", "boxes_of"]

Array = NDArray[np.float64]
SMALLEST = 90.0  #: px, the shorter side of a plot box
SAME = 2.5  #: px between ends of lines that are meant to end together
APART = 45.0  #: px by which an axis may stand off its plot box
NEAR = 3.5  #: heights of its text by which a number may stand off the scale


@dataclass(frozen=True, slots=True)
class Box:
    """Left, top, right, bottom [upright px]; lines : how much is drawn along it [px]."""

    left: float
    top: float
    right: float
    bottom: float
    lines: float = 0.0

    @property
    def width(self) -> float:
        """px."""
        return self.right - self.left

    @property
    def height(self) -> float:
        """px."""
        return self.bottom - self.top

    def overlap(self, other: Box) -> float:
        """Area in common, as a share of the smaller one."""
        w = min(self.right, other.right) - max(self.left, other.left)
        h = min(self.bottom, other.bottom) - max(self.top, other.top)
        if w <= 0 or h <= 0:
            return 0.0
        return w * h / min(self.width * self.height, other.width * other.height)


def boxes_of(
    across: Rules, upright: Rules, areas: Sequence[Box], words: Sequence[Word], size: Array
) -> list[Box]:
    """Plot boxes from top to bottom, none within another.

    Parameters
    ----------
    areas : filled rectangles: the ground of a plot, of a legend, of the page.
    words : their boxes in upright px.
    size : (2,) of the page, upright [px].

    Notes
    -----
    A box is a span across and a span upwards that lines of each direction share, each span drawn
    along an edge of the other (an L is enough). Where boxes overlap, the one with numbers along
    two sides wins, then the one with more lines.
    """
    across, upright = (
        across.where(across.length > SMALLEST),
        upright.where(upright.length > SMALLEST),
    )
    candidates = [
        _placed(Box(x0, y0, x1, y1), across, upright)
        for x0, x1 in _spans(across)
        for y0, y1 in _spans(upright)
    ]
    found = [b for b in candidates if b is not None]
    found += [a for a in areas if not any(_alike(a, b) for b in found)]
    found = [b for b in found if min(b.width, b.height) > SMALLEST and not _page(b, size)]
    numbers = [w for w in words if any(c.isdigit() for c in w.text) and len(w.text) <= 9]
    middles = np.array([w.box.mean(0) for w in numbers]).reshape(-1, 2)
    tall = float(np.median([w.height for w in numbers])) if numbers else 30.0
    order = sorted(found, key=lambda b: (-_scales(b, middles, tall), -b.lines))
    kept: list[Box] = []
    for box in order:
        if all(box.overlap(k) < 0.1 for k in kept):
            kept.append(box)
    return sorted(kept, key=lambda b: (round(b.top / 20), b.left))


def _spans(rules: Rules) -> list[tuple[float, float]]:
    """Spans that lines have in common, those with the most ink first."""
    order = np.argsort(-rules.length)
    spans: list[list[float]] = []
    for i in order:
        lo, hi = rules.lo[i], rules.hi[i]
        for s in spans:
            if abs(s[0] - lo) < SAME and abs(s[1] - hi) < SAME:
                s[2] += hi - lo
                break
        else:
            spans.append([lo, hi, hi - lo])
    spans.sort(key=lambda s: -s[2])
    return [(s[0], s[1]) for s in spans[:40]]


def _placed(box: Box, across: Rules, upright: Rules) -> Box | None:
    """The box, its sides moved onto the lines that draw them; None where they do not fit."""
    flat = _edges(across, box.left, box.right, box.top, box.bottom)
    steep = _edges(upright, box.top, box.bottom, box.left, box.right)
    if flat is None or steep is None:
        return None
    (top, bottom, ink), (left, right, more) = flat, steep
    return Box(left, top, right, bottom, ink + more)


def _edges(
    rules: Rules, lo: float, hi: float, first: float, last: float
) -> tuple[float, float, float] | None:
    """Where the two sides along these lines stand, and the length of all lines of that span.

    None where no such line is an edge of the box, or lines of the span run on outside it (the
    box is a part of a larger one).
    """
    span = (np.abs(rules.lo - lo) < SAME) & (np.abs(rules.hi - hi) < SAME)
    at = rules.at[span]
    inside = (at > first - SAME) & (at < last + SAME)
    if not len(at):
        return None
    away = np.minimum(np.abs(at - first), np.abs(at - last))
    near = float(away.min())
    if near > APART or (near > SAME and inside.any() and near > 0.1 * (last - first)):
        return None
    sides = []
    for edge in (first, last):
        close = np.abs(at - edge) < SAME
        sides.append(float(at[close][np.argmin(np.abs(at[close] - edge))]) if close.any() else edge)
    ink = float(inside.sum()) * (hi - lo) if inside.any() else 0.5 * (hi - lo)
    return sides[0], sides[1], ink


def _alike(a: Box, b: Box) -> bool:
    sides = zip((a.left, a.top, a.right, a.bottom), (b.left, b.top, b.right, b.bottom), strict=True)
    return all(abs(p - q) < SAME for p, q in sides)


def _page(box: Box, size: Array) -> bool:
    return bool(box.width > 0.97 * size[0] and box.height > 0.97 * size[1])


def _scales(box: Box, middles: Array, tall: float) -> int:
    """How many of its two directions have numbers along a side, just outside."""
    x, y = middles.T
    reach = NEAR * tall
    beside = (x > box.left - 2 * reach) & (x < box.left) | (x > box.right) & (
        x < box.right + 2 * reach
    )
    below = (y > box.bottom) & (y < box.bottom + reach) | (y > box.top - reach) & (y < box.top)
    along_x = (x > box.left - tall) & (x < box.right + tall)
    along_y = (y > box.top - tall) & (y < box.bottom + tall)
    spread_x, spread_y = x[below & along_x], y[beside & along_y]
    return int(_spread(spread_x, box.width)) + int(_spread(spread_y, box.height))


def _spread(at: Array, length: float) -> bool:
    return len(at) >= 2 and float(np.ptp(at)) > 0.4 * length
