"""STEM.duty.json and STEM.duty.svg: the duty-point check on disk."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

from curvefit.units import from_si
from curvefit.write.atomic import put_files
from curvefit.write.curves_json import json_text
from curvefit.write.duty_json import duty_document
from curvefit.write.duty_plot import duty_plot

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
    """The paths of STEM.duty.json and STEM.duty.svg, written into a folder.

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
    files[f"{stem}.duty.svg"] = duty_plot(result, units).encode()
    return put_files(folder, files, inputs)


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
