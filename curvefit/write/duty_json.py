"""STEM.duty.json: the duty points, the system and the findings (format "pump-duty", version 1)."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from curvefit import __version__
from curvefit.records import DutyPoint, Finding, Interval
from curvefit.units import from_si

__all__ = ["DUTY_UNITS", "duty_document"]

#: how each number of a duty point is written: field of DutyPoint → (name in the file, dimension)
_FIELDS = {
    "flow_si": ("flow", "flow"),
    "head_si": ("head", "head"),
    "efficiency_si": ("efficiency", "ratio"),
    "shaft_power_si": ("shaft_power", "power"),
    "computed_power_si": ("shaft_power_from_efficiency", "power"),
    "npsh_required_si": ("npsh_required", "npsh"),
    "npsh_available_si": ("npsh_available", "npsh"),
}
DUTY_UNITS = {"flow": "m3/h", "head": "m", "npsh": "m", "power": "kW", "ratio": "%"}


def duty_document(
    points: tuple[DutyPoint, ...],
    system: Mapping[str, Any],
    findings: tuple[Finding, ...],
    units: Mapping[str, str] | None = None,
    pump: Mapping[str, Any] | None = None,
) -> dict[str, Any]:
    """The document of STEM.duty.json.

    Parameters
    ----------
    points : duty points by rising flow
    system : what the file says of the system, ready for JSON
    findings : doubts
    units : UCUM codes by "flow", "head", "npsh", "power"
    pump : which curves, diameter, speed and arrangement the duty is for, ready for JSON
    """
    chosen = DUTY_UNITS | dict(units or {})
    return {
        "format": "pump-duty",
        "version": 1,
        "generator": f"curvefit {__version__}",
        "pump": dict(pump or {}),
        "points": [_point(p, chosen) for p in points],
        "system": dict(system),
        "findings": [
            {
                "severity": f.severity,
                "code": f.code,
                "message": f.message,
                "remedy": f.remedy,
            }
            for f in findings
        ],
    }


def _point(point: DutyPoint, units: Mapping[str, str]) -> dict[str, Any]:
    row: dict[str, Any] = {
        name: _interval(getattr(point, field), units[dimension])
        for field, (name, dimension) in _FIELDS.items()
    }
    row["stable"] = point.stable
    row["share_of_bep_flow"] = _digits(point.share_of_bep)
    row["hydraulic_power"] = _number(point.hydraulic_power_si, units["power"])
    row["energy_per_volume"] = _plain(point.energy_si, 3.6e6, "kW.h/m3")
    row["energy_per_year"] = _plain(point.energy_year_si, 3.6e6, "kW.h")
    return row


def _interval(value: Interval | None, unit: str) -> dict[str, Any] | None:
    if value is None:
        return None
    ends = {name: getattr(value, name) for name in ("value", "low", "high")}
    shown = {n: None if v is None else _digits(from_si(v, unit)) for n, v in ends.items()}
    return {"value": shown["value"], "unit": unit, "low": shown["low"], "high": shown["high"]}


def _number(value: float | None, unit: str) -> dict[str, Any] | None:
    return None if value is None else {"value": _digits(from_si(value, unit)), "unit": unit}


def _plain(value: float | None, si: float, unit: str) -> dict[str, Any] | None:
    return None if value is None else {"value": _digits(value / si), "unit": unit}


def _digits(value: float | None) -> float | None:
    """Seven significant digits: more than any chart gives, and the same bytes everywhere."""
    return None if value is None else float(f"{value:.7g}")
