"""What the pumps together do: lines of head, power, efficiency, NPSHr against the total flow.

A :class:`Line` carries, beside its value, what one standard deviation of each independent cause
does to it. Causes have names, so that what two lines share (the errors of a flow axis) is drawn
once for both.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.models import evaluate, power
from curvefit.records import Curve, Fit

__all__ = ["Arrangement", "Line", "line_of_fit", "line_of_points"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Arrangement:
    """pumps in parallel and in series, and the speed ratio to the charted speed."""

    parallel: int = 1
    series: int = 1
    speed_ratio: float = 1.0


@dataclass(frozen=True, slots=True)
class Line:
    """One line over the total flow, SI.

    value : flow (n,) → (n,); causes : name → (flow (n,) → (n,) change for one standard deviation);
    range : flows within which it was read.
    """

    quantity: str
    value: Callable[[Array], Array]
    causes: dict[str, Callable[[Array], Array]]
    range: tuple[float, float]

    def arranged(self, how: Arrangement) -> Line:
        """The line of pumps in parallel, in series and at another speed.

        Notes
        -----
        One pump at speed ratio r and flow q: H = r²·H₀(q/r), P = r³·P₀(q/r), η and NPSHr as
        η₀(q/r), r²·NPSHr₀(q/r) (affinity laws; η held). In parallel q = Q/n, in series heads add.
        Powers add up over all pumps.
        """
        r, n = how.speed_ratio, how.parallel
        power = {
            "head": r**2 * how.series,
            "differential_pressure": r**2 * how.series,
            "shaft_power": r**3 * how.series * n,
            "input_power": r**3 * how.series * n,
            "npsh_required": r**2,
        }.get(self.quantity, 1.0)

        def scaled(line: Callable[[Array], Array]) -> Callable[[Array], Array]:
            return lambda flow: np.asarray(power * line(np.asarray(flow) / (n * r)))

        causes = {name: scaled(effect) for name, effect in self.causes.items()}
        low, high = self.range
        return Line(self.quantity, scaled(self.value), causes, (low * n * r, high * n * r))

    def standard_uncertainty(self, flow: Array) -> Array:
        """Standard uncertainty at each flow, shape (n,): all causes, taken as independent."""
        effects = [effect(flow) ** 2 for effect in self.causes.values()]
        return np.sqrt(np.sum(effects, axis=0)) if effects else np.zeros(len(flow))

    def draw(self, flow: Array, z: dict[str, Array]) -> Array:
        """Values at flows (n,) for draws z[name] of shape (m,): shape (m, n)."""
        total = np.broadcast_to(self.value(flow), (len(next(iter(z.values()))), len(flow))).copy()
        for name, effect in self.causes.items():
            total += z[name][:, None] * effect(flow)[None, :]
        return total


def line_of_fit(fit: Fit) -> Line:
    """The line of a fitted curve: its equation, its trace errors and those of its axes.

    The causes of the axes are named after them, so that curves of one axis share their error.
    """
    grid, curve = fit.band.flow_si, fit.curve

    def value(flow: Array) -> Array:
        if fit.coefficients is not None:
            return evaluate(fit.coefficients, flow)
        if fit.family == "power":
            constant, factor, exponent = fit.parameters.values()
            sign = -1.0 if "a" in fit.parameters else 1.0
            return power(flow, constant, sign * factor, exponent)
        return np.interp(flow, grid, fit.band.value_si)

    def on_grid(effect: Array) -> Callable[[Array], Array]:
        return lambda flow: np.interp(flow, grid, effect)

    causes: dict[str, Callable[[Array], Array]] = {}
    if fit.factors is not None:
        causes |= {f"{fit.name} line {i}": on_grid(row) for i, row in enumerate(fit.factors)}
    if fit.calibration is not None:
        causes |= dict(zip(_axis_names(curve), map(on_grid, fit.calibration), strict=True))
    return Line(curve.quantity, value, causes, fit.flow_range_si)


def line_of_points(curve: Curve) -> Line:
    """The line through a curve's own points, straight between them, without an equation.

    The trace error counts as one cause for the whole line, which overstates it a little where
    the line's errors change sign along it.
    """
    flow_si, value_si = curve.flow_si, curve.value_si

    def along(values: Array) -> Callable[[Array], Array]:
        return lambda flow: np.interp(flow, flow_si, values)

    causes: dict[str, Callable[[Array], Array]] = {}
    own = curve.trace_sigma_si if curve.trace_sigma_si is not None else curve.sigma_si
    if own is not None:
        causes[f"{curve.name} line"] = along(own)
    if curve.calibration_si is not None:
        causes |= dict(zip(_axis_names(curve), map(along, curve.calibration_si.T), strict=True))
    return Line(curve.quantity, along(value_si), causes, (float(flow_si[0]), float(flow_si[-1])))


def _axis_names(curve: Curve) -> list[str]:
    """Names of the two independent errors of the flow axis and of the value axis."""
    return [
        f"axis {axis or curve.name + side} {i}"
        for axis, side in ((curve.flow_axis, " flow"), (curve.value_axis, " value"))
        for i in (0, 1)
    ]
