"""STEM.report.html: one self-contained page that a reviewer can follow from number to pixel."""

from __future__ import annotations

import base64
import hashlib
from collections.abc import Mapping
from functools import cache
from importlib.resources import files
from pathlib import PurePath
from typing import Any

import numpy as np

from curvefit import __version__
from curvefit.models import equation as written_out
from curvefit.records import QUANTITIES, Axis, Finding, Panel, Reading
from curvefit.units import from_si, unit
from curvefit.write.curves_json import equation
from curvefit.write.outgoing import CurveOut, FitOut, Outgoing
from curvefit.write.overlay import Picture, jpeg
from curvefit.write.svg import Array, curve_plot, residual_plot
from curvefit.write.wording import range_text, sentence

__all__ = ["report"]

_WORDS = {"error": "Error", "warning": "Warning", "info": "Note"}
_RANK = {"error": 0, "warning": 1, "info": 2}
_MOST = 1_500_000  #: bytes of the picture, so that the whole stays under 3 MB
_DERIVED = {
    "bep": "Best efficiency point",
    "shut_off": "Shut-off",
    "specific_speed": "Specific speed at the best efficiency point",
}
_NUMBERS = {
    "nq": "nq (1/min, m³/s, m)",
    "us": "Ns (1/min, US gpm, ft)",
    "type_number": "type number K (ISO 9906)",
    "suction": "suction specific speed (1/min, m³/s, m)",
    "suction_us": "Nss (1/min, US gpm, ft)",
}


def report(out: Outgoing, picture: Picture) -> str:
    """The page as text.

    Parameters
    ----------
    out : curves, fits and findings as they leave
    picture : the overlay; it goes in as a JPEG of bounded size

    Notes
    -----
    Nothing is loaded from outside and nothing runs: the page carries a content security policy
    that forbids it, and every text from the chart or a file name is escaped.
    """
    style = _package_text("report.css")
    digest = base64.b64encode(hashlib.sha256(style.encode()).digest()).decode()
    page = out.reading.page
    name = PurePath(page.file).name
    where = f", page {page.number}" if page.pages > 1 else ""
    return str(
        _template().render(
            title=f"Pump curves read from {name}{where}",
            generator=f"curvefit {__version__}",
            style=style,
            style_hash=f"sha256-{digest}",
            source=_source(out.reading),
            findings=[_finding(f) for f in sorted(out.findings, key=lambda f: _RANK[f.severity])],
            picture=base64.b64encode(_bounded(picture)).decode(),
            picture_text=f"The page with {len(out.reading.panels)} plot boxes and "
            f"{len(out.curves)} curves drawn over it",
            curves=[_curve(out, c) for c in (*out.curves, *out.derived)],
            axes=[_axis(p, a) for p in out.reading.panels for a in p.axes],
            number=page.number,
            file=name,
            size=f"{page.stored_size[0]} × {page.stored_size[1]} pixels",
            sha256=page.sha256,
            kind=_kind(out.reading),
            units=_units(out),
            given=_given(out.reading),
        )
    )


@cache
def _template() -> Any:
    from jinja2 import Environment, StrictUndefined

    rules = Environment(
        autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True
    )
    return rules.from_string(_package_text("report.html"))


def _package_text(name: str) -> str:
    return files("curvefit.write").joinpath(name).read_text(encoding="utf-8")


def _bounded(picture: Picture) -> bytes:
    for width, quality in ((2400, 80), (2000, 70), (1600, 60), (1200, 50)):
        data = jpeg(picture, width, quality)
        if len(data) <= _MOST:
            break
    return data


def _source(reading: Reading) -> str:
    parts = [f"{len(reading.panels)} plot boxes", f"{len(reading.curves)} curves"]
    for pump in reading.pumps:
        known = [f"pump {pump.name}"]
        if pump.speed_si is not None:
            basis = " (synchronous)" if pump.speed_basis == "synchronous" else ""
            known.append(f"{from_si(pump.speed_si, '/min'):.5g} 1/min{basis}")
        if pump.stages is not None:
            known.append(f"{pump.stages} stages" if pump.stages > 1 else "1 stage")
        if pump.liquid is not None:
            known.append(pump.liquid)
        parts.append(", ".join(known))
    return " · ".join(parts)


def _finding(finding: Finding) -> dict[str, str]:
    w = finding.where
    known = (("panel", w.panel), ("axis", w.axis), ("curve", w.curve))
    return {
        "severity": finding.severity,
        "word": _WORDS[finding.severity],
        "code": finding.code,
        "place": ", ".join(f"{word} {value}" for word, value in known if value is not None),
        "message": sentence(finding.message),
        "remedy": sentence(finding.remedy) if finding.remedy else "",
    }


def _curve(out: Outgoing, curve: CurveOut) -> dict[str, Any]:
    c, flow, value = curve.curve, unit(curve.units.flow).print, unit(curve.units.value).print
    guess = " (derived)" if curve in out.derived else " ?" if c.guessed else ""
    u = curve.u[np.isfinite(curve.u)]
    fits = out.fits_of(c)
    title = QUANTITIES[curve.units.quantity].title
    plots = []
    flow_title, value_title = f"flow [{flow}]", f"{_low(title)} [{value}]"
    if not c.iso:
        plots.append(curve_plot(curve, fits[0] if fits else None, flow_title, value_title))
        plots += [residual_plot(curve, f, flow_title, value) for f in fits[:1]]
    level = (
        "" if c.level_si is None else f", {from_si(c.level_si, c.level_unit):.4g} {c.level_unit}"
    )
    return {
        "panel": c.panel.name if c.panel is not None else "–",
        "name": c.name,
        "quantity": f"{title}{level}{guess}",
        "label": c.label or "–",
        "diameter": _measure(c.diameter_si, c.diameter_unit),
        "speed": _measure(curve.speed_si, "/min"),
        "flow_range": _range(curve.flow, curve.units.flow),
        "value_range": _range(curve.value, curve.units.value),
        "uncertainty": f"{np.median(u):.2g} {value}" if len(u) else "unknown",
        "points": len(curve.flow),
        "fits": [_fit(f) for f in fits],
        "plots": plots,
    }


def _range(values: Array, code: str) -> str:
    return range_text(float(values.min()), float(values.max()), code, " … ")


def _low(title: str) -> str:
    return title if title.startswith("NPSH") else title[:1].lower() + title[1:]


def _fit(out: FitOut) -> dict[str, Any]:
    fit, band = out.fit, out.fit.band
    symbol = QUANTITIES[out.units.quantity].symbol
    flow, value = unit(out.units.flow).print, unit(out.units.value).print
    text = equation(out)
    if out.coefficients is not None:
        text = written_out(out.coefficients, symbol, digits=6)
    half = np.nanmedian(out.high - out.low) / 2 if np.isfinite(out.high - out.low).any() else None
    wide = "unknown" if half is None else f"± {half:.2g} {value} (median)"
    return {
        "equation": f"{text}   (Q in {flow}, {symbol} in {value})",
        "summary": f"For {range_text(*out.flow_range, out.units.flow)}. "
        f"Residual {out.residual_rms:.2g} {value} root mean square. "
        f"{band.kind.capitalize()} {100 * band.confidence:g} % band {wide}; "
        f"{fit.effective_points:.3g} effective points.",
        "rows": _coefficients(out),
        "reason": fit.reason,
        "candidates": [
            f"{name}: {criterion:.4g}{f', {note}' if note else ''}"
            for name, criterion, note in fit.candidates
        ],
        "derived": [_derived(kind, numbers) for kind, numbers in out.derived.items()],
    }


def _coefficients(out: FitOut) -> list[tuple[str, str, str]]:
    """Name, value with all digits, standard uncertainty of each coefficient or parameter."""
    if out.knots is not None:
        return [(f"knot at {q:.6g}", f"{v:.8g}", "see the band") for q, v in out.knots]
    if out.coefficients is not None:
        names = [f"c{k}" for k in range(len(out.coefficients))]
        values = [float(v) for v in out.coefficients]
    else:
        names, values = list(out.parameters), list(out.parameters.values())
    us: list[float | None] = [None] * len(values)
    if out.covariance is not None and len(out.covariance) == len(values):
        us = [float(v) for v in np.sqrt(np.maximum(np.diag(out.covariance), 0))]
    return [
        (n, f"{v:.10g}", "unknown" if u is None else f"{u:.2g}")
        for n, v, u in zip(names, values, us, strict=True)
    ]


def _derived(kind: str, numbers: Mapping[str, Mapping[str, Any]]) -> str:
    parts = []
    for name, m in numbers.items():
        if m["value"] is None:
            continue
        shown = f"{_NUMBERS.get(name, name.replace('_', ' '))} {m['value']:.4g}"
        if m["unit"] is not None:
            shown += f" {unit(m['unit']).print}"
        if m["standard_uncertainty"] is not None:
            shown += f" (u {m['standard_uncertainty']:.2g})"
        parts.append(shown)
    return f"{_DERIVED.get(kind, kind)}: {', '.join(parts)}"


def _axis(panel: Panel, axis: Axis) -> dict[str, str]:
    used = [m for m in axis.marks if m.used and m.value is not None]
    ends = axis.offset, axis.offset + axis.slope
    shown = [10**v for v in ends] if axis.scale == "log" else list(ends)
    c = axis.covariance
    us = np.sqrt(np.maximum([c[0, 0], c[0, 0] + 2 * c[0, 1] + c[1, 1]], 0))
    if axis.scale == "log":
        us = us * np.log(10) * np.array(shown)
    guess = " ?" if axis.guessed else ""
    quantity = QUANTITIES[axis.quantity].title if axis.quantity else "not known"
    return {
        "name": axis.name,
        "quantity": f"{quantity}{guess}",
        "unit": axis.printed_unit or "not known",
        "scale": axis.scale,
        "range": f"{shown[0]:.4g} … {shown[1]:.4g}",
        "marks": f"{len(used)} of {len(axis.marks)}{' (given)' if axis.by == 'given' else ''}",
        "uncertainty": f"{us[0]:.2g}, {us[1]:.2g}",
        "residual": _farthest(panel, axis),
    }


def _farthest(panel: Panel, axis: Axis) -> str:
    """How far the worst used mark lies from the scale, in pixels."""
    used = [m for m in axis.marks if m.used and m.value is not None]
    if not used:
        return "–"
    across, up = panel.fractions(np.array([m.xy for m in used]))
    length = panel.warp.size[0 if axis.along_flow else 1]
    at = axis.fraction(np.array([m.value for m in used], float) * axis.factor)
    off = np.abs((across if axis.along_flow else up) - at) * length
    return f"{float(off.max()):.2f} px"


def _measure(si: float | None, code: str) -> str:
    return "–" if si is None else f"{from_si(si, code):.5g} {unit(code).print}"


def _kind(reading: Reading) -> str:
    if reading.page.vector:
        return "The page is a drawing: its lines were taken from the drawing operators themselves."
    dpi = f" at {reading.page.dpi:.4g} dots per inch" if reading.page.dpi else ""
    return f"The page is a picture{dpi}."


def _units(out: Outgoing) -> str:
    changed = any(
        (c.units.flow, c.units.value) != (c.curve.flow_unit, c.curve.unit) for c in out.curves
    )
    said = "chosen by the user" if changed else "those printed on the axes"
    return f"Units are {said}; they are exact multiples of SI units."


def _given(reading: Reading) -> str:
    entries = reading.notes.given if reading.notes is not None else {}
    counts = {table: len(rows) for table, rows in entries.items() if rows}
    return ", ".join(f"{n} × {table}" for table, n in counts.items())
