"""What the notes say of curves and pumps, put over what was read."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from curvefit.errors import Location, NotesError
from curvefit.identify.line import Line
from curvefit.identify.values import values
from curvefit.notes import CurveNotes, Notes, PumpNotes
from curvefit.records import QUANTITIES, Axis
from curvefit.units import to_si

__all__ = ["REACH_PX", "apply", "dropped"]

REACH_PX = 6.0  #: a note's point this near to a line names it


def apply(lines: Sequence[Line], names: Sequence[str], notes: Notes) -> None:
    """Set on each line what the notes give of it.

    Raises
    ------
    NotesError
        If a note names no line that exists, or an axis that its panel does not have.
    """
    for note in notes.curves:
        if note.drop:
            continue
        line = _line_of(note, lines, names, notes)
        if line is not None:
            _set(line, note, notes)


def dropped(lines: Sequence[Line], names: Sequence[str], notes: Notes) -> set[int]:
    """Indices of lines that the notes strike out.

    A note by a point that is on no line is taken as done: the line was never followed.
    """
    out = set()
    for note in notes.curves:
        if not note.drop:
            continue
        line = _line_of(note, lines, names, notes)
        if line is not None:
            out.add(next(i for i, each in enumerate(lines) if each is line))
    return out


def _line_of(
    note: CurveNotes, lines: Sequence[Line], names: Sequence[str], notes: Notes
) -> Line | None:
    pool = [i for i, x in enumerate(lines) if note.panel in (None, x.panel.name)]
    point = note.at
    if point is None and note.path and note.name is None:
        point = note.path[len(note.path) // 2]
    if point is not None:
        near = [(_distance(lines[i], point), i) for i in pool]
        best = min(near, default=(np.inf, -1))
        if best[0] <= REACH_PX:
            return lines[best[1]]
    for i in pool:
        if note.name is not None and note.name in (names[i], lines[i].trace.name):
            return lines[i]
    if note.path or (note.drop and note.at is not None):
        return None
    raise _unmatched(note, names, notes)


def _distance(line: Line, point: tuple[float, float]) -> float:
    """From a point to the line [page px], between its points too."""
    xy = line.trace.xy
    a, b = xy[:-1], xy[1:]
    if not len(a):
        return float(np.hypot(*(xy[0] - point))) if len(xy) else np.inf
    along = b - a
    length = np.maximum((along**2).sum(1), 1e-12)
    t = np.clip(((np.asarray(point) - a) * along).sum(1) / length, 0, 1)
    return float(np.hypot(*(a + t[:, None] * along - point).T).min())


def _unmatched(note: CurveNotes, names: Sequence[str], notes: Notes) -> NotesError:
    what = f'name = "{note.name}"' if note.name is not None else f"at = {note.at}"
    if note.name is None and note.at is None:
        what = "neither name nor at"
    exist = ", ".join(f'"{n}"' for n in names) or "none"
    return NotesError(
        f"a [[curve]] note matches no line: {what}",
        Location(file=notes.file, line=note.line, panel=note.panel, key="curve"),
        f"Lines that exist: {exist}. A point (at) must lie within {REACH_PX:g} px of its line.",
    )


def _set(line: Line, note: CurveNotes, notes: Notes) -> None:
    if note.quantity is not None or note.axis is not None or note.flow_axis is not None:
        _set_quantity(line, note, notes)
    for field, key, value in (
        ("diameter", "diameter", note.diameter_si),
        ("speed", "speed", note.speed_si),
        ("stages", "stages", note.stages),
        ("label", "label", note.label),
        ("pump", "pump", note.pump),
    ):
        if value is not None:
            setattr(line, field, value)
            line.given.add(key)
            line.doubts.discard(key)
    if note.diameter_si is not None:
        line.diameter_unit = note.diameter_unit
    if note.speed_si is not None:
        line.speed_unit, line.speed_ratio = note.speed_unit, None
    if note.level is not None:
        line.level_unit = _level_unit(line)
        line.level = float(to_si(note.level, line.level_unit))
        line.given.add("level")
        line.doubts.discard("level")


def _level_unit(line: Line) -> str:
    fitting = {"iso_shaft_power": ("kW", "W", "[HP]"), "iso_npsh_required": ("m", "[ft_i]")}
    units = fitting.get(line.quantity, ("%",))
    return line.level_unit if line.level_unit in units else units[0]


def _set_quantity(line: Line, note: CurveNotes, notes: Notes) -> None:
    where = Location(file=notes.file, line=note.line, panel=line.panel.name)
    quantity = note.quantity or line.quantity
    if quantity not in QUANTITIES or quantity == "flow":
        where = Location(file=notes.file, line=note.line, panel=line.panel.name, key="quantity")
        known = ", ".join(q for q in QUANTITIES if q != "flow")
        raise NotesError(f"quantity {quantity!r} is not known", where, f"Known: {known}.")
    if note.flow_axis is not None:
        line.flow_axis = _axis(line, note.flow_axis, True, where)
    if note.axis is not None:
        line.value_axis = _axis(line, note.axis, False, where)
        if note.quantity is None and line.value_axis.quantity is not None and not line.iso:
            quantity = line.value_axis.quantity
    elif note.quantity is not None:
        shown = "head" if quantity.startswith("iso_") else quantity
        fitting = [
            a for a in line.panel.axes if not a.along_flow and a.quantity == shown and a.unit
        ]
        if fitting and line.value_axis.quantity != shown:
            line.value_axis = fitting[0]
    if quantity != line.quantity:
        line.findings = [f for f in line.findings if not f.code.startswith("curve.guess")]
    line.quantity, line.iso = quantity, quantity.startswith("iso_")
    line.values = values(line.trace, line.flow_axis, line.value_axis, iso=line.iso)
    line.given |= {"quantity"} | ({"axis"} if note.axis else set())
    line.doubts -= {"quantity", "axis"}
    line.findings = [f for f in line.findings if f.code != "curve.guess"]


def _axis(line: Line, name: str, along_flow: bool, where: Location) -> Axis:
    axes = [a for a in line.panel.axes if a.along_flow == along_flow and a.unit is not None]
    for axis in axes:
        if name in (axis.name, axis.side, axis.name.partition(".")[2]):
            return axis
    exist = ", ".join(a.name for a in axes) or "none"
    raise NotesError(
        f"panel {line.panel.name} has no {'flow' if along_flow else 'value'} axis {name!r}",
        where,
        f"Axes that exist: {exist}.",
    )


def pump_notes(notes: Notes) -> tuple[PumpNotes, ...]:
    """The notes on pumps; one a name."""
    return tuple({p.name: p for p in notes.pumps}.values())
