"""What stayed in doubt, in words that a user can act on."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from curvefit.errors import Location
from curvefit.identify.levels import Level
from curvefit.identify.line import Line
from curvefit.identify.placing import Label, spot
from curvefit.identify.quantities import Choice
from curvefit.identify.quantities import Settings as ChoiceSettings
from curvefit.identify.wording import Meaning, quantity_named
from curvefit.records import Axis, Finding, Panel, Trace
from curvefit.units import from_si

__all__ = [
    "no_axis",
    "no_unit",
    "of_choice",
    "of_family",
    "of_label",
    "of_level",
    "of_odd",
    "of_page",
    "of_shift",
    "of_twin",
]


def _words(quantity: str) -> str:
    return {"npsh_required": "NPSH"}.get(quantity, quantity.replace("_", " "))


def _at(trace: Trace) -> str:
    """The key for a notes file, whose pixels are those of the stored picture."""
    middle = len(trace.flat) // 2
    ((x, y),) = trace.panel.page.to_stored(trace.xy[middle : middle + 1])
    return f"at = [{x:.0f}, {y:.0f}]"


def no_axis(trace: Trace, panel: Panel) -> Finding:
    """A line that no pair of axes turns into numbers."""
    return Finding(
        "warning",
        "curve.no-axis",
        f"a line in panel {panel.name} was followed, but the panel has no"
        " flow axis and value axis to read it against",
        Location(panel=panel.name),
        "give the axis two marks in the notes",
    )


def no_unit(trace: Trace, panel: Panel, flow: Axis | None, value: Axis) -> Finding:
    """A line whose axis has no unit."""
    which = "flow axis" if flow is None else value.name
    return Finding(
        "warning",
        "curve.no-unit",
        f"a line in panel {panel.name} could not be turned into numbers: the unit of the"
        f" {which} is not known",
        Location(panel=panel.name, axis=None if flow is None else value.name),
        "give the unit of the axis in the notes",
    )


def of_choice(line: Line, choice: Choice) -> None:
    """Mark a quantity as a guess where the next best was nearly as good.

    An axis that does not say its quantity is a warning, unless its unit leaves little choice and
    its lines have the very shape (said once, by the first of its lines).
    """
    needed = ChoiceSettings().margin
    unread, close = choice.axis.quantity is None, choice.margin < needed
    if choice.denied is not None:
        _deny(line, choice)
        return
    if not unread and not close:
        return
    line.doubts |= {"quantity", "axis"} if close else {"quantity"}
    likely = not close and choice.axis.unit is not None and choice.margin > 2 * needed
    why = (
        f"label, shape and colour favour it by {max(choice.margin, 0):.1f} only,"
        f" {needed:.1f} needed"
        if close
        else f"the axis {choice.axis.name} does not say what it shows"
    )
    line.findings.append(
        Finding(
            "info" if likely else "warning",
            "curve.guess",
            f"this line was taken as {_words(choice.quantity)} on {choice.axis.name}: {why}",
            remedy=f"a [[curve]] note with {_at(line.trace)} and quantity or axis settles it",
        )
    )


def _deny(line: Line, choice: Choice) -> None:
    """Warn of a line whose label names what no axis of its panel shows."""
    line.doubts |= {"quantity", "axis"}
    line.findings.append(
        Finding(
            "warning",
            "curve.guess",
            f"a label names this line {_words(str(choice.denied))}, but no axis of the panel"
            f" shows that; it was taken as {_words(choice.quantity)} on {choice.axis.name}",
            remedy=f"give the missing axis two marks in the notes, or a [[curve]] note with"
            f" {_at(line.trace)} and quantity",
        )
    )


def of_level(line: Line, level: Level) -> None:
    """Say where the level of an iso line is unknown or was mended."""
    text = "" if level.label is None else f' "{level.label.text}"'
    if level.value is None:
        line.findings.append(
            Finding(
                "warning",
                "curve.no-level",
                f"no level could be read for this line of equal {_words(line.quantity[4:])}"
                + (f" (its label reads{text}, which its neighbours contradict)" if text else ""),
                remedy=f"a [[curve]] note with {_at(line.trace)} and level settles it",
            )
        )
    elif level.bent:
        line.doubts.add("level")
        shown = f"{from_si(level.value, level.unit):g} %"
        line.findings.append(
            Finding(
                "info" if text else "warning",
                "curve.level-mended",
                f"the label{text} was taken as {shown}, the level that fits between its neighbours"
                if text
                else f"no label could be read; {shown} is the only level of the series that fits"
                " between its neighbours",
                remedy=f"a [[curve]] note with {_at(line.trace)} and level settles it",
            )
        )


def of_label(line: Line, label: Label, meaning: Meaning) -> None:
    """Say where a label was bent, or stands far from the line that it was given to."""
    if meaning.value is None or meaning.kind != "diameter":
        return
    shown = from_si(meaning.value, meaning.unit)
    seen = spot(label, line.trace)
    far = min(seen.gap, seen.start, seen.end)
    if meaning.cost >= 0.5:
        line.findings.append(
            Finding(
                "info",
                "label.mended",
                f'the label "{label.text}" was read as Ø{shown:.6g}, in line with the others',
                remedy=f"a [[curve]] note with {_at(line.trace)} and diameter settles it",
            )
        )
    if "/" in label.text and meaning.unit == "mm":
        line.doubts.add("diameter")
        line.findings.append(
            Finding(
                "info",
                "label.stepped",
                f'the label "{label.text}" names two diameters; the first, {shown:.6g} mm, stands'
                " for the line",
                remedy=f"a [[curve]] note with {_at(line.trace)} and diameter settles it",
            )
        )
    if far > 4.0:
        line.doubts.add("diameter")


def of_twin(line: Line, twin: Line, sure: bool) -> None:
    """Say that a line was named after its twin in another panel."""
    line.doubts |= {"diameter"} if twin.diameter is not None else {"speed"}
    how = "ends at the same flow as" if sure else "has the same place in its family as"
    own = f'its own label reads "{line.label}"' if line.label else "it has no label of its own"
    line.findings = [f for f in line.findings if f.code != "label.mended"]
    line.findings.append(
        Finding(
            "info" if sure else "warning",
            "curve.named-by-twin",
            f"{own}; it {how} the {_words(twin.quantity)} line"
            f' "{twin.label}" in panel {twin.panel.name} and took its name',
            remedy=f"a [[curve]] note with {_at(line.trace)} and diameter or speed settles it",
        )
    )


def of_odd(line: Line) -> None:
    """Warn of a diameter that does not fit the heads of its family."""
    line.doubts.add("diameter")
    line.findings.append(
        Finding(
            "warning",
            "label.odd",
            f'the label "{line.label}" does not lie where the heads of its family put it:'
            " a digit may be misread",
            remedy=f"a [[curve]] note with {_at(line.trace)} and diameter settles it",
        )
    )


def of_shift(line: Line) -> None:
    """Warn of a label that may belong to the next line, since one of the family has none."""
    line.doubts |= {"diameter"} if line.diameter is not None else {"speed"}
    line.findings.append(
        Finding(
            "warning",
            "label.shifted",
            f'the label "{line.label}" stands as near to the next line of the family, and a line'
            " has no label: all labels may belong one line further",
            remedy=f"a [[curve]] note with {_at(line.trace)} and diameter or speed settles it",
        )
    )


def of_family(group: Sequence[Line]) -> None:
    """Warn of lines of a family without a name, and of two with the same."""
    if len(group) < 2:
        return
    named = [x for x in group if _mark(x) is not None]
    unnamed = [x for x in group if _mark(x) is None]
    for line in unnamed if named else unnamed[:1]:  # where none has a label, once is enough
        which = "this one has none" if named else "they cannot be told apart"
        line.findings.append(
            Finding(
                "warning",
                "curve.unlabelled",
                f"{len(group)} {_words(line.quantity)} lines stand in panel {line.panel.name},"
                f" {len(named)} have a readable label: {which}",
                remedy=f"a [[curve]] note with {_at(line.trace)} and diameter or speed names it",
            )
        )
    marks = [_mark(x) for x in named]
    for line, mark in zip(named, marks, strict=True):
        if marks.count(mark) > 1:
            line.findings.append(
                Finding(
                    "warning",
                    "curve.duplicate-diameter",
                    f"{marks.count(mark)} {_words(line.quantity)} lines have the label"
                    f' "{line.label}"',
                    remedy=f"a [[curve]] note with {_at(line.trace)} and diameter corrects it",
                )
            )


def _mark(line: Line) -> object:
    if line.marked:
        return line.mark
    return line.label if line.label and quantity_named(line.label) is None else None


def of_page(
    lines: Sequence[Line],
    panels: Sequence[Panel],
    labels: Sequence[Sequence[Label]],
    used: set[int],
) -> list[Finding]:
    """Labels inside a box that name a diameter or level of which no line is known."""
    found = []
    for panel, words in zip(panels, labels, strict=True):
        own = [x for x in lines if x.panel.name == panel.name]
        width, height = panel.warp.size
        for label in words:
            inside = 0 < label.centre[0] < width and 0 < label.centre[1] < height
            if id(label.word) in used or not inside or label.masked or not own:
                continue
            if not _names_a_line(label, own):
                continue
            found.append(
                Finding(
                    "warning",
                    "label.unmatched",
                    f'the label "{label.text}" belongs to no line that was found:'
                    " one may be missing",
                    Location(panel=panel.name, box_px=_box(label)),
                    "draw the missing line in the notes (path), or leave it so if there is none",
                )
            )
    return found


def _names_a_line(label: Label, lines: Sequence[Line]) -> bool:
    """Whether a label says of a line what no line near it says already."""
    sure = [
        m for m in label.meanings if m.plain and m.cost < 0.3 and m.kind in ("diameter", "percent")
    ]
    if not sure:
        return False
    isos = any(x.iso for x in lines)
    for m in sure:
        if m.kind == "percent" and not isos:
            return False
        near = [x for x in lines if spot(label, x.trace).gap < 2.5]
        if any(m.value in (x.diameter, x.level, x.speed_ratio) for x in near):
            return False
        if m.kind == "diameter" and not any(x.diameter is not None for x in lines):
            return False
    return True


def _box(label: Label) -> tuple[float, float, float, float]:
    low, high = label.word.box.min(0), label.word.box.max(0)
    x0, y0, x1, y1 = (float(v) for v in np.r_[low, high])
    return x0, y0, x1, y1
