"""The verb of the stage: a page → its panels, with letters, axes, notes and doubts."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.axes import scales
from curvefit.calibrate.doubts import marks_remedy
from curvefit.calibrate.evidence import Evidence
from curvefit.calibrate.labels import numeric, parts
from curvefit.calibrate.neighbours import checked_together
from curvefit.calibrate.titles import read_title
from curvefit.errors import Location, NoChart, NotesError
from curvefit.notes import PageNotes, PanelNotes
from curvefit.records import Axis, Finding, Page, Panel, Word

__all__ = ["calibrate"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Draft:
    """A box on its way to a panel."""

    name: str
    evidence: Evidence
    notes: PanelNotes | None
    axes: tuple[Axis, ...]
    words: tuple[Word, ...]
    findings: tuple[Finding, ...]

    @property
    def complete(self) -> bool:
        """Whether a flow axis and a value axis are calibrated."""
        return any(a.along_flow for a in self.axes) and any(not a.along_flow for a in self.axes)


def calibrate(
    page: Page, page_notes: PageNotes, panel_notes: tuple[PanelNotes, ...]
) -> tuple[Panel, ...]:
    """The plot boxes of a page with their scales, from top to bottom, then left to right.

    Parameters
    ----------
    page : Page
    page_notes, panel_notes : what is known; it is taken as given.

    Raises
    ------
    NoChart
        If no box has a flow axis and a value axis; the message names the box and the notes that
        would rescue it.
    NotesError
        If a note names a panel that is not on the page, or cannot be used.
    """
    drafts: list[Draft] = []
    for evidences in _gathered(page, page_notes, panel_notes):
        drafts = _drafts(evidences, panel_notes)
        if any(d.complete for d in drafts):
            break
    _every_note_found(drafts, panel_notes, page)
    good = [d for d in drafts if d.complete and not (d.notes and d.notes.drop)]
    failed = [d for d in drafts if not d.complete and not (d.notes and d.notes.drop)]
    if not good:
        raise _no_chart(page, drafts, failed)
    panels = [_panel(page, d) for d in good]
    said = [_unread(d) for d in failed]
    panels[0] = replace(panels[0], findings=panels[0].findings + tuple(said))
    return checked_together(panels)


def _gathered(
    page: Page, page_notes: PageNotes, panel_notes: tuple[PanelNotes, ...]
) -> Iterator[tuple[Evidence, ...]]:
    """Evidence from strokes where there are any, then from pixels if those gave no axes."""
    if page.vector:
        from curvefit.calibrate.strokes import gather as from_strokes

        yield from_strokes(page, page_notes, panel_notes)
    from curvefit.calibrate.pixels import gather as from_pixels

    yield from_pixels(page, page_notes, panel_notes)


def _drafts(evidences: Sequence[Evidence], panel_notes: tuple[PanelNotes, ...]) -> list[Draft]:
    """Boxes that are charts or look like one, lettered."""
    ordered = _in_order(evidences)
    own = [replace(e, words=w) for e, w in zip(ordered, _words_of_boxes(ordered), strict=True)]
    letters = _letters()
    first = [(e, *scales(e, letter, None)) for letter, e in zip(letters, own, strict=False)]
    keep = [
        k
        for k, (e, axes, _, _) in enumerate(first)
        if _two_ways(axes) or looks_like_a_chart(e, axes) or _given_box(e, panel_notes)
    ]
    if not any(_two_ways(first[k][1]) for k in keep):  # nothing is readable: every box may be it
        keep = [k for k, (e, axes, _, _) in enumerate(first) if axes or _few_words_in(e)]
    drafts = []
    for letter, k in zip(letters, keep, strict=False):
        e, axes, words, findings = first[k]
        notes = _notes_for(letter, e, panel_notes)
        if notes is not None or letter != letters[k]:
            axes, words, findings = scales(e, letter, notes)
        drafts.append(Draft(letter, e, notes, tuple(axes), words, e.findings + findings))
    return _with_shared_flow(drafts)


def _letters() -> list[str]:
    single = [chr(65 + k) for k in range(26)]
    return single + [a + b for a in single for b in single]


def _two_ways(axes: Sequence[Axis]) -> bool:
    return any(a.along_flow for a in axes) and any(not a.along_flow for a in axes)


def _upright(e: Evidence) -> Array:
    """Corners as seen on the page turned upright."""
    turn = np.array([[[1, 0], [0, 1]], [[0, -1], [1, 0]], [[-1, 0], [0, -1]], [[0, 1], [-1, 0]]])
    return np.asarray(e.corners @ turn[e.turn % 4].T.astype(float))


def _in_order(evidences: Sequence[Evidence]) -> list[Evidence]:
    """From top to bottom; boxes that overlap in height from left to right."""
    left = sorted(evidences, key=lambda e: float(_upright(e)[:, 1].min()))
    out: list[Evidence] = []
    while left:
        row = [left.pop(0)]
        low = _upright(row[0])[:, 1]
        middle = float(low.mean())
        for e in list(left):
            y = _upright(e)[:, 1]
            if y.min() < middle < y.max() and low.min() < y.mean() < low.max():
                row.append(e)
                left.remove(e)
        out += sorted(row, key=lambda e: float(_upright(e)[:, 0].min()))
    return out


def _words_of_boxes(evidences: Sequence[Evidence]) -> list[tuple[Word, ...]]:
    """To each box the words that are its own: each word belongs to the nearest box."""
    boxes: dict[int, list[Word]] = {k: [] for k in range(len(evidences))}
    words = {id(w): w for e in evidences for w in e.words}.values()
    places: dict[tuple[float, float], Word] = {}
    for w in words:  # the boxes share the words of the page
        places.setdefault((round(float(w.centre[0]), 1), round(float(w.centre[1]), 1)), w)
    for word in places.values():
        number = numeric(word.text) or len(parts(word.text)) > 1
        cost = [_distance(e, word, number) for e in evidences]
        boxes[int(np.argmin(cost))].append(word)
    return [tuple(boxes[k]) for k in range(len(evidences))]


def _distance(e: Evidence, word: Word, number: bool) -> float:
    """How far a word stands outside a box [page px]; a flow title to the box above it."""
    flat = e.warp.to_panel(word.box)
    if not np.isfinite(flat).all():
        return 1e9
    w, h = e.warp.size
    scale = float(np.hypot(*(e.corners[1] - e.corners[0]))) / w
    x0, y0 = flat.min(0)
    x1, y1 = flat.max(0)
    dx = max(-(x0 + x1) / 2, (x0 + x1) / 2 - w, 0.0)
    above, below = max(-(y0 + y1) / 2, 0.0), max((y0 + y1) / 2 - h, 0.0)
    if not number and below:
        dimension = read_title(word.text).dimension
        if dimension == "flow":
            below *= 0.5 if dx == 0 else 1.0  # the title of a flow axis stands below its box
        elif dimension is not None:
            below *= 4.0  # that of a value axis beside or above it
    return float(np.hypot(dx, above + below)) * scale


def looks_like_a_chart(e: Evidence, axes: Sequence[Axis]) -> bool:
    """Whether a box without readable scales is drawn like a chart, not like a table."""
    across = _evenly_divided(e, ("bottom", "top"))
    up = _evenly_divided(e, ("left", "right"))
    if axes and (across or up):  # curves that end on a side look like ticks there
        return True
    return across and up and _few_words_in(e)


def _few_words_in(e: Evidence, most: int = 12) -> bool:
    """A table is full of words, a plot box holds a few labels."""
    w, h = e.warp.size
    inside = 0
    for word in e.words:
        x, y = e.warp.to_panel(word.centre)[0]
        inside += bool(0 < x < w and 0 < y < h)
    return inside <= most


def _evenly_divided(e: Evidence, sides: tuple[str, ...]) -> bool:
    for row in e.ticks:
        if row.side in sides and row.kind != "end" and len(row.at) >= 3:
            gaps = np.diff(np.r_[0.0, row.at[(row.at > 0.01) & (row.at < 0.99)], 1.0])
            usual = np.abs(gaps - np.median(gaps)) < 0.15 * np.median(gaps)
            if len(gaps) >= 3 and usual.mean() > 0.75:
                return True
    return False


def _given_box(e: Evidence, panel_notes: tuple[PanelNotes, ...]) -> bool:
    return any(
        n.corners is not None and _overlap(e, np.array(n.corners)) > 0.9 for n in panel_notes
    )


def _overlap(e: Evidence, corners: Array) -> float:
    """Shared area over united area of the upright bounds."""
    a0, a1 = e.corners.min(0), e.corners.max(0)
    b0, b1 = corners.min(0), corners.max(0)
    both = np.prod(np.clip(np.minimum(a1, b1) - np.maximum(a0, b0), 0, None))
    return float(both / (np.prod(a1 - a0) + np.prod(b1 - b0) - both))


def _notes_for(letter: str, e: Evidence, panel_notes: tuple[PanelNotes, ...]) -> PanelNotes | None:
    mine = [n for n in panel_notes if _means(n, letter, e)]
    if not mine:
        return None
    first = mine[0]
    for n in mine[1:]:
        first = replace(
            first,
            corners=first.corners or n.corners,
            axes=first.axes + n.axes,
            leave_out=first.leave_out + n.leave_out,
            drop=first.drop or n.drop,
        )
    return first


def _means(n: PanelNotes, letter: str, e: Evidence) -> bool:
    if n.box is not None:
        x0, y0, x1, y1 = n.box
        middle = e.corners.mean(0)
        inside = x0 <= middle[0] <= x1 and y0 <= middle[1] <= y1
        centre = np.array([[(x0 + x1) / 2, (y0 + y1) / 2]])
        x, y = e.warp.to_panel(centre)[0] / np.array(e.warp.size)
        return inside or bool(0 < x < 1 and 0 < y < 1)
    if n.name is not None:
        return n.name == letter
    return n.corners is not None and _overlap(e, np.array(n.corners)) > 0.5


def _every_note_found(
    drafts: Sequence[Draft], panel_notes: tuple[PanelNotes, ...], page: Page
) -> None:
    for n in panel_notes:
        if not any(_means(n, d.name, d.evidence) for d in drafts):
            what = f'panel "{n.name}"' if n.name else "a panel at that box"
            there = ", ".join(f"{d.name} at {_pixels(d.evidence)}" for d in drafts) or "none"
            raise NotesError(
                f"the notes name {what}, which is not on the page",
                Location(file=page.file, page=page.number, line=n.line, key="panel"),
                f"Panels on the page: {there}.",
            )


def _pixels(e: Evidence) -> str:
    x0, y0 = e.corners.min(0)
    x1, y1 = e.corners.max(0)
    return f"pixels {x0:.0f},{y0:.0f} to {x1:.0f},{y1:.0f}"


def _with_shared_flow(drafts: list[Draft]) -> list[Draft]:
    """Boxes stacked on one another without numbers between them share the flow axis."""
    out = list(drafts)
    for k, d in enumerate(drafts):
        if any(a.along_flow for a in d.axes) or not d.axes:
            continue
        donors = [
            o
            for o in drafts
            if any(a.along_flow for a in o.axes) and _same_edges(d.evidence, o.evidence)
        ]
        if not donors:
            continue
        mid = _upright(d.evidence)[:, 1].mean()
        donor = min(donors, key=lambda o: abs(float(_upright(o.evidence)[:, 1].mean() - mid)))
        lent = tuple(_lent(a, d) for a in donor.axes if a.along_flow)
        out[k] = replace(d, axes=lent + d.axes)
    return out


def _same_edges(a: Evidence, b: Evidence) -> bool:
    """Whether two boxes stand in line one over the other."""
    flat = a.warp.to_panel(b.corners)[:, 0] / a.warp.size[0]
    return bool(np.abs(flat - [0, 1, 1, 0]).max() < 0.006)


def _lent(axis: Axis, d: Draft) -> Axis:
    """The flow axis of a box in line, on this box's own side."""
    w, h = d.evidence.warp.size
    t = axis.fraction(np.array([m.value * axis.factor for m in axis.marks if m.value is not None]))
    y = h if axis.side == "bottom" else 0.0
    xy = d.evidence.warp.to_page(np.c_[t * w, np.full(len(t), y)])
    known = [m for m in axis.marks if m.value is not None]
    marks = tuple(
        replace(m, xy=p, u=float(np.hypot(m.u, 0.3))) for m, p in zip(known, xy, strict=True)
    )
    line = 0.0 if d.evidence.exact else 0.3 / w * axis.slope
    extra = line**2 * np.array([[1.0, -1.0], [-1.0, 2.0]])
    return replace(
        axis,
        name=f"{d.name}.{axis.name.partition('.')[2]}",
        marks=marks,
        covariance=axis.covariance + extra,
    )


def _panel(page: Page, d: Draft) -> Panel:
    notes = d.notes or PanelNotes()
    masks = tuple(
        np.array([[x0, y0], [x1, y0], [x1, y1], [x0, y1]], float)
        for x0, y0, x1, y1 in notes.leave_out
    )
    e = d.evidence
    return Panel(
        d.name, page, e.corners, e.warp, d.axes, d.words, e.turn, masks, d.findings,
        "given" if notes.corners is not None else "read",
    )  # fmt: skip


def _missing(d: Draft) -> list[str]:
    missing = []
    if not any(a.along_flow for a in d.axes):
        missing.append("bottom")
    if not any(not a.along_flow for a in d.axes):
        missing.append("left")
    return missing


def _unread(d: Draft) -> Finding:
    missing = _missing(d)
    x0, y0 = d.evidence.corners.min(0)
    x1, y1 = d.evidence.corners.max(0)
    where = Location(panel=d.name, box_px=(float(x0), float(y0), float(x1), float(y1)))
    sides = " and ".join(missing)
    message = f"the box is drawn like a chart, but no scale was read at its {sides} side."
    remedy = " ".join(marks_remedy(d.name, m) for m in missing)
    return Finding("warning", "panel.unread", message, where, remedy)


def _no_chart(page: Page, drafts: Sequence[Draft], failed: Sequence[Draft]) -> NoChart:
    where = Location(file=page.file, page=page.number)
    if not failed:
        what = "all panels are left out by the notes" if drafts else "no plot box was found"
        remedy = (
            'Take drop = true out of the notes.' if drafts else
            "If there is a chart, give its four corners in the notes: "
            '[[panel]] name = "A", corners = [[x, y], …], clockwise from the top left, '
            "and two marks for each axis."
        )  # fmt: skip
        return NoChart(what, where, remedy)
    d = max(
        failed,
        key=lambda d: abs(float(np.prod(d.evidence.corners.max(0) - d.evidence.corners.min(0)))),
    )
    said = _unread(d)
    reasons = " ".join(f.message for f in d.findings if f.severity == "error")
    what = f"panel {d.name}: {said.message} {reasons}".strip()
    lines = ", ".join(
        f'{{panel = "{d.name}", side = "{m}", marks = [[x, y, value], [x, y, value]]}}'
        for m in _missing(d)
    )
    remedy = f"Give two marks for each missing axis in the notes: axis = [{lines}]"
    return NoChart(what, replace(where, panel=d.name, box_px=said.where.box_px), remedy)
