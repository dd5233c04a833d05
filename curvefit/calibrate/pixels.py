"""Evidence from pixels: the plot boxes of a scanned, faxed or photographed page."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.bow import quarter
from curvefit.calibrate.evidence import Evidence, TickRow
from curvefit.calibrate.glyphs import TextLine
from curvefit.calibrate.ink import ink_of
from curvefit.calibrate.plots import Plot, clockwise, find_plots, split_plots
from curvefit.calibrate.sheet import Settings, Sheet, straighten
from curvefit.calibrate.ticks import Side
from curvefit.calibrate.upright import quarter_turns
from curvefit.calibrate.words import Lettering, find_text, read_lines
from curvefit.geometry import project
from curvefit.notes import PageNotes, PanelNotes
from curvefit.ocr import NUMERIC
from curvefit.records import Page, Word

__all__ = ["gather"]

Array = NDArray[np.float64]
Image = NDArray[np.uint8]


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
    sheet = straighten(ink_of(page.pixels), s)
    plots = find_plots(sheet, panel_notes, s)
    if not plots:
        return ()
    lettering = find_text(sheet.flat, *_drawn(sheet, plots))
    turn = _given_turn(page_notes, panel_notes)
    if turn is None:
        turn = quarter_turns(lettering)
    words = read_lines(lettering, _wanted(lettering, plots, s), sheet.matrix, turn)
    if turn == 0:
        plots = split_plots(sheet, plots, words, s)
    return tuple(_evidence(sheet, plot, turn, words) for plot in _upright_order(plots, turn))


def _given_turn(page_notes: PageNotes, panel_notes: tuple[PanelNotes, ...]) -> int | None:
    """The page's turn where notes tell it: themselves, or by the corner that they name first."""
    if page_notes.turn is not None:
        return page_notes.turn % 4
    for note in panel_notes:
        if note.corners is not None:
            first = np.abs(clockwise(note.corners) - np.array(note.corners[0])).sum(1)
            return int(-np.argmin(first)) % 4
    return None


def _drawn(sheet: Sheet, plots: list[Plot]) -> tuple[NDArray[np.int16], Image, Image, Image]:
    """Per straightened pixel: the box it lies in, and where sides, ticks and long lines are."""
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
    rules = np.zeros(sheet.flat.shape, np.uint8)
    for lines, swap in ((sheet.across, 1), (sheet.upright, -1)):
        for line in lines:
            start, end = ((round(x), round(line.at))[::swap] for x in (line.lo, line.hi))
            cv2.line(rules, start, end, 1, 7)
    return zone, frame, ticks, rules


def _wanted(lettering: Lettering, plots: list[Plot], s: Settings) -> list[TextLine]:
    """The lines of text worth reading: those nearest to a plot box."""

    def distance(line: TextLine) -> float:
        x, y = (line.box[0] + line.box[2]) / 2, (line.box[1] + line.box[3]) / 2
        return min(p.box.distance(x, y) for p in plots)

    return sorted(lettering.lines, key=distance)[: s.most_lines]


_ROUND: tuple[Side, ...] = (
    "top",
    "right",
    "bottom",
    "left",
)  # clockwise: a quarter turn moves each on by one


def _upright_order(plots: list[Plot], turn: int) -> list[Plot]:
    """From top to bottom of the page set upright."""
    if turn == 0:
        return plots
    way = {1: (0, 1), 2: (1, -1), 3: (0, -1)}[turn]
    return sorted(plots, key=lambda p: float(p.corners[:, way[0]].mean()) * way[1])


def _evidence(sheet: Sheet, plot: Plot, turn: int, words: tuple[Word, ...]) -> Evidence:
    corners = np.roll(plot.corners, turn, axis=0)
    rows = tuple(_turned(row, turn) for row in plot.ticks)
    look, read = _reader(sheet, NUMERIC), _reader(sheet, None)
    warp = plot.warp
    for _ in range(turn):
        warp = quarter(warp)
    bow, loose = plot.bow, plot.loose
    if turn % 2:
        bow, loose = bow[::-1], loose[::-1]
    return Evidence(corners, warp, turn, rows, words, look, read=read, bow=bow, loose=loose)


def _turned(row: TickRow, turn: int) -> TickRow:
    """The row on the page set upright; along two sides its direction changes."""
    side: Side = row.side
    at = row.at
    for _ in range(turn):
        side = _ROUND[(_ROUND.index(side) + 1) % 4]
        if side in ("left", "right"):  # left to right has become downwards
            at = 1 - at
    order = np.argsort(at)
    return replace(row, side=side, at=at[order], u=row.u[order], weight=row.weight[order])


def _reader(
    sheet: Sheet, alphabet: str | None
) -> Callable[[Sequence[Array]], list[tuple[str, float]]]:
    def read(boxes: Sequence[Array]) -> list[tuple[str, float]]:
        """Reads the text in boxes (4, 2), page px, clockwise from the text's top left."""
        from curvefit.ocr import recognise

        return recognise([_cut(sheet.ink, np.asarray(b, float)) for b in boxes], alphabet)

    return read


def _cut(ink: Image, box: Array) -> Image:
    import cv2

    w = max(float(np.hypot(*(box[1] - box[0]))), 2.0)
    h = max(float(np.hypot(*(box[3] - box[0]))), 2.0)
    target = np.array([[0, 0], [w, 0], [w, h], [0, h]], np.float32)
    matrix = cv2.getPerspectiveTransform(box.astype(np.float32), target)
    cut = cv2.warpPerspective(ink, matrix, (round(w) + 1, round(h) + 1))
    return np.asarray(255 - cut, np.uint8)
