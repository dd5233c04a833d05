"""What axes say of each other: a second flow scale on top, the panels of a stack."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.titles import read_title
from curvefit.errors import Location
from curvefit.records import Axis, Finding, Panel
from curvefit.units import to_si

__all__ = ["checked_together"]

Array = NDArray[np.float64]
_FLOWS = ("m3/h", "L/s", "L/min", "[gal_us]/min", "[gal_br]/min", "m3/s")
_LENGTHS = {"m": "m", "[ft_i]": "ft"}
_POWERS_OF_TEN = (0.001, 0.01, 0.1, 10.0, 100.0, 1000.0)


def checked_together(panels: Sequence[Panel]) -> tuple[Panel, ...]:
    """The panels with units filled in from, and doubts raised by, the axes beside them."""
    out = [_same_dimension(_two_heads(_lone_length(p))) for p in panels]
    out = _stacked([_hundred(p) for p in out])
    return tuple(_per_cent(p) for p in out)


def _per_cent(panel: Panel) -> Panel:
    """An efficiency scale that ends below 15 % or runs past 150 % has lost or won a figure."""
    said = []
    for a in panel.axes:
        top = float(a.value(np.array([0.0, 1.0])).max())
        if a.unit == "%" and a.by == "read" and a.scale == "linear" and not 15 <= top <= 150:
            message = f"an efficiency scale that ends at {top:.3g} % is unlikely."
            axis = a.name.partition(".")[2]
            remedy = f'Give two marks of axis "{axis}" of panel "{panel.name}" in the notes.'
            where = Location(panel=panel.name, axis=a.name)
            said.append(Finding("warning", "axis.factor", message, where, remedy))
    return replace(panel, findings=panel.findings + tuple(said))


def _lone_length(panel: Panel) -> Panel:
    """A scale of metres or feet without a word is the head, if none other is."""
    lengths = [a for a in panel.axes if a.unit in ("m", "[ft_i]") and not a.along_flow]
    if any(a.quantity == "head" for a in lengths):
        return panel
    unnamed = [a for a in lengths if a.quantity is None]
    if len(unnamed) != 1:
        return panel
    axes = tuple(
        replace(a, quantity="head", guessed=True) if a is unnamed[0] else a for a in panel.axes
    )
    return replace(panel, axes=axes)


def _two_heads(panel: Panel) -> Panel:
    """A scale without a unit that runs 3.2808 times as fast as the head's in metres is in feet."""
    axes = list(panel.axes)
    heads = [a for a in axes if a.quantity == "head" and a.unit in _LENGTHS and not a.along_flow]
    for k, axis in enumerate(axes):
        if axis.along_flow or axis.unit is not None or axis.quantity not in (None, "head"):
            continue
        for head in heads:
            for unit in _LENGTHS:
                ratio = _ratio(axis, head, unit)
                if unit != head.unit and ratio is not None and abs(ratio - 1) < 0.005:
                    axes[k] = replace(
                        axis, quantity="head", unit=unit, printed_unit=_LENGTHS[unit], guessed=False
                    )
    borne = {
        a.name for a in heads for b in heads
        if a.unit != b.unit and abs((_ratio(a, b) or 0.0) - 1) < 0.005
    }  # fmt: skip
    axes = [replace(a, guessed=a.guessed and a.name not in borne) for a in axes]
    return replace(panel, axes=tuple(axes))


def _hundred(panel: Panel) -> Panel:
    """A nameless scale from 0 to 100 beside a head is taken as an efficiency, and said so."""
    values = [a for a in panel.axes if not a.along_flow]
    nameless = [
        a for a in values
        if a.quantity is None and a.unit is None and a.by == "read" and a.scale == "linear"
        and np.abs(a.value(np.array([0.0, 1.0])) - [0.0, 100.0]).max() < 1.0
    ]  # fmt: skip
    named = {a.quantity for a in values}
    if len(nameless) != 1 or "head" not in named or named & {"efficiency", "overall_efficiency"}:
        return panel
    axis = nameless[0]
    told = [w.text for w in panel.words if read_title(w.text).dimension in ("power", "pressure")]
    if told:  # its own title may be one of these
        return panel
    side = axis.name.partition(".")[2]
    finding = Finding(
        "warning",
        "axis.unit-guessed",
        "no title could be read; a scale from 0 to 100 beside a head was taken as efficiency in %.",
        Location(panel=panel.name, axis=axis.name),
        f'Give quantity and unit of axis "{side}" of panel "{panel.name}" in the notes.',
    )
    taken = replace(axis, quantity="efficiency", unit="%", printed_unit="%", guessed=True)
    axes = tuple(taken if a is axis else a for a in panel.axes)
    return replace(panel, axes=axes, findings=(*panel.findings, finding))


def _ends_si(axis: Axis, unit: str | None = None) -> Array:
    return np.asarray(to_si(axis.value(np.array([0.0, 1.0])), unit or axis.unit or "1"))


def _ratio(a: Axis, b: Axis, unit_a: str | None = None, unit_b: str | None = None) -> float | None:
    """Scale a over scale b in SI where both run alike; None where they do not."""
    x, y = _ends_si(a, unit_a), _ends_si(b, unit_b)
    if a.scale != b.scale or abs(y[1] - y[0]) == 0:
        return None
    ratio = float((x[1] - x[0]) / (y[1] - y[0]))
    return ratio if abs(x[0] - ratio * y[0]) < 0.01 * abs(x[1] - x[0]) else None


def _same_dimension(panel: Panel) -> Panel:
    """Two flow axes, or head in metres and feet, must show the same quantity."""
    axes = list(panel.axes)
    said: list[Finding] = []
    bottom = next((a for a in axes if a.name.endswith(".bottom")), None)
    for k, top in enumerate(axes):
        if bottom is None or not top.along_flow or top is bottom:
            continue
        axes[k], finding = _second_flow(bottom, top)
        said += finding
    return replace(panel, axes=tuple(axes), findings=panel.findings + tuple(said))


def _second_flow(bottom: Axis, top: Axis) -> tuple[Axis, list[Finding]]:
    if bottom.unit is None:
        return top, []
    if top.unit is None:
        for unit in _FLOWS:
            ratio = _ratio(top, bottom, unit)
            if ratio is not None and abs(ratio - 1) < 0.005:
                named = replace(top, quantity="flow", unit=unit, printed_unit="", guessed=True)
                return named, []
        return top, []
    ratio = _ratio(top, bottom)
    if ratio is not None and abs(ratio - 1) < 0.02:
        return top, []
    message = (
        f"its scale is {ratio:.3g} times that of {bottom.name}, 1 was expected."
        if ratio is not None
        else f"it does not show the same flow as {bottom.name}."
    )
    remedy = f'Give unit or marks of axis "{top.name.partition(".")[2]}" in the notes.'
    where = Location(panel=top.name.partition(".")[0], axis=top.name)
    return top, [Finding("warning", "axis.two-flows", message, where, remedy)]


def _stacked(panels: list[Panel]) -> list[Panel]:
    """Panels in line: one flow title serves all; scales a power of ten apart are in doubt."""
    out = list(panels)
    for i, panel in enumerate(out):
        for k, axis in enumerate(panel.axes):
            if axis.side != "bottom" or axis.name.count(".") > 1:
                continue
            others = [
                a for q in out if q is not panel and _in_line(panel, q)
                for a in q.axes if a.side == "bottom" and a.unit is not None
            ]  # fmt: skip
            if axis.unit is None and others:
                donor = others[-1]
                if _alike(axis, donor):
                    axes = list(out[i].axes)
                    axes[k] = replace(
                        axis, quantity=donor.quantity, unit=donor.unit, factor=donor.factor,
                        printed_unit=donor.printed_unit, title=donor.title, guessed=donor.guessed,
                    )  # fmt: skip
                    out[i] = replace(out[i], axes=tuple(axes))
            for other in others:
                ratio = _ratio(axis, other, other.unit)
                if ratio is not None and any(abs(ratio / t - 1) < 0.01 for t in _POWERS_OF_TEN):
                    out[i] = _doubted(out[i], axis, other, ratio)
                    break
    return out


def _in_line(a: Panel, b: Panel) -> bool:
    flat = a.warp.to_panel(b.corners)[:, 0] / a.warp.size[0]
    return bool(np.abs(flat - [0, 1, 1, 0]).max() < 0.006)


def _alike(a: Axis, b: Axis) -> bool:
    x, y = (s.offset + s.slope * np.array([0.0, 1.0]) for s in (a, b))
    return a.scale == b.scale and bool(np.abs(x - y).max() < 0.01 * abs(y[1] - y[0]))


def _doubted(panel: Panel, axis: Axis, other: Axis, ratio: float) -> Panel:
    message = f"its scale is {ratio:g} times that of {other.name}, which stands in line with it."
    remedy = f'Give two marks of axis "bottom" of panel "{panel.name}" in the notes.'
    where = Location(panel=panel.name, axis=axis.name)
    finding = Finding("warning", "axis.factor", message, where, remedy)
    return replace(panel, findings=(*panel.findings, finding))
