"""Parts of one line joined again: a steep end, or what goes on behind a label in the line."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import arc_length
from curvefit.trace.centre import Line, centred
from curvefit.trace.ink import Layer
from curvefit.trace.linked import Loose

__all__ = ["bridged", "joined"]

Array = NDArray[np.float64]
Image = NDArray[np.float32]
TURN = 0.45  #: rad, by how much the way from end to end may turn from either direction
STRAIGHT = 0.16  #: rad, the same over the gap that a label leaves
MEMORY = 24  #: px that tell the direction of an end


def joined(
    lines: list[Line], loose: list[Loose], layer: Layer, reach: float
) -> tuple[list[Line], list[Loose]]:
    """Lines with the pieces that carry them on, and the pieces that belong to none.

    Parameters
    ----------
    lines : that run from left to right.
    loose : pieces in any direction, of the same ink.
    reach : how far apart the ends may lie [px].

    Notes
    -----
    What runs from left to right is followed up to a slope of about two; an efficiency that rises
    steeply from no flow goes on as a piece of its own. It belongs to the line if its end lies
    where the line would go on, with the same direction and width, and if both together are
    still one height at each place.
    """
    lines, loose = list(lines), list(loose)
    while True:
        best = min(_links(lines, loose, reach), default=None, key=lambda link: link[0])
        if best is None:
            return lines, loose
        _, i, k, rough = best
        line = centred(layer.lines, layer.known, rough, lines[i].width)
        before = lines[i].good.sum() + 0.4 * loose[k].line.good.sum()
        lines[i] = line if line.good.sum() > before else lines[i]
        loose.pop(k)


def bridged(lines: list[Line], layer: Layer, reach: float) -> list[Line]:
    """The lines with those parts joined that go on as each other behind a gap.

    Parameters
    ----------
    reach : the longest gap, that of a label [px].

    Notes
    -----
    The line over the gap is that of smoothness; its points carry no ink and are flagged so.
    """
    lines = list(lines)
    while True:
        fits = []
        for i, left in enumerate(lines):
            for k, right in enumerate(lines):
                ahead = right.xy[:, 0].min() - left.xy[:, 0].max()
                if i == k or ahead < -2.0 or not 0.7 < right.width / left.width < 1.4:
                    continue
                cost = _misfit(_rightward(left.xy), _rightward(right.xy), reach, STRAIGHT)
                if cost is not None:
                    fits.append((cost, i, k))
        if not fits:
            return lines
        _, i, k = min(fits)
        both = _rightward(lines[i].xy), _rightward(lines[k].xy)
        ink, known = _cleared(layer, both[0][-1], both[1][0], 8.0 * lines[i].width)
        line = centred(ink, known, np.concatenate(both), lines[i].width)
        lines = [x for n, x in enumerate(lines) if n not in (i, k)] + [line]


def _cleared(layer: Layer, start: Array, end: Array, width: float) -> tuple[Image, Image]:
    """Ink and visibility with the letters between two places taken for blank paper."""
    import cv2

    area = np.zeros(layer.lines.shape, np.uint8)
    ends = [(round(float(x)), round(float(y))) for x, y in (start, end)]
    cv2.line(area, ends[0], ends[1], 1, max(round(width), 1))
    columns = np.arange(layer.lines.shape[1])
    area[:, np.flatnonzero((columns <= ends[0][0]) | (columns >= ends[1][0]))] = 0
    return np.where(area, 0, layer.lines).astype(np.float32), np.where(area, 1, layer.known).astype(
        np.float32
    )


def _rightward(xy: Array) -> Array:
    return xy if xy[0, 0] <= xy[-1, 0] else xy[::-1]


def _links(
    lines: list[Line], loose: list[Loose], reach: float
) -> list[tuple[float, int, int, Array]]:
    """(cost, line, piece, both as one polyline) of all that fit together."""
    found = []
    for i, line in enumerate(lines):
        for k, piece in enumerate(loose):
            if piece.closed or not 0.6 < piece.line.width / line.width < 1.6:
                continue
            for own in (line.xy, line.xy[::-1]):
                for other in (piece.line.xy, piece.line.xy[::-1]):
                    cost = _misfit(own, other, reach)
                    together = np.concatenate([own, other])
                    if cost is not None and _single_valued(together):
                        found.append((cost, i, k, together))
    return found


def _misfit(own: Array, other: Array, reach: float, turn: float = TURN) -> float | None:
    """How badly `other` begins where `own` ends; None where it does not."""
    gap = float(np.hypot(*(other[0] - own[-1])))
    if gap > reach or len(own) < 8 or len(other) < 8:
        return None
    out, on = own[-1] - own[-MEMORY:][0], other[:MEMORY][-1] - other[0]
    way = other[0] - own[-1] if gap > 8.0 else out + on
    turns = abs(_angle(out, way)), abs(_angle(way, on))
    return None if max(turns) > turn else gap / reach + sum(turns)


def _angle(a: Array, b: Array) -> float:
    return float(np.arctan2(a[0] * b[1] - a[1] * b[0], a @ b))


def _single_valued(xy: Array) -> bool:
    """Whether a polyline has one height at each place, but for the wobble of its strokes."""
    dx = np.diff(xy[:, 0]) * np.sign(xy[-1, 0] - xy[0, 0])
    back = float(np.clip(-dx, 0, None).sum())
    return back < 2.0 + 0.004 * float(arc_length(xy)[-1])
