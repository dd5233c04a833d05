"""STEM.curves.json (format "pump-curve-set", version 1); its schema is curves.schema.json."""

from __future__ import annotations

import json
import math
from collections.abc import Iterable
from pathlib import PurePath
from typing import Any

import numpy as np

from curvefit import __version__
from curvefit.records import QUANTITIES, Axis, Finding, Panel, Pump, Reading
from curvefit.units import from_si
from curvefit.write.outgoing import CurveOut, FitOut, Outgoing

__all__ = ["curves_document", "equation", "json_text"]

DIGITS = 8  #: significant digits of flows and values: far below any uncertainty of a chart
_U_DIGITS = 5
_POWERS = str.maketrans("0123456789", "⁰¹²³⁴⁵⁶⁷⁸⁹")


def curves_document(out: Outgoing) -> dict[str, Any]:
    """The document of STEM.curves.json, ready for JSON: unknown numbers are None."""
    page = out.reading.page
    return {
        "format": "pump-curve-set",
        "version": 1,
        "generator": f"curvefit {__version__}",
        "source": {
            "file": PurePath(page.file).name,
            "sha256": page.sha256,
            "page": page.number,
            "width_px": int(page.stored_size[0]),
            "height_px": int(page.stored_size[1]),
            "dpi": _number(page.dpi, 6),
        },
        "pumps": [_pump(p) for p in out.reading.pumps],
        "panels": [_panel(out.reading, p) for p in out.reading.panels],
        "curves": [_curve(c) for c in out.curves],
        "derived_curves": [_curve(c) for c in out.derived],
        "fits": [_fit(f) for f in out.fits],
        "findings": [_finding(out.reading, f) for f in out.findings],
    }


def equation(fit: FitOut) -> str:
    """The fitted equation in symbols, or "" where the fit has none."""
    symbol = QUANTITIES[fit.units.quantity].symbol
    if fit.coefficients is not None:
        terms = ["c0", "c1 Q"]
        terms += [f"c{k} Q{str(k).translate(_POWERS)}" for k in range(2, len(fit.coefficients))]
        return f"{symbol} = " + " + ".join(terms[: len(fit.coefficients)])
    if "H0" in fit.parameters:
        return f"{symbol} = H0 − a Qⁿ"
    if "n" in fit.parameters:
        return f"{symbol} = c0 + c1 Qⁿ"
    if fit.knots is not None:
        return f"{symbol} = monotone cubic through the knots (Q, {symbol})"
    return ""


def json_text(value: Any) -> str:
    """JSON with a key a line and lists of numbers in one line; never NaN or infinity."""
    return _dump(value, "") + "\n"


def _dump(value: Any, indent: str) -> str:
    if not isinstance(value, (dict, list)) or not value or _flat(value):
        return json.dumps(value, ensure_ascii=False, allow_nan=False)
    inner = indent + " "
    if isinstance(value, dict):
        rows = (f"{json.dumps(k, ensure_ascii=False)}: {_dump(v, inner)}" for k, v in value.items())
        return "{\n" + ",\n".join(inner + r for r in rows) + f"\n{indent}}}"
    return "[\n" + ",\n".join(inner + _dump(v, inner) for v in value) + f"\n{indent}]"


def _flat(value: Any) -> bool:
    """Whether a list or table goes in one line."""
    plain = (str, int, float, bool, type(None))
    if isinstance(value, dict):
        return len(value) <= 6 and all(
            isinstance(v, plain)
            or (isinstance(v, list) and len(v) <= 4 and all(isinstance(w, plain) for w in v))
            for v in value.values()
        )
    return all(
        isinstance(v, plain) or (isinstance(v, list) and all(isinstance(w, plain) for w in v))
        for v in value
    )


def _number(value: float | None, digits: int = DIGITS) -> float | None:
    if value is None or not math.isfinite(value):
        return None
    return float(f"{value:.{digits}g}")


def _numbers(values: Iterable[float], digits: int = DIGITS) -> list[float | None]:
    return [_number(float(v), digits) for v in values]


def _rising(flow: Any) -> list[float | None]:
    """Flows that rise still do so when rounded."""
    short = _numbers(flow)
    rises = bool(np.all(np.diff(flow) > 0)) and not np.all(np.diff(np.array(short, float)) > 0)
    return _numbers(flow, 17) if rises else short


def _pixels(xy: Any) -> list[list[float]]:
    return [[round(float(x), 3) + 0.0, round(float(y), 3) + 0.0] for x, y in np.asarray(xy)]


def _quantity(si: float | None, code: str) -> dict[str, Any] | None:
    if si is None:
        return None
    return {"value": _number(float(from_si(si, code)), 9), "unit": code}


def _pump(pump: Pump) -> dict[str, Any]:
    speed = _quantity(pump.speed_si, "/min")
    if speed is not None:
        speed["basis"] = pump.speed_basis or "printed"
    liquid = None
    if pump.liquid is not None or pump.density_si is not None:
        liquid = {"name": pump.liquid, "density": _quantity(pump.density_si, "kg/m3")}
    return {
        "name": pump.name,
        "speed": speed,
        "stages": pump.stages,
        "suction_sides": pump.suction_sides,
        "liquid": liquid,
        "by": pump.by,
    }


def _panel(reading: Reading, panel: Panel) -> dict[str, Any]:
    return {
        "name": panel.name,
        "corners_px": _pixels(reading.page.to_stored(panel.corners)),
        "turn": panel.turn,
        "by": panel.by,
        "axes": [_axis(reading, a) for a in panel.axes],
    }


def _axis(reading: Reading, axis: Axis) -> dict[str, Any]:
    places = _pixels(reading.page.to_stored(np.array([m.xy for m in axis.marks]).reshape(-1, 2)))
    return {
        "name": axis.name,
        "side": axis.side,
        "quantity": axis.quantity,
        "unit": axis.unit,
        "printed_unit": axis.printed_unit,
        "scale": axis.scale,
        "title": axis.title,
        "guessed": axis.guessed,
        "by": axis.by,
        "offset": _number(axis.offset, 12),
        "slope": _number(axis.slope, 12),
        "factor": _number(axis.factor, 12),
        "covariance": [_numbers(row, 12) for row in axis.covariance],
        "marks": [
            {
                "xy_px": xy,
                "u_px": _number(m.u, _U_DIGITS),
                "text": m.text,
                "value": _number(m.value, 12),
                "used": m.used,
                "by": m.by,
            }
            for m, xy in zip(axis.marks, places, strict=True)
        ],
    }


def _curve(out: CurveOut) -> dict[str, Any]:
    c = out.curve
    speed = _quantity(c.speed_si, "Hz" if c.speed_unit == "Hz" else "/min")
    if c.speed_ratio is not None and (c.speed_unit == "%" or speed is None):
        speed = {"value": _number(100 * c.speed_ratio, 9), "unit": "%"}
    row: dict[str, Any] = {
        "name": c.name,
        "pump": c.pump,
        "panel": c.panel.name if c.panel is not None else None,
        "axes": {"flow": c.flow_axis, "value": c.value_axis},
        "quantity": out.units.quantity,
        "flow_unit": out.units.flow,
        "unit": out.units.value,
        "flow": _rising(out.flow),
        "value": _numbers(out.value),
        "standard_uncertainty": _numbers(out.u, _U_DIGITS),
        "trace_uncertainty": _numbers(out.trace_u, _U_DIGITS),
        "correlation_length": _number(out.correlation, _U_DIGITS),
        "flags": list(out.flags),
        "impeller_diameter": _quantity(c.diameter_si, c.diameter_unit),
        "speed": speed,
        "stages": c.stages,
    }
    if c.iso:
        row["level"] = _quantity(c.level_si, c.level_unit)
        percent = c.quantity == "iso_efficiency" and c.level_si is not None
        row["efficiency"] = _number(100 * (c.level_si or 0.0), 9) if percent else None
    if c.quantity == "npsh_required":
        row["npsh_basis"] = c.npsh_basis
    row |= {
        "label": c.label,
        "guessed": list(c.guessed),
        "by": c.by,
        "trace_px": None if out.xy is None else _pixels(out.xy),
        "calibration": None
        if out.calibration is None
        else [_numbers(r, _U_DIGITS) for r in out.calibration],
    }
    return row


def _fit(out: FitOut) -> dict[str, Any]:
    fit, units = out.fit, out.units
    return {
        "name": fit.name,
        "curves": [c.name for c in fit.curves],
        "family": fit.family,
        "degree": fit.degree,
        "coefficients": None if out.coefficients is None else [float(v) for v in out.coefficients],
        "parameters": {k: _number(v, 13) for k, v in out.parameters.items()},
        "flow_unit": units.flow,
        "unit": units.value,
        "equation": equation(out),
        "flow_range": _numbers(out.flow_range),
        "covariance": None
        if out.covariance is None
        else [[float(v) for v in row] for row in out.covariance],
        "knots": None if out.knots is None else [_numbers(r, 12) for r in out.knots],
        "confidence": _number(fit.band.confidence),
        "residual_rms": _number(out.residual_rms, _U_DIGITS),
        "effective_points": _number(fit.effective_points, _U_DIGITS),
        "reason": fit.reason,
        "candidates": [
            {"model": name, "criterion": _number(value, 6), "note": note}
            for name, value, note in fit.candidates
        ],
        "band": {
            "flow": _numbers(out.flow),
            "value": _numbers(out.value),
            "low": _numbers(out.low),
            "high": _numbers(out.high),
            "kind": fit.band.kind,
            "factors": _rows(fit.factors, units.value_si),
            "calibration": _rows(fit.calibration, units.value_si),
        },
        "derived": {k: _derived(v) for k, v in out.derived.items()},
    }


def _rows(matrix: Any, unit_si: float) -> list[list[float | None]] | None:
    return None if matrix is None else [_numbers(row / unit_si, 7) for row in matrix]


def _derived(numbers: dict[str, dict[str, Any]]) -> dict[str, Any]:
    return {
        name: {
            "value": _number(m["value"]),
            "unit": m["unit"],
            "standard_uncertainty": _number(m["standard_uncertainty"], _U_DIGITS),
        }
        for name, m in numbers.items()
    }


def _finding(reading: Reading, finding: Finding) -> dict[str, Any]:
    where = finding.where
    box = None
    if where.box_px is not None:
        left, top, right, bottom = where.box_px
        ends = reading.page.to_stored(
            np.array([[left, top], [right, top], [right, bottom], [left, bottom]], float)
        )
        box = [round(float(v), 1) for v in (*ends.min(0), *ends.max(0))]
    return {
        "severity": finding.severity,
        "code": finding.code,
        "where": {
            "page": where.page if where.page is not None else reading.page.number,
            "panel": where.panel,
            "axis": where.axis,
            "curve": where.curve,
            "box_px": box,
        },
        "message": finding.message,
        "remedy": finding.remedy,
    }
