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
from curvefit.laws import NQ_TO_TYPE_NUMBER, NQ_TO_US, specific_speed, suction_specific_speed
from curvefit.models import evaluate
from curvefit.records import Curve, Finding, Fit, Pump

__all__ = ["Point", "at_flow", "best_point", "derive"]

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


def _rows(fit: Fit) -> dict[str, Array] | None:
    """The fit's causes on its grid by name; axes by the axis's name, so that curves share them."""
    if fit.factors is None:
        return None
    rows = {f"{fit.name} {i}": row for i, row in enumerate(fit.factors)}
    if fit.calibration is not None:
        curve = fit.curve
        names = [
            f"axis {axis or curve.name + side} {i}"
            for axis, side in ((curve.flow_axis, " flow"), (curve.value_axis, " value"))
            for i in (0, 1)
        ]
        rows |= dict(zip(names, fit.calibration, strict=True))
    return rows


def value_at(fit: Fit, flow: float) -> float:
    """The fitted value at one flow."""
    if fit.coefficients is not None:
        return float(evaluate(fit.coefficients, flow))
    return float(np.interp(flow, fit.band.flow_si, fit.band.value_si))


def at_flow(fit: Fit, flow: Point | float) -> Point | None:
    """The value of a fit at a flow that may itself be uncertain; None outside its range."""
    place = flow if isinstance(flow, Point) else Point(flow, {})
    low, high = fit.flow_range_si
    slack = 1e-9 * (high - low)
    if not low - slack <= place.value <= high + slack:
        return None
    grid = fit.band.flow_si
    rows = _rows(fit)
    causes = (
        None
        if rows is None
        else {n: float(np.interp(place.value, grid, row)) for n, row in rows.items()}
    )
    slope = float(np.interp(place.value, grid, np.gradient(fit.band.value_si, grid)))
    return Point(value_at(fit, place.value), causes).plus(place, slope)


def best_point(fit: Fit) -> Point | None:
    """The flow of the largest value of a fit; None where that lies at an end of its range.

    Notes
    -----
    At the peak q* the slope is zero: an error e(q) of the curve moves it by −e′(q*)/v″(q*).
    """
    low, high = fit.flow_range_si
    inside = (fit.band.flow_si >= low) & (fit.band.flow_si <= high)
    grid, value = fit.band.flow_si[inside], fit.band.value_si[inside]
    top = int(np.argmax(value))
    if len(grid) < 7 or top < 2 or top > len(grid) - 3:
        return None
    around = slice(max(0, top - 3), top + 4)
    step = float(grid[1] - grid[0])
    _, b, a = np.polynomial.polynomial.polyfit((grid[around] - grid[top]) / step, value[around], 2)
    if fit.coefficients is not None:
        slope = fit.coefficients[1:] * np.arange(1, len(fit.coefficients))
        flow = float(grid[top])
        for _ in range(20):
            bend = float(evaluate(slope[1:] * np.arange(1, len(slope)), flow))
            move = -float(evaluate(slope, flow)) / bend if bend < 0 else 0.0
            flow = float(np.clip(flow + move, grid[top - 1], grid[top + 1]))
            if abs(move) < 1e-14 * high:
                break
    else:
        flow = float(grid[top] - step * b / (2 * a)) if a < 0 else float(grid[top])
        bend = float(2 * a / step**2)
    if bend >= 0:
        return None
    rows = _rows(fit)
    if rows is None:
        return Point(flow, None)
    full = fit.band.flow_si
    rates = {n: float(np.interp(flow, full, np.gradient(row, full))) for n, row in rows.items()}
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
        said: list[Finding] = []
        curve = fit.curve
        if _from_shut_off(fit):
            derived["shut_off"] = _shut_off(fit)
        best = _best_of(fit, fits)
        if best is not None:
            derived["bep"] = best[1]
            if curve.quantity == "head" and _largest(curve, fits):
                speeds, said = _specific(fit, best, fits, known.get(curve.pump))
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


def _best_of(fit: Fit, fits: Sequence[Fit]) -> tuple[Point, dict[str, float | None]] | None:
    """The best efficiency point of the curve's impeller and what the pump does there."""
    curve = fit.curve
    if len(fit.curves) != 1 or curve.quantity not in ("head", *EFFICIENCIES):
        return None
    source = fit if curve.quantity in EFFICIENCIES else companion(curve, EFFICIENCIES[:1], fits)
    flow = best_point(source) if source is not None else None
    if source is None or flow is None:
        return None
    known: dict[str, float | None] = {"flow_si": flow.value, "u_flow_si": flow.u}
    rows = [("efficiency", source)]
    for quantity in ("head", "shaft_power", "npsh_required"):
        other = companion(curve, (quantity,), fits)
        if other is not None:
            rows.append((quantity, other))
    for quantity, other in rows:
        at = at_flow(other, flow)
        if at is not None:
            known |= {f"{quantity}_si": at.value, f"u_{quantity}_si": at.u}
    return flow, known


def _largest(curve: Curve, fits: Sequence[Fit]) -> bool:
    """Whether no head curve of the pump has a larger impeller (or a higher speed)."""
    others = [f.curve for f in fits if f.curve.quantity == "head" and f.curve.pump == curve.pump]
    if curve.diameter_si is None and len(others) > 1 and any(c.diameter_si for c in others):
        return False
    return all((c.diameter_si or 0.0) <= (curve.diameter_si or 0.0) for c in others)


def _specific(
    fit: Fit,
    best: tuple[Point, dict[str, float | None]],
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
