"""The plot boxes of a sheet with their warps and ticks, before the page's turn is known."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.bow import bent, sag
from curvefit.calibrate.boxes import Box, find_boxes
from curvefit.calibrate.divide import divided
from curvefit.calibrate.evidence import TickRow
from curvefit.calibrate.lines import Line
from curvefit.calibrate.open_box import closed, skew_px, tilted
from curvefit.calibrate.sheet import Settings, Sheet
from curvefit.calibrate.sides import follow, side_lines, warp_of
from curvefit.calibrate.ticks import FARTHEST, Side, flatten, tick_bars, tick_rows
from curvefit.geometry import Warp, project
from curvefit.notes import PanelNotes
from curvefit.records import Word

__all__ = ["Plot", "clockwise", "find_plots", "split_plots"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Plot:
    """A plot box as it lies on the page. corners : (4, 2) page px, clockwise from the top left.

    bars : outlines (4, 2) of its outside ticks, straightened panel px.
    bow : how far straight lines still sag there, along x and along y [px]. loose : how far a
    corner that nothing drawn shows may be off, along x and y [px].
    """

    corners: Array
    box: Box
    warp: Warp
    ticks: tuple[TickRow, ...]
    bars: list[Array]
    bow: tuple[float, float] = (0.0, 0.0)
    loose: tuple[float, float] = (0.0, 0.0)


def find_plots(sheet: Sheet, notes: Sequence[PanelNotes], s: Settings) -> list[Plot]:
    """The plot boxes of a page, given ones among them, from top to bottom.

    A box whose corners are given replaces one found at the same place; one that a note drops is
    left out.
    """
    boxes = _seen_boxes(sheet, s)
    plots = [_plot(sheet, corners, box, [b for _, b in boxes], s) for corners, box in boxes]
    for note in notes:
        if note.corners is not None:
            given = _given(sheet, note, [b for _, b in boxes], s)
            plots = [p for p in plots if _overlap(p.box, given.box) < 0.3] + [given]
        elif note.drop and note.box is not None:
            dropped = _flat_box(sheet, _corners_of(note.box))
            plots = [p for p in plots if _overlap(p.box, dropped) < 0.3]
    return _in_reading_order(plots)


def _seen_boxes(sheet: Sheet, s: Settings) -> list[tuple[Array, Box]]:
    """Corners on the page (sub-pixel) of each box that lines make."""
    long_side = max(sheet.flat.shape)
    found = []
    for box in find_boxes(sheet.across, sheet.upright, 0.3 * s.shortest * long_side):
        if box.area > s.smallest * sheet.flat.size:
            found.append((_corners(sheet, box, s), box))
    return found


def _corners(sheet: Sheet, box: Box, s: Settings) -> Array:
    """The corners of a box (4, 2), page px, from the sides that are drawn."""
    reach = 4.0 * max(1.0, max(sheet.flat.shape) / s.work) + 1
    rough = project(np.linalg.inv(sheet.matrix), box.corners)
    met, lines = side_lines(sheet.ink, rough, box.seen, reach)
    return closed(sheet.ink, met, lines, box.seen, _known(sheet))


def split_plots(sheet: Sheet, plots: list[Plot], words: Sequence[Word], s: Settings) -> list[Plot]:
    """The plots of an upright page, each frame that holds several boxes taken apart."""
    parts = [divided(p.box, words, sheet.matrix) for p in plots]
    if all(len(boxes) == 1 for boxes in parts):
        return plots
    others = [b for boxes in parts for b in boxes]
    out = []
    for plot, boxes in zip(plots, parts, strict=True):
        if len(boxes) == 1:
            out.append(plot)
        else:
            out += [_plot(sheet, _corners(sheet, b, s), b, others, s) for b in boxes]
    return _in_reading_order(out)


def _known(sheet: Sheet) -> tuple[bool, bool]:
    """Whether lines far apart tell how lines across, and upright, run anywhere on the page."""
    long_side = max(sheet.flat.shape)
    told = []
    for lines in (sheet.across, sheet.upright):
        at = np.array([line.at for line in lines if line.length > 0.2 * long_side])
        told.append(len(at) >= 2 and float(np.ptp(at)) > 0.25 * long_side)
    return told[0], told[1]


def _in_perspective(sheet: Sheet, corners: Array, box: Box) -> tuple[Array, tuple[float, float]]:
    """Corners of a box on two axes set by its ticks, and how far one may be off, x and y [px]."""
    across, upright = _known(sheet)
    if sum(box.seen) != 2 or (across and upright) or box.seen[0] == box.seen[2]:
        return corners, (0.0, 0.0)
    warp = warp_of(corners)
    rows = tick_rows(flatten(sheet.ink, warp, 40), box.seen, {})
    ticks: dict[str, list[Array]] = {}
    for row in rows:
        if row.kind in ("outside", "inside"):
            ticks.setdefault(row.side, []).append(row.at)
    set_by_ticks = tilted(corners, box.seen, ticks)
    if set_by_ticks is not None:
        return set_by_ticks, (0.0, 0.0)
    x, y = skew_px(corners)
    return corners, (0.0 if upright else x, 0.0 if across else y)


def _straightest(
    sheet: Sheet, corners: Array, box: Box, s: Settings
) -> tuple[Warp, tuple[float, float]]:
    """The warp of a box, bent where its sides and long inner lines sag, and the sag left."""
    warp = warp_of(corners)
    found = {1: _courses(sheet, corners, box, s, True), 0: _courses(sheet, corners, box, s, False)}
    for axis, lines in found.items():  # a side that is not drawn bows as the one facing it
        across = np.eye(2)[axis] * warp.size[axis]
        for k, way in ((0, -1), (-1, 1)):
            if not len(lines[k]) and len(lines[-1 - k]):
                lines[k] = warp.to_page(warp.to_panel(lines[-1 - k]) + way * across)
    if min(len(lines[k]) for lines in found.values() for k in (0, -1)) >= 12:
        warp = bent(warp, found[1], found[0], s.bow)
    left = [max(sag(warp.to_panel(found[k][i]), k) for i in (0, -1)) for k in (0, 1)]
    return warp, (left[0], left[1])


def _courses(sheet: Sheet, corners: Array, box: Box, s: Settings, along_x: bool) -> list[Array]:
    """Centres (n, 2), page px, along the lines of a box one way, its sides first and last.

    A side that is not drawn has none.
    """
    reach = 4.0 * max(1.0, max(sheet.flat.shape) / s.work) + 1
    top, right, bottom, left = (corners[[i, (i + 1) % 4]] for i in range(4))
    if along_x:
        inner = _inner(box.across, box.top, box.bottom, box.left, box.right, True)
        pairs, seen = [top, *inner, bottom[::-1]], (box.seen[0], box.seen[2])
    else:
        inner = _inner(box.upright, box.left, box.right, box.top, box.bottom, False)
        pairs, seen = [left[::-1], *inner, right], (box.seen[3], box.seen[1])
    back = np.linalg.inv(sheet.matrix)
    out = []
    for k, pair in enumerate(pairs):
        side = k in (0, len(pairs) - 1)
        if side and not seen[0 if k == 0 else 1]:
            out.append(np.zeros((0, 2)))
            continue
        a, b = pair if side else project(back, pair)
        xy = follow(sheet.ink, a + 0.01 * (b - a), b - 0.01 * (b - a), reach)[0]
        if side or len(xy) >= 40:
            out.append(xy)
    return out


def _inner(
    lines: Sequence[Line], low: float, high: float, lo: float, hi: float, along_x: bool
) -> list[Array]:
    """Chords (2, 2), straightened px, of lines inside a box that cross nearly all of it."""
    margin = 0.03 * (high - low)
    crossing = [
        line
        for line in lines
        if low + margin < line.at < high - margin
        and min(line.hi, hi) - max(line.lo, lo) > 0.9 * (hi - lo)
    ]
    chosen = crossing[:: max(1, len(crossing) // 8)]
    ends = [np.array([[lo, line.at], [hi, line.at]]) for line in chosen]
    return ends if along_x else [e[:, ::-1] for e in ends]


def _outline(size: tuple[float, float]) -> Array:
    w, h = size
    return np.array([[0, 0], [w, 0], [w, h], [0, h]], float)


def _plot(
    sheet: Sheet, corners: Array, box: Box, others: list[Box], s: Settings, given: bool = False
) -> Plot:
    if given:
        warp, bow, loose = warp_of(corners), (0.0, 0.0), (0.0, 0.0)
    else:
        corners, loose = _in_perspective(sheet, corners, box)
        warp, bow = _straightest(sheet, corners, box, s)
    corners = corners if given else warp.to_page(_outline(warp.size))
    flat = flatten(sheet.ink, warp, int(min(FARTHEST * max(warp.size) + 16, 700)))
    rows = tick_rows(flat, box.seen, _spines(sheet, box, others))
    return Plot(corners, box, warp, rows, tick_bars(flat, rows), bow, loose)


def _given(sheet: Sheet, note: PanelNotes, others: list[Box], s: Settings) -> Plot:
    assert note.corners is not None
    corners = clockwise(note.corners)
    return _plot(sheet, corners, _flat_box(sheet, corners), others, s, given=True)


def clockwise(corners: Sequence[tuple[float, float]]) -> Array:
    """Four corners, (4, 2), clockwise from the page's own top left, whatever its turn."""
    xy = np.array(corners, float)
    out = xy - xy.mean(0)
    return np.asarray(xy[np.argsort(np.arctan2(out[:, 1], out[:, 0]))])


def _corners_of(box: tuple[float, float, float, float]) -> Array:
    x0, y0, x1, y1 = box
    return np.array([[x0, y0], [x1, y0], [x1, y1], [x0, y1]], float)


def _flat_box(sheet: Sheet, corners: Array) -> Box:
    flat = project(sheet.matrix, corners)
    (left, top), (right, bottom) = flat.min(0), flat.max(0)
    return Box(float(left), float(top), float(right), float(bottom), (True, True, True, True))


def _overlap(a: Box, b: Box) -> float:
    """Area that two boxes share over the area that they cover."""
    wide = min(a.right, b.right) - max(a.left, b.left)
    tall = min(a.bottom, b.bottom) - max(a.top, b.top)
    both = max(wide, 0.0) * max(tall, 0.0)
    return both / max(a.area + b.area - both, 1e-9)


def _spines(sheet: Sheet, box: Box, others: list[Box]) -> dict[Side, list[float]]:
    """How far outside each side [px] further scale lines stand: as long as the side, apart."""
    out: dict[Side, list[float]] = {}
    for lines, low, high, lo, hi, names in (
        (sheet.upright, box.left, box.right, box.top, box.bottom, ("left", "right")),
        (sheet.across, box.top, box.bottom, box.left, box.right, ("top", "bottom")),
    ):
        far = FARTHEST * max(box.right - box.left, box.bottom - box.top)
        for line in lines:
            covers = min(line.hi, hi) - max(line.lo, lo)
            if covers < 0.8 * (hi - lo) or line.length > 1.2 * (hi - lo):
                continue
            if any(_holds(b, line, lines is sheet.upright) for b in others if b is not box):
                continue
            for side, offset in ((names[0], low - line.at), (names[1], line.at - high)):
                if 8 < offset < far:
                    out.setdefault(side, []).append(offset)  # type: ignore[arg-type]
    return out


def _holds(box: Box, line: object, upright: bool) -> bool:
    """Whether a line is part of another box."""
    at = line.at  # type: ignore[attr-defined]
    middle = (line.lo + line.hi) / 2  # type: ignore[attr-defined]
    return box.distance(at, middle) < 4 if upright else box.distance(middle, at) < 4


def _in_reading_order(plots: list[Plot]) -> list[Plot]:
    """From top to bottom; boxes that stand side by side from left to right."""
    rows: list[list[Plot]] = []
    for plot in sorted(plots, key=lambda p: (p.box.top + p.box.bottom) / 2):
        middle = (plot.box.top + plot.box.bottom) / 2
        if rows and rows[-1][0].box.top < middle < rows[-1][0].box.bottom:
            rows[-1].append(plot)
        else:
            rows.append([plot])
    return [p for row in rows for p in sorted(row, key=lambda p: p.box.left)]
