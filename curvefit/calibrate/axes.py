"""Evidence of one plot box → its axes: numbers, ticks, titles and notes together."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.consensus import (
    Label,
    Progression,
    agree,
    near_value,
)
from curvefit.calibrate.doubts import bowed, doubts_of
from curvefit.calibrate.evidence import Evidence, TickRow
from curvefit.calibrate.given import given_axes, with_meaning
from curvefit.calibrate.labels import row_readings
from curvefit.calibrate.naming import name_axes
from curvefit.calibrate.pitch import pitch_of, too_wide
from curvefit.calibrate.rows import Column, Spot, columns, spots
from curvefit.calibrate.snap import Scale, ends_covariance, snap
from curvefit.notes import PanelNotes
from curvefit.records import Axis, Finding, Mark, Word
from curvefit.records.base import Side

__all__ = ["scales"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Found:
    """An axis in the making: its numbers, their progression, the scale on the ticks."""

    name: str
    column: Column
    progression: Progression
    scale: Scale
    doubts: tuple[Finding, ...]


def scales(
    evidence: Evidence, panel_name: str, panel_notes: PanelNotes | None = None
) -> tuple[tuple[Axis, ...], tuple[Word, ...], tuple[Finding, ...]]:
    """The axes of one plot box, the words that are no tick numbers, and what is in doubt.

    Parameters
    ----------
    evidence : Evidence
    panel_name : letter of the panel
    panel_notes : what the user gave for this panel; it wins.

    Returns
    -------
    axes, words, findings
        An axis whose numbers contradict each other is left out, with an error among the findings.
    """
    notes = panel_notes or PanelNotes()
    all_spots = spots(evidence.words, evidence.warp)
    given_sides = {a.name for a in notes.axes if a.marks}
    found: list[Found] = []
    findings: list[Finding] = []
    taken: dict[Side, int] = {}
    for column in columns(all_spots, evidence.warp.size):
        order = taken.get(column.side, 0) + 1
        name = column.side if order == 1 else f"{column.side}.{order}"
        if name in given_sides:
            taken[column.side] = order
            continue
        one, said = _read(evidence, column, f"{panel_name}.{name}", found)
        findings += said
        if one is not None:
            taken[column.side] = order
            found.append(one)
    axes = [_axis(evidence, f) for f in found]
    used = {id(lb.word) for f in found for lb in f.progression.labels if lb.word is not None}
    rest = [s for s in all_spots if id(s.word) not in used]
    again = None if evidence.read is None else lambda boxes: _lines(evidence, boxes)
    axes, _, said = name_axes(axes, [f.column for f in found], rest, evidence.warp.size, again)
    findings += said
    axes, said = given_axes(evidence, panel_name, notes, axes)
    findings += said
    axes = _named_by_titles(evidence, notes, axes, rest)
    for f in found:
        findings += f.doubts
    findings += bowed(evidence, panel_name)
    if evidence.look is not None or not evidence.exact:
        beside = [f for f in found if f.column.order == 1]  # farther out ticks run into numbers
        findings += too_wide(
            {f.name: pitch_of(f.progression.labels, f.progression.chosen) for f in beside}
        )
    order_of = {side: k for k, side in enumerate(("bottom", "top", "left", "right"))}
    axes = sorted(axes, key=lambda a: (order_of[a.side], a.name))
    words = tuple(s.word for s in rest)
    kept = [f for f in findings if f.where.axis is None or not _given(f.where.axis, axes)]
    return tuple(axes), words, tuple(kept)


def _named_by_titles(
    evidence: Evidence, notes: PanelNotes, axes: list[Axis], text: Sequence[Spot]
) -> list[Axis]:
    """Axes that the notes gave marks for, with what titles say where the notes are silent."""
    bare = [a for a in axes if a.by == "given" and a.unit is None and not a.title]
    if not bare:
        return axes
    height = float(np.median([s.height for s in text])) if text else 20.0
    places = [Column(a.side, (), 0.0, height, height) for a in bare]
    again = None if evidence.read is None else lambda boxes: _lines(evidence, boxes)
    named, _, _ = name_axes(bare, places, text, evidence.warp.size, again)
    meant = {a.name: with_meaning(a, notes) for a in named}
    return [meant.get(a.name, a) for a in axes]


def _lines(evidence: Evidence, boxes: Sequence[Array]) -> list[str]:
    """The text in boxes given in panel px."""
    if evidence.read is None:
        return [""] * len(boxes)
    return [
        t if score > 0.5 else ""
        for t, score in evidence.read([evidence.warp.to_page(b) for b in boxes])
    ]


def _given(name: str, axes: Sequence[Axis]) -> bool:
    return any(a.name == name and a.by == "given" for a in axes)


def _side_px(evidence: Evidence, side: Side) -> float:
    return evidence.warp.size[0 if side in ("bottom", "top") else 1]


def _read(
    evidence: Evidence, column: Column, name: str, before: Sequence[Found]
) -> tuple[Found | None, list[Finding]]:
    """The axis of one column of numbers, or None with the reason."""
    progression = agree(column.labels)
    if evidence.look is not None and _wants_look(progression, column):
        progression = _second_look(evidence, column, progression)
    if progression is None or progression.exact < 2 or progression.score < 0.8:
        return None, []
    side_px = _side_px(evidence, column.side)
    second = column.side in ("right", "top") or column.order > 1
    rows = _rows(evidence, column)
    scale = snap(progression, rows, side_px, exact=evidence.exact, demanding=second)
    if (second and not scale.kind) and (progression.exact < 4 or column.order > 1):
        return None, []
    if _repeats(column, progression, before):
        return None, []
    doubts, refused = doubts_of(name, column, progression, scale, side_px)
    if refused:
        return None, doubts
    return Found(name, column, progression, scale, tuple(doubts)), []


def _rows(evidence: Evidence, column: Column) -> list[TickRow]:
    """Ticks that may carry the column: on the side of the box, or on a line of their own."""
    facing = {"bottom": "top", "top": "bottom", "left": "right", "right": "left"}[column.side]
    own = [r for r in evidence.ticks if r.side == column.side]
    inner = [r for r in own if r.offset <= column.near + 1.5 * column.height]
    outer = [r for r in inner if r.offset > 0]
    if column.order > 1 and outer:
        return outer + [r for r in inner if not r.offset]
    grid = [r for r in evidence.ticks if r.side == facing and r.kind == "grid" and not r.offset]
    has_grid = any(r.kind == "grid" for r in own)
    return [*inner, *([] if has_grid else grid)]


def _repeats(column: Column, p: Progression, before: Sequence[Found]) -> bool:
    """Whether an outer column only repeats the scale of the one inside it."""
    for f in before:
        if f.column.side == column.side and f.column.order < column.order:
            ends = [(p.value(t), f.progression.value(t)) for t in (0.0, 1.0)]
            span = abs(ends[1][1] - ends[0][1])
            if all(abs(x - y) < 0.02 * span for x, y in ends):
                return True
    return False


def _wants_look(p: Progression | None, column: Column) -> bool:
    if p is None or p.score < 0.8:
        return False
    expected = len(p.lattice(-0.01, 1.01)) if not p.log else p.exact
    misfits = len(p.labels) - p.exact
    return p.exact < 4 or misfits > 0 or p.exact < 0.8 * expected


def _second_look(evidence: Evidence, column: Column, p: Progression | None) -> Progression | None:
    """The progression after the places without a good number were looked at afresh."""
    if p is None or evidence.look is None:
        return p
    good = {
        round(r.value, 9)
        for lb, r in zip(p.labels, p.chosen, strict=True)
        if r is not None and lb.firm and r.cost < 0.3
    }
    values = [v for v in p.lattice(-0.01, 1.01) if round(float(v), 9) not in good][:16]
    if not values:
        return p
    places = p.place(np.array(values))
    seen = evidence.look([_where(evidence, column, float(t)) for t in places])
    texts = [t.strip() if score > 0.5 else "" for t, score in seen]
    read = row_readings([lb.text for lb in p.labels] + texts)[len(p.labels) :]
    size = column.labels[0].size
    fresh = [
        Label(float(t), size, text, r, None, False)
        for t, text, r in zip(places, texts, read, strict=True)
        if r
    ]
    confirmed = [lb for lb in fresh if _agrees(lb, p)]
    stays = [
        lb
        for lb, r in zip(p.labels, p.chosen, strict=True)
        if r is not None or not any(abs(lb.at - c.at) < 0.7 * size for c in confirmed)
    ]
    other = [lb for lb in fresh if lb not in confirmed]
    if len(other) > len(confirmed):  # the fresh look speaks for another scale
        again = agree([*p.labels, *fresh])
        return again if again is not None and again.score > p.score else p
    taken = [lb for lb in confirmed if not any(abs(lb.at - s.at) < 0.7 * size for s in stays)]
    return agree([*stays, *taken]) or p


def _agrees(lb: Label, p: Progression) -> bool:
    expected = near_value(lb, p)
    return expected is not None and any(
        abs(r.value - expected) < 1e-6 * max(abs(expected), 1) and r.cost < 0.5 for r in lb.readings
    )


def _where(evidence: Evidence, column: Column, t: float) -> Array:
    """Page px box (4, 2) in which the number at t stands."""
    w, h = evidence.warp.size
    near, far = column.near - 0.2 * column.height, column.far + 0.2 * column.height
    if column.side in ("left", "right"):
        y = (1 - t) * h
        half = 0.75 * column.height
        x0, x1 = (-far, -near) if column.side == "left" else (w + near, w + far)
        flat = [[x0, y - half], [x1, y - half], [x1, y + half], [x0, y + half]]
    else:
        widest = max((lb.word.width for lb in column.labels if lb.word is not None), default=0.0)
        half = 0.5 * max(widest, 1.5 * column.height) + 0.3 * column.height
        y0, y1 = (h + near, h + far) if column.side == "bottom" else (-far, -near)
        x = t * w
        flat = [[x - half, y0], [x + half, y0], [x + half, y1], [x - half, y1]]
    return evidence.warp.to_page(np.array(flat))


def _axis(evidence: Evidence, f: Found) -> Axis:
    s = f.scale
    # a line may sag anywhere by what is left of the bow: half of it, as a standard uncertainty
    way = 0 if f.column.side in ("bottom", "top") else 1
    px = float(np.hypot(0.5 * evidence.bow[way], evidence.loose[way]))
    sagging = ends_covariance(s.slope, px / _side_px(evidence, f.column.side))
    return Axis(
        name=f.name,
        side=f.column.side,
        quantity=None,
        unit=None,
        printed_unit="",
        scale="log" if s.log else "linear",
        offset=s.offset,
        slope=s.slope,
        covariance=s.covariance + sagging,
        marks=_marks(evidence, f),
    )


def _marks(evidence: Evidence, f: Found) -> tuple[Mark, ...]:
    """The numbered places, and the ticks without a number that the scale rests on."""
    s, p = f.scale, f.progression
    side_px = _side_px(evidence, f.column.side)
    marks: dict[float, Mark] = {}
    for v, t, u in zip(s.values, s.at, s.u, strict=True):
        text = ""
        marks[round(float(v), 9)] = Mark(
            on_side(evidence, f.column.side, float(t)), float(u) * side_px, text, float(v)
        )
    for lb, r in zip(p.labels, p.chosen, strict=True):
        value = r.value if r is not None else near_value(lb, p)
        if value is None:
            continue
        key = round(float(value), 9)
        old = marks.get(key)
        if old is not None:
            if r is not None or not old.text:
                marks[key] = replace(old, text=lb.text)
        else:
            t = float(s.place(np.array(value)))
            u = 0.15 * lb.size * side_px
            at = on_side(evidence, f.column.side, t)
            marks[key] = Mark(at, u, lb.text, float(value), used=not s.kind)
    return tuple(marks[k] for k in sorted(marks))


def on_side(evidence: Evidence, side: Side, t: float) -> Array:
    """Page px of a place on a side of the box."""
    w, h = evidence.warp.size
    if side in ("bottom", "top"):
        flat = [[t * w, h if side == "bottom" else 0.0]]
    else:
        flat = [[0.0 if side == "left" else w, (1 - t) * h]]
    return np.asarray(evidence.warp.to_page(np.array(flat))[0])
