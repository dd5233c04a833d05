"""Clean curves for solvers: resampled from the equations, in tables of several shapes."""

from __future__ import annotations

import csv
import io
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from curvefit.errors import InputError, Location
from curvefit.records import QUANTITIES, Finding, Page, Reading
from curvefit.units import unit
from curvefit.write.curves_csv import COLUMNS, neutral
from curvefit.write.curves_json import curves_document
from curvefit.write.outgoing import CurveOut, FitOut, Outgoing, outgoing
from curvefit.write.reopen import CurveSet
from curvefit.write.resample import (
    best_points,
    common_points,
    falling,
    fewest_points,
    largest_gap,
)

__all__ = ["CleanCurve", "Sampling", "clean_curves", "document", "table_text", "tidy", "wide"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Sampling:
    """How curves are turned into points.

    points : so many a curve, placed where straight lines between them fit best; or
    tolerance : the fewest points with which straight lines keep within this share of the curve's
        range of values. strict : make heads strictly falling. common : one flow grid for all
        curves of a pump. digits : significant digits written.
    """

    points: int | None = None
    tolerance: float = 1e-3
    strict: bool = False
    common: bool = False
    digits: int = 7


@dataclass(frozen=True, slots=True, eq=False)
class CleanCurve:
    """One curve as points on flows; u NaN where unknown. gap: see `largest_gap`; fit may be None.

    An iso line keeps its traced points.
    """

    out: CurveOut
    fit: FitOut | None
    flow: Array
    value: Array
    low: Array
    high: Array
    gap: float

    @property
    def name(self) -> str:
        """The curve's name."""
        return self.out.curve.name


def clean_curves(
    opened: CurveSet, units: Mapping[str, str | None] | None = None, how: Sampling | None = None
) -> tuple[tuple[CleanCurve, ...], tuple[Finding, ...]]:
    """The curves of a file as clean points, and what had to be said about them.

    Raises
    ------
    InputError
        If a unit or a number is unusable.
    """
    how = how or Sampling()
    if how.points is not None and how.points < 2:
        raise InputError(f"{how.points} points make no curve", remedy="Give --points 2 or more.")
    if not 1e-6 <= how.tolerance <= 0.5 or not 2 <= how.digits <= 15:
        raise InputError(
            f"tolerance {how.tolerance:g} or digits {how.digits} is out of range",
            remedy="Tolerance: 1e-6 to 0.5 of the range of values; digits: 2 to 15.",
        )
    out = outgoing(_as_reading(opened), units)
    grids = _grids(out, how)
    made, said = [], list(out.findings[len(opened.findings) :])
    for curve in (*out.curves, *out.derived):
        clean = _clean(out, curve, grids.get(curve.curve.name), how)
        if how.strict and curve.units.quantity in ("head", "differential_pressure"):
            clean, finding = _made_falling(clean, how.digits)
            said += [finding] if finding is not None else []
        made.append(_rounded(clean, how.digits))
    return tuple(made), tuple(said)


def _as_reading(opened: CurveSet) -> Reading:
    """A reading without a picture, which is all that units and tables need."""
    source = opened.source
    page = Page(
        str(source.get("file", "")),
        str(source.get("sha256", "")),
        int(source.get("page") or 1),
        np.zeros((1, 1, 3), np.uint8),
        (int(source.get("width_px") or 1), int(source.get("height_px") or 1)),
        dpi=source.get("dpi"),
    )
    return Reading(
        page,
        curves=opened.curves,
        pumps=opened.pumps,
        fits=opened.fits,
        findings=opened.findings,
    )


def _function(curve: CurveOut, fit: FitOut | None) -> Any:
    if fit is not None:
        return fit.at
    return lambda flow: np.interp(flow, curve.flow, curve.value)


def _span(curve: CurveOut, fit: FitOut | None) -> tuple[float, float]:
    if fit is not None:
        return float(fit.flow_range[0]), float(fit.flow_range[1])
    return float(curve.flow[0]), float(curve.flow[-1])


def _fit(out: Outgoing, curve: CurveOut) -> FitOut | None:
    return next(iter(out.fits_of(curve.curve)), None)


def _grids(out: Outgoing, how: Sampling) -> dict[str, Array]:
    """The flows of every curve by name; iso lines are left out."""
    grids: dict[str, Array] = {}
    for curve in (*out.curves, *out.derived):
        if curve.curve.iso:
            continue
        fit = _fit(out, curve)
        function, (low, high) = _function(curve, fit), _span(curve, fit)
        if how.points is not None:
            grids[curve.curve.name] = best_points([function], low, high, how.points)
        else:
            allowed = how.tolerance * max(float(np.ptp(curve.value)), 1e-300)
            grids[curve.curve.name] = fewest_points([function], low, high, [allowed])
    if how.common:
        every = (*out.curves, *out.derived)
        for pump in {c.curve.pump for c in every}:
            names = [c.curve.name for c in every if c.curve.pump == pump]
            grids |= _shared(out, [n for n in names if n in grids], grids, how)
    return grids


def _shared(
    out: Outgoing, names: Sequence[str], grids: Mapping[str, Array], how: Sampling
) -> dict[str, Array]:
    """One grid over the flows that all curves cover; each curve keeps it as it is."""
    if not names:
        return {}
    by_name = {c.curve.name: c for c in (*out.curves, *out.derived)}
    curves = [(by_name[n], _fit(out, by_name[n])) for n in names]
    low = max(_span(c, f)[0] for c, f in curves)
    high = min(_span(c, f)[1] for c, f in curves)
    if not high > low:
        raise InputError(
            "the curves have no flow in common, so they share no grid",
            remedy="Choose curves with --curve, or leave out --common-grid.",
        )
    if how.points is not None:
        grid = best_points([_function(c, f) for c, f in curves], low, high, how.points)
    else:
        inside = [g[(g > low) & (g < high)] for g in (grids[n] for n in names)]
        grid = common_points([np.array([low, high]), *inside])
    return dict.fromkeys(names, grid)


def _clean(out: Outgoing, curve: CurveOut, grid: Array | None, how: Sampling) -> CleanCurve:
    nothing = np.full(len(curve.flow), np.nan)
    if grid is None:
        return CleanCurve(curve, None, curve.flow, curve.value, nothing, nothing, 0.0)
    fit = _fit(out, curve)
    function = _function(curve, fit)
    value = np.asarray(function(grid))
    low = high = np.full(len(grid), np.nan)
    if fit is not None:
        low = value + np.interp(grid, fit.flow, fit.low - fit.value)
        high = value + np.interp(grid, fit.flow, fit.high - fit.value)
    return CleanCurve(curve, fit, grid, value, low, high, largest_gap(function, grid))


def _made_falling(clean: CleanCurve, digits: int) -> tuple[CleanCurve, Finding | None]:
    """The curve falling by at least two units of the last digit written, and a word on that."""
    largest = float(np.abs(clean.value).max()) or 1.0
    step = 2 * 10.0 ** (np.ceil(np.log10(largest)) - digits)
    if np.all(np.diff(clean.value) <= -step):
        return clean, None
    value = falling(clean.value, step)
    change = float(np.abs(value - clean.value).max())
    print_unit = unit(clean.out.units.value).print
    return replace(clean, value=value), Finding(
        "warning",
        "write.made-falling",
        f"The head does not fall everywhere; it was made to, which moved points by up to "
        f"{change:.3g} {print_unit}.",
        Location(curve=clean.name),
        "Leave out --strictly-falling where the solver can do with the curve as it is.",
    )


def _rounded(clean: CleanCurve, digits: int) -> CleanCurve:
    def short(values: Array) -> Array:
        return np.array([float(f"{v:.{digits}g}") for v in values])

    flow, value = short(clean.flow), short(clean.value)
    if not clean.out.curve.iso and np.any(np.diff(flow) <= 0):
        raise InputError(
            f"{digits} digits do not tell the flows of {clean.name!r} apart",
            Location(curve=clean.name),
            "Give more --digits or fewer --points.",
        )
    return replace(clean, flow=flow, value=value)


def tidy(curves: Sequence[CleanCurve], page: int, digits: int = 7) -> str:
    """The tidy table, one row a point, in the columns of STEM.curves.csv."""
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\r\n")
    writer.writerow([name for name, _, _ in COLUMNS])
    for clean in curves:
        c, units = clean.out.curve, clean.out.units
        known = clean.fit.fit.band.confidence if clean.fit is not None else None
        source = "fitted" if clean.fit is not None else "traced"
        for row in zip(clean.flow, clean.value, clean.low, clean.high, strict=True):
            flow, value, low, high = (_cell(v, digits) for v in row)
            writer.writerow(
                [
                    *(neutral(c.pump), page, neutral((c.flow_axis or "").partition(".")[0])),
                    *(neutral(c.name), units.quantity),
                    _cell(None if c.diameter_si is None else c.diameter_si * 1e3, 9),
                    _cell(None if clean.out.speed_si is None else clean.out.speed_si * 60, 9),
                    *(flow, units.flow, value, units.value, "", low, high),
                    *("" if known is None or not low else f"{known:g}", source, "", ""),
                ]
            )
    return text.getvalue()


def wide(curves: Sequence[CleanCurve], digits: int = 7) -> str:
    """A table with two columns a curve, flow and value; shorter curves end in empty cells."""
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\r\n")
    heads, columns = [], []
    for clean in curves:
        units = clean.out.units
        heads += [f"{clean.name}: flow [{units.flow}]", f"{clean.name}: value [{units.value}]"]
        columns += [[_cell(v, digits) for v in a] for a in (clean.flow, clean.value)]
    writer.writerow([neutral(h) for h in heads])
    longest = max((len(c) for c in columns), default=0)
    for i in range(longest):
        writer.writerow([c[i] if i < len(c) else "" for c in columns])
    return text.getvalue()


def table_text(curves: Sequence[CleanCurve], digits: int = 7) -> str:
    """A plain fixed-width table a curve, under a line that names it; lines start with "#"."""
    parts = []
    for clean in curves:
        c, units = clean.out.curve, clean.out.units
        head = [c.name, f"pump {c.pump}", QUANTITIES[units.quantity].title]
        if c.diameter_si is not None:
            head.append(f"impeller {c.diameter_si * 1e3:g} mm")
        if clean.out.speed_si is not None:
            head.append(f"speed {clean.out.speed_si * 60:g} 1/min")
        lines = [f"# {_one_line('; '.join(head))}", f"# flow [{units.flow}]  value [{units.value}]"]
        rows = [
            (_cell(q, digits), _cell(v, digits))
            for q, v in zip(clean.flow, clean.value, strict=True)
        ]
        widths = [max(len(r[k]) for r in rows) for k in (0, 1)]
        lines += [f"{a:>{widths[0]}}  {b:>{widths[1]}}" for a, b in rows]
        parts.append("\n".join(lines) + "\n")
    return "\n".join(parts)


def document(
    opened: CurveSet, curves: Sequence[CleanCurve], units: Mapping[str, str | None] | None
) -> dict[str, Any]:
    """A pump-curve-set of the clean points: read back by curvefit like any other."""
    full = outgoing(_as_reading(opened), units)
    names = {c.name for c in curves}
    kept = [f for f in full.fits if {c.name for c in f.fit.curves} <= names]
    shown = replace(full, curves=tuple(_resampled(c) for c in curves), fits=tuple(kept))
    made = curves_document(shown)
    return made | {"source": dict(opened.source), "panels": list(opened.panels)}


def _resampled(clean: CleanCurve) -> CurveOut:
    out, n = clean.out, len(clean.flow)
    if out.curve.iso:
        return out

    def moved(values: Array) -> Array:
        return np.interp(clean.flow, out.flow, values)

    calibration = out.calibration
    if calibration is not None:
        calibration = np.column_stack([moved(column) for column in calibration.T])
    return replace(
        out,
        flow=clean.flow,
        value=clean.value,
        u=moved(out.u),
        trace_u=moved(out.trace_u),
        calibration=calibration,
        flags=("",) * n,
        xy=None,
    )


def _cell(value: float | None, digits: int) -> str:
    return "" if value is None or not np.isfinite(value) else f"{value:.{digits}g}"


def _one_line(text: str) -> str:
    return " ".join(text.split())
