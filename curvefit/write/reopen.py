"""Reads a STEM.curves.json back into curves and fits, SI."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from curvefit.errors import InputError, Location, OpenError
from curvefit.models import rescale, rescale_covariance
from curvefit.records import FLAGS, QUANTITIES, Band, Curve, Finding, Fit, Pump
from curvefit.units import to_si, unit
from curvefit.write.derived import derived_back
from curvefit.write.rescaled import rescaled_parameters

__all__ = ["CurveSet", "reopen", "reopen_text"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class CurveSet:
    """What a file of curves holds; the curves have no trace, since the page is not in it.

    source : file, sha256, page and size of the picture, as written. panels : axes as written.
    """

    source: Mapping[str, Any]
    panels: Sequence[Mapping[str, Any]]
    pumps: tuple[Pump, ...]
    curves: tuple[Curve, ...]
    fits: tuple[Fit, ...]
    findings: tuple[Finding, ...]

    def pump(self, curve: Curve) -> Pump | None:
        """The pump of a curve."""
        return next((p for p in self.pumps if p.name == curve.pump), None)


def reopen(path: str | Path) -> CurveSet:
    """The curves, fits, pumps and findings of a STEM.curves.json.

    Raises
    ------
    OpenError
        If the file cannot be read or is no JSON.
    InputError
        If it is no pump-curve-set of a version that is known, or an entry is missing or wrong:
        the message says which.
    """
    try:
        text = Path(path).read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        raise OpenError(
            f"the file of curves cannot be read: {error}",
            Location(file=str(path)),
            "Give a .curves.json that curvefit wrote.",
        ) from error
    return reopen_text(text, str(path))


def reopen_text(text: str, file: str = "curves.json") -> CurveSet:
    """The same from a text; see :func:`reopen`."""
    try:
        document = json.loads(text)
    except ValueError as error:
        raise OpenError(
            f"not valid JSON: {error}", Location(file=file), "Give a .curves.json of curvefit."
        ) from error
    if not isinstance(document, dict) or document.get("format") != "pump-curve-set":
        raise InputError(
            'the file is no "pump-curve-set"',
            Location(file=file),
            "Give a .curves.json that curvefit wrote.",
        )
    if document.get("version") != 1:
        raise InputError(
            f"the file has version {document.get('version')!r}, version 1 is known",
            Location(file=file),
            "Read it with the curvefit that wrote it, or read the chart again.",
        )
    return _Opened(file).all(document)


class _Opened:
    """Takes entries out of the document; an error names the path to the wrong one."""

    def __init__(self, file: str) -> None:
        self.file = file
        self.path = ""

    def all(self, document: dict[str, Any]) -> CurveSet:
        try:
            pumps = self.each(document, "pumps", _pump)
            curves = self.each(document, "curves", _curve)
            derived = self.each(document, "derived_curves", _curve)
            by_name = {c.name: c for c in (*curves, *derived)}
            fits = self.each(document, "fits", lambda row: _fit(row, by_name))
            findings = self.each(document, "findings", _finding)
        except (KeyError, TypeError, ValueError, IndexError, AttributeError, InputError) as error:
            what = f"{error} is missing" if isinstance(error, KeyError) else str(error)
            raise InputError(
                f"an entry cannot be used: {what}",
                Location(file=self.file, key=self.path),
                "The schema curves.schema.json says what it must be.",
            ) from error
        source = document.get("source") or {}
        return CurveSet(source, document.get("panels") or (), pumps, curves, fits, findings)

    def each(self, document: dict[str, Any], key: str, make: Any) -> tuple[Any, ...]:
        made = []
        for i, row in enumerate(document.get(key, ())):
            self.path = f"{key}[{i}]"
            made.append(make(row))
        return tuple(made)


def _si(measure: Mapping[str, Any] | None) -> float | None:
    if measure is None or measure["value"] is None:
        return None
    return float(to_si(float(measure["value"]), measure["unit"]))


def _pump(row: Mapping[str, Any]) -> Pump:
    speed, liquid = row.get("speed"), row.get("liquid") or {}
    return Pump(
        name=row["name"],
        speed_si=_si(speed),
        speed_basis=speed["basis"] if speed else None,
        stages=row.get("stages"),
        suction_sides=row.get("suction_sides"),
        density_si=_si(liquid.get("density")),
        liquid=liquid.get("name"),
        by=row.get("by", "read"),
    )


def _known(values: Sequence[float | None] | None, scale: float) -> Array | None:
    """Numbers in SI, NaN for null; None where none is known."""
    if values is None:
        return None
    array = np.array(values, float) * scale
    return None if np.isnan(array).all() else array


def _curve(row: Mapping[str, Any]) -> Curve:
    if row["quantity"] not in QUANTITIES:
        raise ValueError(f"quantity {row['quantity']!r} is not known")
    flow_si, value_si = unit(row["flow_unit"]).factor, unit(row["unit"]).factor
    flow = np.array(row["flow"], float) * flow_si
    value = np.array(row["value"], float) * value_si
    iso = row["quantity"].startswith("iso_")
    if not (np.isfinite(flow).all() and np.isfinite(value).all()):
        raise ValueError(f"curve {row['name']!r} has a flow or value that is no number")
    if not iso and np.any(np.diff(flow) <= 0):
        raise ValueError(f"the flow of curve {row['name']!r} does not rise")
    speed, level, diameter = row.get("speed"), row.get("level"), row.get("impeller_diameter")
    ratio = speed is not None and speed["unit"] == "%"
    calibration = row.get("calibration")
    length = row.get("correlation_length")
    return Curve(
        name=row["name"],
        quantity=row["quantity"],
        flow_si=flow,
        value_si=value,
        flow_unit=row["flow_unit"],
        unit=row["unit"],
        flow_axis=row["axes"]["flow"],
        value_axis=row["axes"]["value"],
        pump=row["pump"],
        sigma_si=_known(row["standard_uncertainty"], value_si),
        trace_sigma_si=_known(row["trace_uncertainty"], value_si),
        calibration_si=None if calibration is None else np.array(calibration, float) * value_si,
        correlation_si=None if length is None else length * flow_si,
        flags=np.array([sum(FLAGS[w] for w in f.split()) for f in row["flags"]], np.uint8),
        diameter_si=_si(diameter),
        diameter_unit=diameter["unit"] if diameter else "mm",
        speed_si=None if ratio else _si(speed),
        speed_unit=speed["unit"] if speed else "/min",
        speed_ratio=speed["value"] / 100 if ratio and speed else None,
        stages=row.get("stages"),
        level_si=_si(level),
        level_unit=level["unit"] if level else "%",
        npsh_basis=row.get("npsh_basis", "not stated"),
        label=row["label"],
        guessed=tuple(row.get("guessed", ())),
        by=row["by"],
    )


def _fit(row: Mapping[str, Any], curves: Mapping[str, Curve]) -> Fit:
    flow_si, value_si = unit(row["flow_unit"]).factor, unit(row["unit"]).factor
    band = row["band"]
    made = tuple(curves[name] for name in row["curves"])
    coefficients, covariance = row["coefficients"], row["covariance"]
    covariance = None if covariance is None else np.array(covariance, float)
    parameters = dict(row["parameters"])
    if coefficients is not None:
        coefficients = rescale(coefficients, 1 / flow_si, 1 / value_si)
        if covariance is not None:
            covariance = rescale_covariance(covariance, 1 / flow_si, 1 / value_si)
    else:
        parameters, covariance = rescaled_parameters(
            parameters, covariance, 1 / flow_si, 1 / value_si
        )
    knots = row.get("knots")
    if knots is not None:
        knots = np.array(knots, float) * [flow_si, value_si]
    low_flow, high_flow = (v * flow_si for v in row["flow_range"])
    return Fit(
        name=row["name"],
        curves=made,
        family=row["family"],
        degree=row["degree"],
        flow_range_si=(low_flow, high_flow),
        band=Band(
            np.array(band["flow"], float) * flow_si,
            np.array(band["value"], float) * value_si,
            _known(band["low"], value_si),
            _known(band["high"], value_si),
            band["kind"],
            row["confidence"],
        ),
        coefficients=coefficients,
        parameters=parameters,
        covariance=covariance,
        factors=_matrix(band.get("factors"), value_si),
        calibration=_matrix(band.get("calibration"), value_si),
        residual_rms_si=(row["residual_rms"] or 0.0) * value_si,
        effective_points=row["effective_points"] or 0.0,
        candidates=tuple(
            (c["model"], np.nan if c["criterion"] is None else c["criterion"], c["note"])
            for c in row.get("candidates", ())
        ),
        reason=row.get("reason", ""),
        knots_si=knots,
        derived=derived_back(row["derived"]),
    )


def _matrix(rows: Any, scale: float) -> Array | None:
    return None if rows is None else np.array(rows, float) * scale


def _finding(row: Mapping[str, Any]) -> Finding:
    where = row["where"]
    return Finding(
        row["severity"],
        row["code"],
        row["message"],
        Location(
            page=where["page"], panel=where["panel"], axis=where["axis"], curve=where["curve"]
        ),
        row["remedy"],
    )
