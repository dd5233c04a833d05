"""What the notes give of the axes: it is taken as given."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.evidence import Evidence
from curvefit.calibrate.snap import line_through
from curvefit.errors import Location, NotesError
from curvefit.notes import AxisNotes, GivenMark, PanelNotes
from curvefit.records import QUANTITIES, Axis, Finding, Mark
from curvefit.records.base import Side
from curvefit.units import parse

__all__ = ["given_axes", "with_meaning"]

Array = NDArray[np.float64]


def given_axes(
    evidence: Evidence, panel: str, notes: PanelNotes, read: Sequence[Axis]
) -> tuple[list[Axis], list[Finding]]:
    """The axes with the notes' entries in place of what was read.

    Raises
    ------
    NotesError
        If an entry cannot be used: an unknown side, one mark alone, two marks at one place, a
        value that a log scale cannot hold.
    """
    axes = {a.name.partition(".")[2]: a for a in read}
    findings: list[Finding] = []
    for entry in notes.axes:
        side = entry.name.partition(".")[0]
        if side not in ("bottom", "top", "left", "right"):
            raise _wrong(entry, panel, f'axis "{entry.name}" is no side of the box', "name")
        old = axes.get(entry.name)
        if entry.marks:
            axes[entry.name], said = _from_marks(evidence, panel, side, entry, old)  # type: ignore[arg-type]
            findings += said
        elif old is None:
            if entry.quantity or entry.unit or entry.scale:
                message = "the notes name this axis, but no numbers were read there."
                remedy = f'Give axis "{entry.name}" of panel "{panel}" two marks in the notes.'
                where = Location(panel=panel, axis=f"{panel}.{entry.name}", line=entry.line)
                findings.append(Finding("warning", "axis.unread", message, where, remedy))
        elif entry.scale is not None and entry.scale != old.scale:
            axes[entry.name] = _rescaled(evidence, panel, side, entry, old)  # type: ignore[arg-type]
        if entry.name in axes:
            axes[entry.name] = _meaning(axes[entry.name], entry)
    return list(axes.values()), findings


def _wrong(entry: AxisNotes, panel: str, what: str, key: str) -> NotesError:
    where = Location(panel=panel, axis=f"{panel}.{entry.name}", line=entry.line, key=key)
    return NotesError(
        what, where, "Sides are bottom, top, left, right; marks need pixel and value."
    )


def with_meaning(axis: Axis, notes: PanelNotes) -> Axis:
    """The axis with the quantity and unit that the notes give, if they give any."""
    for entry in notes.axes:
        if entry.name == axis.name.partition(".")[2]:
            axis = _meaning(axis, entry)
    return axis


def _meaning(axis: Axis, entry: AxisNotes) -> Axis:
    """The axis with the quantity and unit of the notes."""
    if entry.unit is not None:
        u = parse(entry.unit)
        factor = u.factor / parse(u.code).factor if not u.coded else 1.0
        if axis.unit == u.code and axis.printed_unit:
            factor = axis.factor
        axis = replace(axis, unit=u.code, printed_unit=u.print, factor=factor, guessed=False)
        if (
            entry.quantity is None and axis.quantity and _dimension(axis.quantity) != u.dimension
        ) or (entry.quantity is None and axis.quantity is None):
            axis = replace(axis, quantity=_of_dimension(u.dimension))
    if entry.quantity is not None:
        axis = replace(axis, quantity=entry.quantity, guessed=False)
        if axis.unit is not None and parse(axis.unit).dimension != _dimension(entry.quantity):
            axis = replace(axis, unit=None, printed_unit="", factor=1.0)
    return axis


def _dimension(quantity: str) -> str:
    return QUANTITIES[quantity].dimension if quantity in QUANTITIES else ""


def _of_dimension(dimension: str) -> str | None:
    return next((q.name for q in QUANTITIES.values() if q.dimension == dimension), None)


def _from_marks(
    evidence: Evidence, panel: str, side: Side, entry: AxisNotes, old: Axis | None
) -> tuple[Axis, list[Finding]]:
    if len(entry.marks) < 2:
        raise _wrong(entry, panel, "one mark is given, two are needed", "marks")
    log = entry.scale == "log"
    values = np.array([m.value for m in entry.marks], float)
    if log and (values <= 0).any():
        raise _wrong(entry, panel, f"a log scale cannot hold {values.min():g}", "marks")
    size = evidence.warp.size
    length = size[0] if side in ("bottom", "top") else size[1]
    at = np.array([_along(evidence, side, m) for m in entry.marks])
    u = np.array([max(m.u, 0.02) for m in entry.marks]) / length
    at, u = _refined(evidence, side, at, u)
    f = np.log10(values) if log else values
    if np.ptp(at) < 1e-6 or np.ptp(f) == 0:
        raise _wrong(entry, panel, "the marks stand at one place or carry one value", "marks")
    offset, slope, cov = line_through(f, at, u)
    off = np.abs((f - offset) / slope - at)
    findings = []
    if len(at) > 2 and (off > 4 * u + 2.0 / length).any():
        worst = float(off.max() * length)
        message = f"the given marks do not lie on one scale: {worst:.1f} px off, 2 px allowed."
        where = Location(panel=panel, axis=f"{panel}.{entry.name}", line=entry.line, key="marks")
        remedy = 'Correct the marks, or give scale = "log".'
        findings.append(Finding("warning", "axis.given-marks", message, where, remedy))
        cov = cov * float((off / u).max()) ** 2
    marks = tuple(
        Mark(_place(evidence, side, float(t)), float(s) * length, f"{v:g}", float(v), True, "given")
        for t, s, v in zip(at, u, values, strict=True)
    )
    blank = Axis(f"{panel}.{entry.name}", side, None, None, "", "linear", 0.0, 1.0, np.eye(2))
    base = old or blank
    made = replace(
        base, scale="log" if log else "linear", offset=float(offset), slope=float(slope),
        covariance=cov, marks=marks, by="given",
    )  # fmt: skip
    return made, findings


def _along(evidence: Evidence, side: Side, mark: GivenMark) -> float:
    (x, y), (w, h) = evidence.warp.to_panel([mark.xy])[0], evidence.warp.size
    return float(x / w if side in ("bottom", "top") else 1 - y / h)


def _place(evidence: Evidence, side: Side, t: float) -> Array:
    w, h = evidence.warp.size
    if side in ("bottom", "top"):
        flat = [[t * w, h if side == "bottom" else 0.0]]
    else:
        flat = [[0.0 if side == "left" else w, (1 - t) * h]]
    return np.asarray(evidence.warp.to_page(np.array(flat))[0])


def _refined(evidence: Evidence, side: Side, at: Array, u: Array) -> tuple[Array, Array]:
    """Marks weighed together with a drawn tick that lies within twice their uncertainty."""
    at, u = at.copy(), u.copy()
    rows = [r for r in evidence.ticks if r.side == side and not r.offset and len(r.at)]
    for k in range(len(at)):
        near = [
            (abs(r.at[i] - at[k]), float(r.at[i]), float(r.u[i]))
            for r in rows
            for i in [int(np.argmin(np.abs(r.at - at[k])))]
        ]
        if near and min(near)[0] <= 2 * u[k]:
            _, tick, spread = min(near)
            spread = max(spread, 1e-9)
            weight = spread**-2 / (spread**-2 + u[k] ** -2)
            at[k] += weight * (tick - at[k])
            u[k] = (spread**-2 + u[k] ** -2) ** -0.5
    return at, u


def _rescaled(evidence: Evidence, panel: str, side: Side, entry: AxisNotes, old: Axis) -> Axis:
    """The axis read again as the scale that the notes name, on the marks that were read."""
    marks = [GivenMark((float(m.xy[0]), float(m.xy[1])), m.value, m.u)
             for m in old.marks if m.value is not None and m.text]  # fmt: skip
    if len(marks) < 2:
        raise _wrong(entry, panel, "too few numbers were read for the scale given", "scale")
    axis, _ = _from_marks(evidence, panel, side, replace(entry, marks=tuple(marks)), old)
    return axis
