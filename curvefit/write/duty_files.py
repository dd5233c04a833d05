"""STEM.duty.json, STEM.duty.svg and STEM.duty.html: the duty-point check on disk."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

from curvefit import __version__
from curvefit.units import from_si
from curvefit.write.atomic import put_files
from curvefit.write.curves_json import json_text
from curvefit.write.duty_json import duty_document
from curvefit.write.duty_plot import duty_plot
from curvefit.write.duty_rows import CAUTIONS, loss_rows, remarks, value_rows

if TYPE_CHECKING:
    from curvefit.records import DutyPoint, Finding

__all__ = ["write_duty"]


def write_duty(
    result: Any,
    folder: str | Path,
    stem: str,
    units: Mapping[str, str],
    pump: Mapping[str, Any],
    inputs: Iterable[str | Path] = (),
) -> tuple[Path, ...]:
    """The paths of STEM.duty.json, STEM.duty.svg and STEM.duty.html, written into a folder.

    Parameters
    ----------
    result : the Duty
    folder, stem : where to, and what the names begin with
    units : UCUM codes by "flow", "head", "npsh", "power"
    pump : what the duty is for, ready for JSON
    inputs : files that must not be overwritten

    Raises
    ------
    WriteError
        If a file cannot be written.
    """
    points: tuple[DutyPoint, ...] = result.points
    findings: tuple[Finding, ...] = result.findings
    document = duty_document(points, _system(result, units), findings, units, pump)
    files = {f"{stem}.duty.json": json_text(document).encode()}
    plot = duty_plot(result, units)
    files[f"{stem}.duty.svg"] = plot.encode()
    files[f"{stem}.duty.html"] = _page(result, stem, units, pump, plot).encode()
    return put_files(folder, files, inputs)


def _page(
    result: Any, stem: str, units: Mapping[str, str], pump: Mapping[str, Any], plot: str
) -> str:
    """The report: one self-contained page; every text from outside is escaped."""
    from importlib.resources import files

    from jinja2 import Environment

    here = files("curvefit.write")
    liquid = result.system.liquid
    words = [f"pump {pump.get('name')}", f"system {Path(result.system.file).name}"]
    for key, word in (("impeller_diameter", "impeller"), ("speed", "speed")):
        if pump.get(key):
            words.append(f"{word} {pump[key]['value']:g} {pump[key]['unit']}")
    if pump.get("parallel", 1) > 1 or pump.get("series", 1) > 1:
        words.append(f"{pump['parallel']} in parallel, {pump['series']} in series")
    template = Environment(autoescape=True).from_string(
        here.joinpath("duty.html").read_text(encoding="utf-8")
    )
    return template.render(
        title=f"Duty point: {stem}",
        about=" · ".join(words),
        generator=f"curvefit {__version__}",
        style=here.joinpath("report.css").read_text(encoding="utf-8"),
        findings=result.findings,
        plot=plot,
        values=value_rows(result.points, units),
        losses=loss_rows(result, units),
        remarks=remarks(result, units),
        liquid=f"{liquid.name}, {liquid.density:.5g} kg/m³",
        cautions=CAUTIONS,
    )


def _system(result: Any, units: Mapping[str, str]) -> dict[str, Any]:
    system, k = result.system, result.k_si
    liquid = system.liquid
    return {
        "file": Path(system.file).name or None,
        "static_head": _number(system.static_head, units["head"]),
        "equivalent_loss_coefficient": None
        if k is None
        else {"value": float(f"{k:.7g}"), "unit": "m/(m3/s)2"},
        "liquid": {
            "name": liquid.name,
            "density_kg_m3": liquid.density,
            "kinematic_viscosity_m2_s": liquid.viscosity,
            "vapour_pressure_pa": liquid.vapour_pressure,
        },
        "losses": [
            {
                "section": row.section,
                "part": row.part,
                "method": row.method,
                "loss": _number(row.loss, units["head"]),
            }
            for row in result.table
        ],
        "intervals": result.method,
    }


def _number(value: float, unit: str) -> dict[str, Any]:
    return {"value": float(f"{from_si(value, unit):.7g}"), "unit": unit}
