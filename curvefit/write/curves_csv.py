"""STEM.curves.csv (RFC 4180, one row a point) and its CSVW metadata."""

from __future__ import annotations

import csv
import io
import math
import re
from collections.abc import Iterator
from dataclasses import replace
from typing import Any

import numpy as np

from curvefit import __version__
from curvefit.write.curves_json import json_text
from curvefit.write.outgoing import Z95, CurveOut, FitOut, Outgoing

__all__ = ["COLUMNS", "csv_metadata", "curves_csv", "neutral"]

#: column, datatype, what it holds
COLUMNS: tuple[tuple[str, str, str], ...] = (
    ("pump", "string", "Name of the pump"),
    ("page", "integer", "Page of the document, from 1"),
    ("panel", "string", "Plot box of the page"),
    ("curve", "string", "Name of the curve"),
    ("quantity", "string", "What the value is; on iso lines the value is the head"),
    ("impeller_diameter_mm", "number", "Impeller diameter [mm]"),
    ("speed_rpm", "number", "Speed of rotation [1/min]"),
    ("flow", "number", "Flow"),
    ("flow_unit", "string", "UCUM code of the flow's unit"),
    ("value", "number", "Value"),
    ("value_unit", "string", "UCUM code of the value's unit"),
    ("standard_uncertainty", "number", "Standard uncertainty of the value, all causes"),
    ("low", "number", "Lower end of the interval at the stated confidence"),
    ("high", "number", "Upper end of the interval at the stated confidence"),
    ("confidence", "number", "Confidence of low and high, 0 to 1"),
    ("source", "string", "traced: a point of the line; fitted: a point of the equation"),
    ("flags", "string", "bridged, crossing, bundled, given; separated by blanks"),
    ("finding_codes", "string", "Codes of the findings about this curve, separated by blanks"),
)
_REQUIRED = ("page", "curve", "quantity", "flow", "flow_unit", "value", "value_unit", "source")


def curves_csv(out: Outgoing) -> str:
    """The table of all traced and fitted points, with CRLF line ends; unknown cells are empty."""
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\r\n")
    writer.writerow([name for name, _, _ in COLUMNS])
    for curve in (*out.curves, *out.derived):
        if curve in out.curves:
            writer.writerows(_traced(out, curve))
        for fit in out.fits_of(curve.curve):
            writer.writerows(_fitted(out, curve, fit))
    for fit in out.fits:
        if len(fit.fit.curves) > 1:
            writer.writerows(_fitted(out, _between_drawn(out, fit), fit))
    return text.getvalue()


def _between_drawn(out: Outgoing, fit: FitOut) -> CurveOut:
    """The curve that a family's fit gives, which was not drawn: named after the fit."""
    first = next(c for c in (*out.curves, *out.derived) if c.curve.name == fit.fit.curve.name)
    at = {
        f"{name}_si": fit.fit.parameters.get(name, getattr(first.curve, f"{name}_si"))
        for name in ("diameter", "speed")
    }
    return replace(
        first, curve=replace(first.curve, name=fit.fit.name, **at), findings=fit.fit.findings
    )


def csv_metadata(name: str, out: Outgoing) -> str:
    """The CSVW metadata (W3C, 2015) of the CSV file of that name."""
    columns = [
        {
            "name": column,
            "titles": column,
            "datatype": datatype,
            "required": column in _REQUIRED,
            "dc:description": description,
        }
        for column, datatype, description in COLUMNS
    ]
    document: dict[str, Any] = {
        "@context": "http://www.w3.org/ns/csvw",
        "url": re.sub(r"[%#?:]", lambda m: f"%{ord(m[0]):02X}", name),
        "dc:title": "Pump curves read from a printed chart",
        "dc:creator": f"curvefit {__version__}",
        "dc:source": out.reading.page.sha256,
        "dialect": {"delimiter": ",", "encoding": "utf-8", "header": True, "quoteChar": '"'},
        "tableSchema": {"columns": columns},
    }
    return json_text(document)


def neutral(text: str) -> str:
    """The text with an apostrophe before it where a spreadsheet would take it for a formula."""
    return f"'{text}" if text.lstrip(" ")[:1] in ("=", "+", "-", "@", "\t", "\r", "\n") else text


def _shown(value: float | None, digits: int = 8) -> str:
    return "" if value is None or not math.isfinite(value) else f"{value:.{digits}g}"


def _shared(out: Outgoing, curve: CurveOut) -> tuple[list[str], str]:
    """The cells before the flow, and the finding codes."""
    c = curve.curve
    diameter = None if c.diameter_si is None else c.diameter_si * 1e3
    speed = None if curve.speed_si is None else curve.speed_si * 60
    cells = [
        neutral(c.pump),
        str(out.reading.page.number),
        neutral(c.panel.name if c.panel is not None else ""),
        neutral(c.name),
        curve.units.quantity,
        _shown(diameter),
        _shown(speed),
    ]
    return cells, " ".join(dict.fromkeys(f.code for f in curve.findings))


def _traced(out: Outgoing, curve: CurveOut) -> Iterator[list[str]]:
    shared, codes = _shared(out, curve)
    for flow, value, u, flags in zip(curve.flow, curve.value, curve.u, curve.flags, strict=True):
        yield [
            *(*shared, _shown(flow), curve.units.flow, _shown(value), curve.units.value),
            *(_shown(u, 5), _shown(value - Z95 * u), _shown(value + Z95 * u)),
            *("0.95" if math.isfinite(u) else "", "traced", flags, codes),
        ]


def _fitted(out: Outgoing, curve: CurveOut, fit: FitOut) -> Iterator[list[str]]:
    shared, codes = _shared(out, curve)
    band = fit.fit.band
    columns = [fit.flow, fit.value, fit.low, fit.high]
    if out.points is not None and len(fit.flow) > 1:
        grid = np.linspace(fit.flow[0], fit.flow[-1], max(out.points, 2))
        columns = [grid, *(_between(fit, grid, c) for c in columns[1:])]
    sigmas = _sigmas(band.confidence) if band.kind == "pointwise" else math.nan
    for flow, value, low, high in zip(*columns, strict=True):
        known = math.isfinite(low) and math.isfinite(high)
        yield [
            *(*shared, _shown(flow), fit.units.flow, _shown(value), fit.units.value),
            *(_shown((high - low) / 2 / sigmas, 5), _shown(low), _shown(high)),
            *(_shown(band.confidence) if known else "", "fitted", "", codes),
        ]


def _between(fit: FitOut, grid: Any, column: Any) -> Any:
    """A band column on another flow grid: the equation itself, the band's edges by their offset."""
    return fit.at(grid) + np.interp(grid, fit.flow, column - fit.value)


def _sigmas(confidence: float) -> float:
    from statistics import NormalDist

    return NormalDist().inv_cdf(0.5 + confidence / 2)
