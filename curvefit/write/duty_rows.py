"""A duty-point check in rows of text, for the terminal and the report alike."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from curvefit.units import G_N, from_si, unit

if TYPE_CHECKING:
    from curvefit.records import DutyPoint, Interval

__all__ = ["CAUTIONS", "loss_rows", "remarks", "value_rows"]

CAUTIONS = (
    "Readings from a chart do not replace the manufacturer's data or a witnessed test.",
    "Check the shut-off pressure, the NPSH margin and the minimum flow.",
    "Local codes and licensed practice decide.",
)


def value_rows(points: tuple[DutyPoint, ...], units: Mapping[str, str]) -> list[list[str]]:
    """Rows of name, value, 95 % interval; a duty's first row says whether it is stable.

    Parameters
    ----------
    units : UCUM codes by "flow", "head", "npsh", "power"
    """
    rows = []
    for number, point in enumerate(points, 1):
        name = f"duty {number}" if len(points) > 1 else "duty"
        rows.append([name, "stable" if point.stable else "UNSTABLE", ""])
        for label, value, code in (
            ("flow", point.flow_si, units["flow"]),
            ("head", point.head_si, units["head"]),
            ("efficiency", point.efficiency_si, "%"),
            ("shaft power", point.shaft_power_si, units["power"]),
            ("shaft power from ρgQH/η", point.computed_power_si, units["power"]),
            ("NPSHr", point.npsh_required_si, units["npsh"]),
            ("NPSH available", point.npsh_available_si, units["npsh"]),
        ):
            if value is not None:
                rows.append([f"  {label}", shown(value.value, code), _interval(value, code)])
        rows += _consequences(point, units)
    return rows


def _consequences(point: DutyPoint, units: Mapping[str, str]) -> list[list[str]]:
    rows = []
    read, worked = point.shaft_power_si, point.computed_power_si
    if read is not None and worked is not None:
        apart = shown(worked.value - read.value, units["power"])
        rows.append(["  ρgQH/η less power curve", apart, f"{worked.value / read.value - 1:+.1%}"])
    need, have = point.npsh_required_si, point.npsh_available_si
    if need is not None and have is not None:
        margin = shown(have.value - need.value, units["npsh"])
        rows.append(["  NPSH margin", margin, f"ratio {have.value / need.value:.3g}"])
    if point.share_of_bep is not None:
        rows.append(["  share of BEP flow", f"{point.share_of_bep:.0%}", ""])
    if point.energy_si is not None:
        rows.append(["  energy at the shaft", f"{point.energy_si / 3.6e6:.4g} kWh/m³", ""])
    if point.energy_year_si is not None:
        rows.append(["  a year's energy", f"{point.energy_year_si / 3.6e9:.4g} MWh", ""])
    return rows


def loss_rows(result: Any, units: Mapping[str, str]) -> list[list[str]]:
    """Rows of section, part, head loss at the duty, method; the static head last."""
    rows = [[r.section, r.part, shown(r.loss, units["head"]), r.method] for r in result.table]
    if rows:
        rows.append(["static", "head", shown(result.system.static_head, units["head"]), ""])
    return rows


def remarks(result: Any, units: Mapping[str, str]) -> list[str]:
    """What else is known of the duty, a sentence each."""
    said = []
    if result.k_si is not None:
        k = result.k_si * unit(units["flow"]).factor ** 2 / unit(units["head"]).factor
        per = f"{unit(units['head']).print}/({unit(units['flow']).print})²"
        said.append(f"Equivalent loss coefficient k = {k:.5g} {per}")
    if result.minimum_speed_ratio is not None:
        said.append(f"Slowest speed that still lifts: {result.minimum_speed_ratio:.1%} of this one")
    if result.shut_off_si is not None:
        head, flow = result.shut_off_si
        bar = head * result.system.liquid.density * G_N / 1e5
        said.append(
            f"Head at the smallest flow read ({shown(flow, units['flow'])}): "
            f"{shown(head, units['head'])}, {bar:.3g} bar above the suction side"
        )
    if result.method:
        said.append(f"Intervals: {result.method}")
    return said


def shown(value: float, code: str) -> str:
    """An SI value in a unit, to four digits, as people write it."""
    return f"{from_si(value, code):.4g} {unit(code).print}"


def _interval(value: Interval, code: str) -> str:
    if value.low is None or value.high is None:
        return ""
    return f"{from_si(value.low, code):.4g} to {from_si(value.high, code):.4g}"
