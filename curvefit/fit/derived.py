"""What follows from the fits of one pump: best efficiency point, shut-off head, specific speeds.

Every figure has its standard uncertainty, to first order, with the errors that the curves share
(those of a common axis) taken once.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from curvefit.fit.said import finding
from curvefit.laws import (
    NQ_TO_TYPE_NUMBER,
    NQ_TO_US,
    efficiency,
    specific_speed,
    suction_specific_speed,
)
from curvefit.models import evaluate
from curvefit.records import Curve, Finding, Fit, Pump
from curvefit.units import RHO_WATER

__all__ = ["Line", "Point", "at_flow", "best_point", "derive", "efficiency_line", "line_of"]

Array = NDArray[np.float64]
EFFICIENCIES = ("efficiency", "overall_efficiency")
#: a curve that starts below this share of its largest flow starts at shut-off
FROM_ZERO = 0.01


@dataclass(frozen=True, slots=True)
class Point:
    """A number and what one standard deviation of each named cause does to it; None: not known."""

    value: float
    causes: dict[str, float] | None

    @property
    def u(self) -> float | None:
        """Standard uncertainty."""
        if self.causes is None:
            return None
        return float(np.sqrt(sum(e * e for e in self.causes.values())))

    def plus(self, other: Point, rate: float) -> Point:
        """This value moved along with `rate` times the error of another."""
        if self.causes is None or other.causes is None:
            return Point(self.value, None)
        names = self.causes.keys() | other.causes.keys()
        mixed = {n: self.causes.get(n, 0.0) + rate * other.causes.get(n, 0.0) for n in names}
        return Point(self.value, mixed)


@dataclass(frozen=True, slots=True, eq=False)
class Line:
    """A fitted or computed curve on a flow grid inside its range; causes by name or not known."""

    grid: Array
    value: Array
    causes: dict[str, Array] | None
    coefficients: Array | None = None

    @property
    def ends(self) -> tuple[float, float]:
        """Smallest and largest flow."""
        return float(self.grid[0]), float(self.grid[-1])


def line_of(fit: Fit) -> Line:
    """The fit's curve inside its range; causes of the axes are named after them, to be shared."""
    low, high = fit.flow_range_si
    slack = 1e-9 * (high - low)
    inside = (fit.band.flow_si >= low - slack) & (fit.band.flow_si <= high + slack)
    grid, value = fit.band.flow_si[inside], fit.band.value_si[inside]
    if fit.factors is None:
        return Line(grid, value, None, fit.coefficients)
    rows = {f"{fit.name} {i}": row[inside] for i, row in enumerate(fit.factors)}
    if fit.calibration is not None:
        curve = fit.curve
        names = [
            f"axis {axis or curve.name + side} {i}"
            for axis, side in ((curve.flow_axis, " flow"), (curve.value_axis, " value"))
            for i in (0, 1)
        ]
        rows |= dict(zip(names, (row[inside] for row in fit.calibration), strict=True))
    return Line(grid, value, rows, fit.coefficients)


def efficiency_line(head: Line, power: Line, density: float) -> Line | None:
    """η = ρgQH/P of a head and a shaft-power curve, with the errors of both; None where apart."""
    low, high = max(head.ends[0], power.ends[0]), min(head.ends[1], power.ends[1])
    if high <= low:
        return None
    grid = np.linspace(low, high, len(head.grid))

    def moved(line: Line, row: Array) -> Array:
        return np.interp(grid, line.grid, row)

    h, p = moved(head, head.value), moved(power, power.value)
    if p.min() <= 0 or h.min() <= 0:
        return None
    value = efficiency(grid, h, p, density)
    if head.causes is None or power.causes is None:
        return Line(grid, value, None)
    causes = {name: value * moved(head, row) / h for name, row in head.causes.items()}
    for name, row in power.causes.items():
        causes[name] = causes.get(name, np.zeros(len(grid))) - value * moved(power, row) / p
    return Line(grid, value, causes)


def at_flow(fit: Fit | Line, flow: Point | float) -> Point | None:
    """The value of a fit at a flow that may itself be uncertain; None outside its range."""
    line = line_of(fit) if isinstance(fit, Fit) else fit
    place = flow if isinstance(flow, Point) else Point(flow, {})
    low, high = line.ends
    slack = 1e-9 * (high - low)
    if not low - slack <= place.value <= high + slack:
        return None
    q = place.value
    causes = line.causes
    if causes is not None:
        at = {n: float(np.interp(q, line.grid, row)) for n, row in causes.items()}
    slope = float(np.interp(q, line.grid, np.gradient(line.value, line.grid)))
    value = float(
        np.interp(q, line.grid, line.value)
        if line.coefficients is None
        else evaluate(line.coefficients, q)
    )
    return Point(value, None if causes is None else at).plus(place, slope)


def best_point(fit: Fit | Line) -> Point | None:
    """The flow of the largest value; None where that lies at an end of the range.

    Notes
    -----
    At the peak q* the slope is zero: an error e(q) of the curve moves it by −e′(q*)/v″(q*).
    """
    line = line_of(fit) if isinstance(fit, Fit) else fit
    grid, value = line.grid, line.value
    if len(grid) < 7:
        return None
    top = int(np.argmax(value))
    if top < 2 or top > len(grid) - 3:
        return None
    around = slice(max(0, top - 3), top + 4)
    step = float(grid[1] - grid[0])
    _, b, a = np.polynomial.polynomial.polyfit((grid[around] - grid[top]) / step, value[around], 2)
    bend = float(2 * a / step**2)
    flow = float(grid[top] - step * b / (2 * a)) if a < 0 else float(grid[top])
    if line.coefficients is not None:
        slope = line.coefficients[1:] * np.arange(1, len(line.coefficients))
        for _ in range(20):
            bend = float(evaluate(slope[1:] * np.arange(1, len(slope)), flow))
            move = -float(evaluate(slope, flow)) / bend if bend < 0 else 0.0
            flow = float(np.clip(flow + move, grid[top - 1], grid[top + 1]))
            if abs(move) < 1e-14 * grid[-1]:
                break
    if bend >= 0:
        return None
    if line.causes is None:
        return Point(flow, None)
    rates = {n: float(np.interp(flow, grid, np.gradient(r, grid))) for n, r in line.causes.items()}
    return Point(flow, {n: -rate / bend for n, rate in rates.items()})


def derive(fits: Sequence[Fit], pumps: Iterable[Pump] = ()) -> tuple[Fit, ...]:
    """The same fits with `derived` filled in.

    Parameters
    ----------
    fits : of single curves
    pumps : for speed, stages and suction sides where the curves do not tell

    Returns
    -------
    tuple of Fit
        In the same order. "bep" stands with the efficiency curves and with the head curve of the
        same impeller and speed; "shut_off" with head curves that begin at zero flow;
        "specific_speed" with the head curve of the largest impeller.
    """
    known = {p.name: p for p in pumps}
    out = []
    for fit in fits:
        derived = dict(fit.derived)
        curve = fit.curve
        if _from_shut_off(fit):
            derived["shut_off"] = _shut_off(fit)
        best, said = _best_of(fit, fits, known.get(curve.pump))
        if best is not None:
            derived["bep"] = best[1]
            if curve.quantity == "head" and _largest(curve, fits):
                speeds, more = _specific(fit, best, fits, known.get(curve.pump))
                said += more
                if speeds:
                    derived["specific_speed"] = speeds
        out.append(replace(fit, derived=derived, findings=fit.findings + tuple(said)))
    return tuple(out)


def _from_shut_off(fit: Fit) -> bool:
    """Whether this is a head curve that begins at zero flow."""
    head = len(fit.curves) == 1 and fit.curve.quantity in ("head", "differential_pressure")
    return head and abs(fit.flow_range_si[0]) <= FROM_ZERO * fit.flow_range_si[1]


def _shut_off(fit: Fit) -> dict[str, float | None]:
    low = fit.flow_range_si[0]
    point = at_flow(fit, low)
    assert point is not None
    name = "head_si" if fit.curve.quantity == "head" else "pressure_si"
    return {"flow_si": low, name: point.value, f"u_{name}": point.u}


def _same(a: Curve, b: Curve) -> bool:
    """Whether two curves belong to one impeller at one speed."""

    def close(x: float | None, y: float | None) -> bool:
        return x == y if x is None or y is None else abs(x - y) <= 1e-4 * abs(y)

    return (
        a.pump == b.pump
        and close(a.diameter_si, b.diameter_si)
        and close(a.speed_si, b.speed_si)
        and close(a.speed_ratio, b.speed_ratio)
        and a.stages == b.stages
    )


def companion(curve: Curve, quantities: Sequence[str], fits: Sequence[Fit]) -> Fit | None:
    """The one fit of another quantity for the same impeller and speed; None if not just one."""
    found = [
        f
        for f in fits
        if len(f.curves) == 1 and f.curve.quantity in quantities and _same(f.curve, curve)
    ]
    return found[0] if len(found) == 1 else None


Best = tuple[Point, dict[str, float | None]]


def _best_of(fit: Fit, fits: Sequence[Fit], pump: Pump | None) -> tuple[Best | None, list[Finding]]:
    """The best efficiency point of the curve's impeller and what the pump does there."""
    curve, said = fit.curve, []
    if len(fit.curves) != 1 or curve.quantity not in ("head", *EFFICIENCIES):
        return None, []
    others = {q: companion(curve, (q,), fits) for q in ("head", "shaft_power", "npsh_required")}
    source: Line | None = None
    if curve.quantity in EFFICIENCIES:
        source = line_of(fit)
    elif (own := companion(curve, EFFICIENCIES[:1], fits)) is not None:
        source = line_of(own)
    elif others["shaft_power"] is not None and not _any_efficiency(curve, fits):
        density = pump.density_si if pump is not None and pump.density_si else RHO_WATER
        source = efficiency_line(line_of(fit), line_of(others["shaft_power"]), density)
        said.append(
            finding(
                "info",
                "derived.efficiency-computed",
                curve,
                f"The best efficiency point is that of ρgQH/P with {density:.5g} kg/m³; the chart "
                "has no efficiency curve for this impeller.",
            )
        )
    flow = best_point(source) if source is not None else None
    if source is None or flow is None:
        return None, []
    known: dict[str, float | None] = {"flow_si": flow.value, "u_flow_si": flow.u}
    lines = {"efficiency": source}
    lines |= {q: line_of(f) for q, f in others.items() if f is not None}
    for quantity, line in lines.items():
        at = at_flow(line, flow)
        if at is not None:
            known |= {f"{quantity}_si": at.value, f"u_{quantity}_si": at.u}
    return (flow, known), said


def _any_efficiency(curve: Curve, fits: Sequence[Fit]) -> bool:
    """Whether the pump has efficiency curves at all, though none is this impeller's alone."""
    return any(f.curve.quantity in EFFICIENCIES and f.curve.pump == curve.pump for f in fits)


def _largest(curve: Curve, fits: Sequence[Fit]) -> bool:
    """Whether no head curve of the pump has a larger impeller (or a higher speed)."""
    others = [f.curve for f in fits if f.curve.quantity == "head" and f.curve.pump == curve.pump]
    if curve.diameter_si is None and len(others) > 1 and any(c.diameter_si for c in others):
        return False
    return all((c.diameter_si or 0.0) <= (curve.diameter_si or 0.0) for c in others)


def _specific(
    fit: Fit,
    best: Best,
    fits: Sequence[Fit],
    pump: Pump | None,
) -> tuple[dict[str, float | None], list[Finding]]:
    curve, flow = fit.curve, best[0]
    speed = curve.speed_si or (pump.speed_si if pump is not None else None)
    head = at_flow(fit, flow)
    if speed is None or head is None or head.value <= 0 or flow.value <= 0:
        return {}, []
    said = []
    stages = curve.stages or (pump.stages if pump is not None else None)
    if stages is None:
        stages = 1
        said.append(
            finding(
                "info",
                "derived.stages-assumed",
                curve,
                "The number of stages is not known; the specific speed is that of one stage.",
                "Give the pump's stages in the notes.",
            )
        )
    nq = specific_speed(speed, flow.value, head.value / stages)
    u = _relative(flow, 0.5, head, -0.75)
    out: dict[str, float | None] = {
        "nq": nq,
        "u_nq": None if u is None else nq * u,
        "us": nq * NQ_TO_US,
        "u_us": None if u is None else nq * NQ_TO_US * u,
        "type_number": nq * NQ_TO_TYPE_NUMBER,
        "u_type_number": None if u is None else nq * NQ_TO_TYPE_NUMBER * u,
    }
    npsh_fit = companion(curve, ("npsh_required",), fits)
    npsh = at_flow(npsh_fit, flow) if npsh_fit is not None else None
    if npsh is not None and npsh.value > 0:
        eyes = pump.suction_sides if pump is not None else None
        if eyes is None:
            eyes = 1
            said.append(
                finding(
                    "info",
                    "derived.eyes-assumed",
                    curve,
                    "The number of suction sides is not known; the suction specific speed is that "
                    "of one impeller eye.",
                    "Give the pump's suction_sides in the notes.",
                )
            )
        nss = suction_specific_speed(speed, flow.value / eyes, npsh.value)
        u = _relative(flow, 0.5, npsh, -0.75)
        out |= {"suction": nss, "u_suction": None if u is None else nss * u}
        out |= {"suction_us": nss * NQ_TO_US}
    return out, said


def _relative(a: Point, power_a: float, b: Point, power_b: float) -> float | None:
    """Relative standard uncertainty of aᵖ·bʳ with shared causes taken once."""
    scaled = Point(
        0.0, None if a.causes is None else {n: power_a * e / a.value for n, e in a.causes.items()}
    )
    other = Point(
        0.0, None if b.causes is None else {n: power_b * e / b.value for n, e in b.causes.items()}
    )
    return scaled.plus(other, 1.0).u
