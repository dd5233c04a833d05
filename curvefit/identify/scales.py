"""The axes of a panel as identify uses them: units made known, second units cross-checked."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from curvefit.errors import Location
from curvefit.identify.values import axis_factor
from curvefit.records import QUANTITIES, Axis, Finding, Panel
from curvefit.units import RHO_WATER, fold, from_si, unit

__all__ = ["agreements", "with_units"]

_DIMENSIONS = {q.name: q.dimension for q in QUANTITIES.values()}
_IMPERIAL = {"length": "[ft_i]", "power": "[HP]"}
_METRIC = {"length": "m", "power": "kW", "flow": "m3/h", "pressure": "bar", "ratio": "%"}


def with_units(panel: Panel, panels: Sequence[Panel]) -> tuple[Panel, tuple[Finding, ...]]:
    """The panel with a unit on every axis that needs one, and a warning for each that was guessed.

    Notes
    -----
    An axis without a readable unit takes that of an axis of the same quantity elsewhere on the
    page; an efficiency is in % where its scale goes beyond 1; a head, NPSH or power goes with
    the flow's unit (feet and horsepower with gallons).
    """
    axes, findings = [], []
    for axis in panel.axes:
        if axis.unit is not None or axis.quantity is None:
            axes.append(axis)
            continue
        code, sure = _likely_unit(axis, panel, panels)
        if code is None:
            axes.append(axis)
            continue
        axes.append(replace(axis, unit=code, guessed=True))
        findings.append(_unit_guess(axis, code, sure, panel))
    same = all(a is b for a, b in zip(axes, panel.axes, strict=True))
    return panel if same else replace(panel, axes=tuple(axes)), tuple(findings)


def _likely_unit(axis: Axis, panel: Panel, panels: Sequence[Panel]) -> tuple[str | None, bool]:
    """The unit that an axis has most likely, and whether another axis bears it out."""
    dimension = _DIMENSIONS[str(axis.quantity)]
    if dimension == "ratio":
        top = float(np.max(np.abs(axis.value(np.array([0.0, 1.0])))))
        return ("%" if top > 2.0 else "1"), True
    everywhere = [a for p in (panel, *panels) for a in p.axes if a.unit is not None]
    same = [a.unit for a in everywhere if a.quantity == axis.quantity]
    if same:
        return same[0], True
    if dimension in ("length", "power"):
        alike = [a.unit for a in everywhere if a.unit and unit(a.unit).dimension == dimension]
        if alike:
            return alike[0], True
        imperial = any(u in str(a.unit) for a in everywhere for u in ("gal_us", "ft_i", "HP"))
        borne_out = any(a.unit in ("kW", "m", "[HP]", "[ft_i]") for a in everywhere)
        return (_IMPERIAL if imperial else _METRIC)[dimension], borne_out
    if dimension == "flow":
        return None, False  # m³/h, l/s and l/min are all common: not to be guessed
    return _METRIC.get(dimension), False


def _unit_guess(axis: Axis, code: str, sure: bool, panel: Panel) -> Finding:
    return Finding(
        "info" if sure else "warning",
        "axis.unit-guessed",
        f"no unit could be read for the {str(axis.quantity).replace('_', ' ')} axis;"
        f" {unit(code).print} was taken"
        + (", as the other axes of the page have it" if sure and code != "%" else ""),
        Location(panel=panel.name, axis=axis.name),
        f'give unit = "{unit(code).print}" (or the right one) for this axis in the notes',
    )


def agreements(panel: Panel, density: float | None = None) -> tuple[Finding, ...]:
    """What axes of one quantity in two units say of each other.

    A pair that disagrees by more than its uncertainty is a warning; a bare "gpm" that a second
    axis confirms as US gallons is said so, one that nothing confirms is too.
    """
    findings = []
    confirmed: set[str] = set()
    for i, a in enumerate(panel.axes):
        for b in panel.axes[i + 1 :]:
            if not _comparable(a, b):
                continue
            gap, allowed = _gap(a, b, density)
            if gap <= allowed:
                confirmed |= {a.name, b.name}
            else:
                findings.append(_disagree(a, b, gap, allowed, panel))
    for axis in panel.axes:
        if axis.unit == "[gal_us]/min" and "us" not in fold(axis.printed_unit + axis.title):
            findings.append(_bare_gallons(axis, axis.name in confirmed, panel))
    return tuple(findings)


def _comparable(a: Axis, b: Axis) -> bool:
    if a.unit is None or b.unit is None or a.along_flow != b.along_flow:
        return False
    if a.quantity == b.quantity and a.quantity is not None:
        return unit(a.unit).dimension == unit(b.unit).dimension
    return {a.quantity, b.quantity} == {"head", "differential_pressure"}


def _gap(a: Axis, b: Axis, density: float | None) -> tuple[float, float]:
    """Largest disagreement over the box side and what is allowed, both as a share of its span."""
    t = np.linspace(0.05, 0.95, 7)
    first, second = (x.value(t) * axis_factor(x) for x in (a, b))
    if a.quantity != b.quantity:
        weight = (density or RHO_WATER) * 9.80665
        first = first / weight if a.quantity == "differential_pressure" else first
        second = second / weight if b.quantity == "differential_pressure" else second
    span = float(np.ptp(first)) or 1e-12
    u = [float(np.sqrt(np.trace(x.covariance)) / abs(x.slope)) for x in (a, b)]
    tolerance = 0.005 if a.quantity == b.quantity else 0.03
    return float(np.abs(first - second).max() / span), tolerance + 3 * float(np.hypot(u[0], u[1]))


def _disagree(a: Axis, b: Axis, gap: float, allowed: float, panel: Panel) -> Finding:
    half = np.array([0.5])
    first, second = float(a.value(half)[0]), float(b.value(half)[0])
    expected = (
        from_si(first * axis_factor(a), unit(str(b.unit))) if a.quantity == b.quantity else None
    )
    needed = f", {expected:.4g} {unit(str(b.unit)).print} needed" if expected is not None else ""
    return Finding(
        "warning",
        "axis.units-disagree",
        f"{a.name} and {b.name} show one quantity in two units but differ by"
        f" {100 * gap:.2g} % of the span ({100 * allowed:.2g} % allowed): half way {first:.4g}"
        f" {unit(str(a.unit)).print} stands against {second:.4g} {unit(str(b.unit)).print}{needed}",
        Location(panel=panel.name, axis=b.name),
        "correct the unit or the marks of the wrong axis in the notes",
    )


def _bare_gallons(axis: Axis, confirmed: bool, panel: Panel) -> Finding:
    if confirmed:
        message = "gpm was taken as US gallons per minute: a second axis confirms it"
        remedy = ""
    else:
        message = (
            "gpm was taken as US gallons per minute; imperial gallons would be 20 % more,"
            " and no second axis tells them apart"
        )
        remedy = 'if they are imperial, give unit = "Imp gpm" for this axis in the notes'
    return Finding(
        "info", "axis.gpm-us", message, Location(panel=panel.name, axis=axis.name), remedy
    )
