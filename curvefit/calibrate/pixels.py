"""Evidence from pixels: the plot boxes of a scanned, faxed or photographed page."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.boxes import Box, find_boxes
from curvefit.calibrate.evidence import Evidence, TickRow
from curvefit.calibrate.glyphs import TextLine
from curvefit.calibrate.ink import ink_of
from curvefit.calibrate.lines import Line, long_lines
from curvefit.calibrate.rectify import rectification, segments
from curvefit.calibrate.sides import side_lines, warp_of
from curvefit.calibrate.ticks import flatten, tick_bars, tick_rows
from curvefit.calibrate.upright import quarter_turns
from curvefit.calibrate.words import Lettering, find_text, read_lines
from curvefit.geometry import project
from curvefit.notes import PageNotes, PanelNotes
from curvefit.records import Page, Word

__all__ = ["Settings", "gather"]

Array = NDArray[np.float64]
Image = NDArray[np.uint8]


@dataclass(frozen=True, slots=True)
class Settings:
    """work : long side [px] of the copy on which lines are looked for; shortest : the shortest
    line of interest, as a share of that side; smallest : the smallest plot box, as a share of the
    page's area; most_lines : of text read on a page, the nearest to the boxes first.
    """

    work: int = 2000
    shortest: float = 0.04
    smallest: float = 0.008
    most_lines: int = 420
    most_pixels: int = 60_000_000


@dataclass(frozen=True, slots=True, eq=False)
class Sheet:
    """The ink of a page, and the same made straight; matrix : page px → straightened px."""

    ink: Image
    flat: Image
    matrix: Array
    across: list[Line]
    upright: list[Line]


def gather(
    page: Page,
    page_notes: PageNotes,
    panel_notes: tuple[PanelNotes, ...],
    settings: Settings | None = None,
) -> tuple[Evidence, ...]:
    """What the pixels show of each plot box on the page, from top to bottom.

    Parameters
    ----------
    page_notes, panel_notes : what is given is taken as given: the page's turn, the corners of a
        panel (which make a box even where none is seen).

    Returns
    -------
    tuple of Evidence
        Boxes of tables and pictures may be among them: they get no scales later.
    """
    s = settings or Settings()
    sheet = _straighten(ink_of(page.pixels), s)
    plots = [_plot(sheet, corners, box) for corners, box in _boxes(sheet, s)]
    if not plots:
        return ()
    lettering = find_text(sheet.flat, *_drawn(sheet, plots))
    turn = page_notes.turn if page_notes.turn is not None else quarter_turns(lettering)
    words = read_lines(lettering, _wanted(lettering, plots, s), sheet.matrix, turn)
    return tuple(_evidence(sheet, plot, turn, words) for plot in plots)


@dataclass(frozen=True, slots=True, eq=False)
class Plot:
    """A plot box before the page's turn is known. corners : (4, 2) page px."""

    corners: Array
    box: Box
    warp: Warp
    ticks: tuple[TickRow, ...]
    bars: list[Array]


def _plot(sheet: Sheet, corners: Array, box: Box) -> Plot:
    warp = warp_of(corners)
    flat = flatten(sheet.ink, warp, int(min(0.3 * max(warp.size), 600)))
    rows = tick_rows(flat, box.seen, {})
    return Plot(corners, box, warp, rows, tick_bars(flat, rows))


def _straighten(ink: Image, s: Settings) -> Sheet:
    import cv2

    scale = min(1.0, s.work / max(ink.shape))
    small = _resized(ink, scale)
    shortest = s.shortest * max(small.shape)
    size = (small.shape[1], small.shape[0])
    rough = rectification(segments(small, 0.5 * shortest), size)
    to_small = np.array([[scale, 0, scale / 2 - 0.5], [0, scale, scale / 2 - 0.5], [0, 0, 1]])
    matrix = np.linalg.inv(to_small) @ rough @ to_small
    h, w = ink.shape
    corners = np.array([[0, 0], [w - 1, 0], [w - 1, h - 1], [0, h - 1]], float)
    moved = project(matrix, corners)
    if np.abs(moved - corners).max() < 0.4:
        matrix, moved = np.eye(3), corners
    low = np.floor(moved.min(0))
    matrix = np.array([[1, 0, -low[0]], [0, 1, -low[1]], [0, 0, 1]]) @ matrix
    wide, tall = (int(v) for v in np.ceil(moved.max(0) - low) + 1)
    flat = ink
    if not np.array_equal(matrix, np.eye(3)) and wide * tall <= s.most_pixels:
        flat = cv2.warpPerspective(ink, matrix, (wide, tall))
    elif wide * tall > s.most_pixels:  # the directions found are no page's
        matrix = np.eye(3)
    small = _resized(flat, scale)
    back = 1 / scale
    across = [_scaled(x, back) for x in long_lines(small, True, int(shortest))]
    upright = [_scaled(x, back) for x in long_lines(small, False, int(shortest))]
    return Sheet(ink, flat, matrix, across, upright)


def _resized(image: Image, scale: float) -> Image:
    import cv2

    if scale >= 1:
        return image
    return np.asarray(
        cv2.resize(image, None, fx=scale, fy=scale, interpolation=cv2.INTER_AREA), np.uint8
    )


def _scaled(line: Line, k: float) -> Line:
    at, lo, hi = ((v + 0.5) * k - 0.5 for v in (line.at, line.lo, line.hi))
    return Line(at, lo, hi, line.weight)


def _boxes(sheet: Sheet, s: Settings) -> list[tuple[Array, Box]]:
    """Corners on the page (sub-pixel) of each plot box, from top to bottom."""
    long_side = max(sheet.flat.shape)
    scale = max(1.0, long_side / s.work)
    found = []
    for box in find_boxes(sheet.across, sheet.upright, 0.3 * s.shortest * long_side):
        if box.area < s.smallest * sheet.flat.size:
            continue
        rough = project(np.linalg.inv(sheet.matrix), box.corners)
        corners, _ = side_lines(sheet.ink, rough, box.seen, 4.0 * scale + 1)
        found.append((corners, box))
    return sorted(found, key=lambda f: (round(f[0][:, 1].mean() / 20), f[0][:, 0].mean()))


def _drawn(sheet: Sheet, plots: list[Plot]) -> tuple[NDArray[np.int16], Image, Image]:
    """Per straightened pixel: which box it lies in, and where sides and ticks are drawn."""
    import cv2

    zone = np.zeros(sheet.flat.shape, np.int16)
    frame, ticks = np.zeros(sheet.flat.shape, np.uint8), np.zeros(sheet.flat.shape, np.uint8)
    for i, plot in enumerate(plots):
        outline = np.round(project(sheet.matrix, plot.corners)).astype(np.int32)
        cv2.fillPoly(zone, [outline], i + 1)
        cv2.polylines(frame, [outline], True, 1, 7)
        for bar in plot.bars:
            shape = project(sheet.matrix, plot.warp.to_page(bar))
            cv2.fillPoly(ticks, [np.round(shape).astype(np.int32)], 1)
    return zone, frame, ticks


def _wanted(lettering: Lettering, plots: list[Plot], s: Settings) -> list[TextLine]:
    """The lines of text worth reading: those nearest to a plot box."""

    def distance(line: TextLine) -> float:
        x, y = (line.box[0] + line.box[2]) / 2, (line.box[1] + line.box[3]) / 2
        return min(p.box.distance(x, y) for p in plots)

    return sorted(lettering.lines, key=distance)[: s.most_lines]


_ROUND = ("top", "right", "bottom", "left")  # clockwise: a quarter turn moves each on by one


def _evidence(sheet: Sheet, plot: Plot, turn: int, words: tuple[Word, ...]) -> Evidence:
    corners = np.roll(plot.corners, turn, axis=0)
    rows = tuple(_turned(row, turn) for row in plot.ticks)
    return Evidence(corners, warp_of(corners), turn, rows, words, _look(sheet))


def _turned(row: TickRow, turn: int) -> TickRow:
    """The row on the page set upright; along two sides the direction may change."""
    side, at = row.side, row.at
    for _ in range(turn):
        side = _ROUND[(_ROUND.index(side) + 1) % 4]
        if side in ("left", "right"):  # left to right has become downwards
            at = 1 - at
    order = np.argsort(at)
    return replace(row, side=side, at=at[order], u=row.u[order], weight=row.weight[order])


def _look(sheet: Sheet) -> Callable[[Sequence[Array]], list[tuple[str, float]]]:
    def look(boxes: Sequence[Array]) -> list[tuple[str, float]]:
        """Reads the numbers in boxes (4, 2), page px, clockwise from the text's top left."""
        from curvefit.ocr import NUMERIC, recognise

        return recognise([_cut(sheet.ink, np.asarray(b, float)) for b in boxes], NUMERIC)

    return look


def _cut(ink: Image, box: Array) -> Image:
    import cv2

    w = max(float(np.hypot(*(box[1] - box[0]))), 2.0)
    h = max(float(np.hypot(*(box[3] - box[0]))), 2.0)
    target = np.array([[0, 0], [w, 0], [w, h], [0, h]], np.float32)
    matrix = cv2.getPerspectiveTransform(box.astype(np.float32), target)
    return np.asarray(
        255 - cv2.warpPerspective(ink, matrix, (round(w) + 1, round(h) + 1)), np.uint8
    )
