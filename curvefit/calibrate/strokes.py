"""Evidence from strokes: the plot boxes of a vector page, exact."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from curvefit.calibrate.evidence import Evidence, TickRow
from curvefit.calibrate.strokes_boxes import Box, boxes_of
from curvefit.calibrate.strokes_lines import Rules, rules_of
from curvefit.geometry import Warp, homography
from curvefit.notes import PageNotes, PanelNotes
from curvefit.records import Finding, Page, Word

__all__ = ["Settings", "gather"]

Array = NDArray[np.float64]
Side = Literal["bottom", "top", "left", "right"]
SIDES: tuple[Side, ...] = ("bottom", "top", "left", "right")
Kind = Literal["grid", "inside", "outside", "end"]
Places = Callable[[Array], Array]
FEW = 4  #: so few numbers in the text layer are not the numbers of the scales


@dataclass(frozen=True, slots=True)
class Settings:
    """Tolerances, lengths in px at 300 to the inch.

    u : standard uncertainty of a drawn place (files hold a few decimals of a point).
    touch : a tick meets its line within this and half the line's width.
    longest_tick : at most, and as a share of the side behind it.
    grid_share : share of the box that a grid line runs across.
    far : how far outside a further scale may stand, as a share of the box.
    """

    u: float = 0.02
    touch: float = 1.5
    longest_tick: float = 70.0
    longest_share: float = 0.06
    grid_share: float = 0.9
    far: float = 0.4


@dataclass(frozen=True, slots=True, eq=False)
class Facing:
    """What lies about one side of a box, seen from it.

    along : lines parallel to the side; towards : lines at right angles to it, `at` counted along
    the side from its left or bottom end, lo and hi outwards from the side (negative inside) [px].
    """

    side: Side
    length: float
    depth: float
    along: Rules
    towards: Rules


def gather(
    page: Page,
    page_notes: PageNotes,
    panel_notes: tuple[PanelNotes, ...],
    settings: Settings | None = None,
) -> tuple[Evidence, ...]:
    """What the strokes show of each plot box on the page, from top to bottom.

    Parameters
    ----------
    page_notes, panel_notes : what is given is taken as given: the page's turn, the corners of a
        panel (which make a box even where none is seen).

    Returns
    -------
    tuple of Evidence
        Boxes of tables may be among them: they get no scales later. Where the letters are drawn
        as shapes the words are read from their picture and a finding says so. No boxes at all:
        the chart is not drawn in lines that run along the page, or not in lines.
    """
    s = settings or Settings()
    if sum(any(c.isdigit() for c in w.text) for w in page.words) < FEW:
        return _read_from_pixels(page, page_notes, panel_notes, s)
    return _exact(page, page_notes, panel_notes, s)


def _exact(
    page: Page, page_notes: PageNotes, panel_notes: tuple[PanelNotes, ...], s: Settings
) -> tuple[Evidence, ...]:
    turn = page_notes.turn if page_notes.turn is not None else _turn(page.words)
    frame, size = _upright(turn, page.size)
    across, upright = rules_of(page.strokes, frame)
    words = [replace(w, box=_moved(frame, w.box)) for w in page.words]
    boxes = boxes_of(across, upright, _areas(page, frame), words, size)
    back = np.linalg.inv(frame)
    evidence: list[Evidence] = []
    for box, corners in _with_given(boxes, panel_notes, frame):
        warp = _warp(_moved(back, corners), corners)
        others = [b for b in boxes if b is not box]
        rows = _tick_rows(across, upright, box, corners, others, s)
        placed = _moved(back, corners)
        evidence.append(Evidence(placed, warp, turn, rows, page.words, exact=True))
    return tuple(evidence)


def _read_from_pixels(
    page: Page, page_notes: PageNotes, panel_notes: tuple[PanelNotes, ...], s: Settings
) -> tuple[Evidence, ...]:
    """Exact boxes and ticks, with words read from the picture: the lettering is drawn as shapes."""
    from curvefit.calibrate.pixels import gather as gather_pixels

    seen = gather_pixels(page, page_notes, panel_notes)
    if not seen:
        return ()
    turned = replace(page_notes, turn=seen[0].turn)
    lettered = replace(page, words=page.words + _others(seen[0].words, page.words))
    said = Finding(
        "info",
        "page.no-text",
        "the page's lettering is drawn as shapes: its words were read from their picture.",
    )
    exact = _exact(lettered, turned, panel_notes, s)
    return tuple(replace(e, look=seen[0].look, read=seen[0].read, findings=(said,)) for e in exact)


def _others(words: tuple[Word, ...], known: tuple[Word, ...]) -> tuple[Word, ...]:
    """The words that do not stand where a known one does."""
    if not known:
        return words
    low = np.array([w.box.min(0) for w in known]) - 3
    high = np.array([w.box.max(0) for w in known]) + 3
    return tuple(w for w in words if not ((w.centre > low) & (w.centre < high)).all(1).any())


def _turn(words: tuple[Word, ...]) -> int:
    """Quarter turns clockwise that set most of the lettering upright."""
    weight = np.zeros(4)
    for word in words:
        quarter = round(word.angle / 90) % 4
        if abs((word.angle - 90 * quarter + 180) % 360 - 180) < 10:
            weight[quarter] += min(len(word.text), 8)
    return int(weight.argmax())


def _upright(turn: int, size: tuple[int, int]) -> tuple[Array, Array]:
    """Page px → px of the page turned upright, and its size then."""
    w, h = size
    matrices = {
        0: [[1, 0, 0], [0, 1, 0]],
        1: [[0, -1, h - 1], [1, 0, 0]],
        2: [[-1, 0, w - 1], [0, -1, h - 1]],
        3: [[0, 1, 0], [-1, 0, w - 1]],
    }
    matrix = np.vstack([np.array(matrices[turn], float), [0.0, 0.0, 1.0]])
    return matrix, np.array([w, h] if turn % 2 == 0 else [h, w], float)


def _moved(frame: ArrayLike, xy: ArrayLike) -> Array:
    matrix = np.asarray(frame, float)
    return np.asarray(np.asarray(xy, float) @ matrix[:2, :2].T + matrix[:2, 2])


def _areas(page: Page, frame: Array) -> list[Box]:
    """Filled rectangles large enough to be the ground of a plot."""
    areas = []
    for stroke in page.strokes:
        if not stroke.fill or not 4 <= len(stroke.xy) <= 6:
            continue
        xy = _moved(frame, stroke.xy)
        low, high = xy.min(0), xy.max(0)
        if np.minimum(np.abs(xy - low), np.abs(xy - high)).max() < 0.1:
            areas.append(Box(low[0], low[1], high[0], high[1]))
    return areas


def _with_given(
    boxes: list[Box], notes: tuple[PanelNotes, ...], frame: Array
) -> list[tuple[Box, Array]]:
    """Each box and its corners (4, 2), upright px; given corners in place of found ones."""
    found = [(box, _corners(box)) for box in boxes]
    for note in notes:
        if note.corners is None:
            continue
        corners = _moved(frame, np.array(note.corners, float))
        low, high = corners.min(0), corners.max(0)
        given = Box(low[0], low[1], high[0], high[1])
        match = [b for b, _ in found if b.overlap(given) > 0.5]
        found = [(b, c) for b, c in found if b not in match]
        found.append((match[0] if len(match) == 1 else given, corners))
    return sorted(found, key=lambda f: (round(f[0].top / 20), f[0].left))


def _corners(box: Box) -> Array:
    return np.array(
        [
            [box.left, box.top],
            [box.right, box.top],
            [box.right, box.bottom],
            [box.left, box.bottom],
        ]
    )


def _warp(page_corners: Array, corners: Array) -> Warp:
    sides = np.hypot(*(np.roll(corners, -1, 0) - corners).T)
    w, h = float(sides[[0, 2]].mean()), float(sides[[1, 3]].mean())
    return Warp(homography(page_corners, np.array([[0, 0], [w, 0], [w, h], [0, h]])), (w, h))


def _tick_rows(
    across: Rules,
    upright: Rules,
    box: Box,
    corners: Array,
    others: list[Box],
    s: Settings,
) -> tuple[TickRow, ...]:
    """The ticks of the four sides; lines that belong to other boxes are no further scales."""
    rows: list[TickRow] = []
    own = (
        across.where(~_taken(across, others, False)),
        upright.where(~_taken(upright, others, True)),
    )
    for side in SIDES:
        facing = _facing(side, across, upright, box)
        if facing.length <= 0 or facing.depth <= 0:
            continue
        place = _places(side, box, corners)
        rows += _row(facing, "grid", _grid(facing, s), place, 0.0, s)
        outer = _outer(_facing(side, *own, box), s)
        for offset, width in [(0.0, _side_width(facing)), *outer]:
            for kind, ticks in _ticks(facing, offset, width, s):
                rows += _row(facing, kind, ticks, place, offset, s)
        u = np.full(2, s.u / facing.length)
        ends = np.array([0.0, facing.length])
        rows.append(TickRow(side, "end", place(ends), u, np.ones(2)))
    return tuple(rows)


def _taken(rules: Rules, boxes: list[Box], vertical: bool) -> NDArray[np.bool_]:
    """Which lines lie in one of the boxes, or on its sides."""
    taken = np.zeros(len(rules.at), bool)
    for b in boxes:
        span, cross = (b.top, b.bottom), (b.left, b.right)
        if not vertical:
            span, cross = cross, span
        middle = (rules.lo + rules.hi) / 2
        taken |= (
            (rules.at > cross[0] - 3)
            & (rules.at < cross[1] + 3)
            & (middle > span[0])
            & (middle < span[1])
        )
    return taken


def _facing(side: Side, across: Rules, upright: Rules, box: Box) -> Facing:
    if side in ("bottom", "top"):
        along, towards = across, upright
        start, length, depth, forward = box.left, box.width, box.height, True
        line = box.bottom if side == "bottom" else box.top
    else:
        along, towards = upright, across
        start, length, depth, forward = box.bottom, box.height, box.width, False
        line = box.left if side == "left" else box.right
    outwards = 1.0 if side in ("bottom", "right") else -1.0
    return Facing(
        side,
        length,
        depth,
        _seen(along, line, outwards, start, 1.0 if forward else -1.0),
        _seen(towards, start, 1.0 if forward else -1.0, line, outwards),
    )


def _seen(rules: Rules, origin: float, sign: float, begin: float, way: float) -> Rules:
    """The lines with `at` counted from an origin, and lo, hi from another, each with a sign."""
    ends = way * (np.stack([rules.lo, rules.hi]) - begin)
    return Rules(sign * (rules.at - origin), ends.min(0), ends.max(0), rules.width, rules.style)


def _places(side: Side, box: Box, corners: Array) -> Places:
    """The map from px along the found side to fractions of the final one."""
    low, high = corners.min(0), corners.max(0)
    if side in ("bottom", "top"):
        start, length = low[0] - box.left, high[0] - low[0]
    else:
        start, length = box.bottom - high[1], high[1] - low[1]
    return lambda at: np.asarray((at - start) / length)


def _side_width(facing: Facing) -> float:
    on = np.abs(facing.along.at) < 1.0
    return float(facing.along.width[on].max()) if on.any() else 0.0


def _grid(facing: Facing, s: Settings) -> Rules:
    """Lines that run across the whole box."""
    t = facing.towards
    covered = np.minimum(t.hi, 0.0) - np.maximum(t.lo, -facing.depth)
    return t.where((covered > s.grid_share * facing.depth) & _within(facing, t))


def _within(facing: Facing, rules: Rules) -> NDArray[np.bool_]:
    return (rules.at > -1.5) & (rules.at < facing.length + 1.5)


def _outer(facing: Facing, s: Settings) -> list[tuple[float, float]]:
    """(offset, width) of lines outside that run along most of the side."""
    a = facing.along
    covered = np.minimum(a.hi, facing.length) - np.maximum(a.lo, 0.0)
    reach = s.far * max(facing.depth, facing.length)
    far = (a.at > 6.0) & (a.at < reach) & (covered > 0.3 * facing.length)
    beyond = (a.lo < -0.1 * facing.length) | (a.hi > 1.1 * facing.length)
    found = a.where(far & ~beyond)
    places = zip(found.at.tolist(), found.width.tolist(), strict=True)
    return list({round(at, 1): (at, width) for at, width in places}.values())


def _ticks(facing: Facing, offset: float, width: float, s: Settings) -> list[tuple[Kind, Rules]]:
    """Short lines that stand on the side, or on a line outside it, inwards or outwards."""
    t = facing.towards
    touch = s.touch + width / 2
    short = t.length < min(s.longest_tick, max(s.longest_share * facing.depth, 8.0))
    meets = (t.lo < offset + touch) & (t.hi > offset - touch)
    near = t.where(short & meets & _within(facing, t) & (t.length > 1.5))
    outside = near.hi > offset + touch
    return [("outside", near.where(outside)), ("inside", near.where(~outside))]


def _row(
    facing: Facing, kind: Kind, rules: Rules, place: Places, offset: float, s: Settings
) -> list[TickRow]:
    """A row for the ticks of each look; none for a single one, or for nothing but the corners."""
    rows = []
    length = np.round(rules.length / 1.5) if kind != "grid" else np.zeros(len(rules.at))
    looks = {(k, n) for k, n in zip(rules.style, length, strict=True)}
    for style, size in sorted(looks):
        at = np.sort(rules.at[(rules.style == style) & (length == size)])
        at = at[np.r_[True, np.diff(at) > 0.5]]
        corners = np.minimum(np.abs(at), np.abs(at - facing.length)) < 1.5
        if len(at) >= 2 and not (kind == "grid" and corners.all()):
            u = np.full(len(at), s.u / facing.length)
            rows.append(TickRow(facing.side, kind, place(at), u, np.ones(len(at)), offset))
    return rows
