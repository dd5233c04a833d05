"""Records in engineering quantities, SI: curves, fits, duty points, and the reading of a page."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from curvefit.records.base import Array, By, Finding, Record, hold
from curvefit.records.chart import Page, Panel, Trace

__all__ = ["Band", "Curve", "DutyPoint", "Fit", "Interval", "Pump", "Reading"]


@dataclass(frozen=True, slots=True)
class Pump(Record):
    """What the page says of the pump: name, rated speed, stages, suction sides, liquid."""

    name: str
    speed_si: float | None = None
    speed_basis: Literal["printed", "synchronous"] | None = None
    stages: int | None = None
    suction_sides: int | None = None
    density_si: float | None = None
    liquid: str | None = None
    by: By = "read"


@dataclass(frozen=True, slots=True, eq=False)
class Curve(Record):
    """One line of a chart in engineering quantities, or a table of measured points (trace None).

    flow_si, value_si : (n,); flow strictly increasing except on iso lines.
    sigma_si : (n,) standard uncertainty of value, all causes; None where unknown (measured points).
    trace_sigma_si : (n,) the part of the line alone.
    calibration_si : (n, 4) change of value for one standard deviation of each of four independent
        errors, two of the flow axis then two of the value axis: shared by all curves on the axis.
    correlation_si : length in flow over which trace errors stay alike.
    quantity : a key of QUANTITIES; on iso lines value is the head and `level` the constant.
    flow_unit, unit : UCUM codes of the printed axes; printed_* keep the words of the page.
    diameter_text, label : as printed. speed_unit, level_unit : "/min", "Hz", "%" …
    guessed : names of the fields above that are a guess.
    """

    name: str
    quantity: str
    flow_si: Array
    value_si: Array
    flow_unit: str
    unit: str
    trace: Trace | None = None
    panel: Panel | None = None
    flow_axis: str | None = None
    value_axis: str | None = None
    pump: str = "1"
    sigma_si: Array | None = None
    trace_sigma_si: Array | None = None
    calibration_si: Array | None = None
    correlation_si: float | None = None
    flags: NDArray[np.uint8] | None = None
    diameter_si: float | None = None
    diameter_unit: str = "mm"
    speed_si: float | None = None
    speed_unit: str = "/min"
    speed_ratio: float | None = None
    stages: int | None = None
    level_si: float | None = None
    level_unit: str = "%"
    npsh_basis: str = "not stated"
    label: str = ""
    guessed: tuple[str, ...] = ()
    by: By = "read"
    findings: tuple[Finding, ...] = ()

    def __post_init__(self) -> None:
        n = len(self.flow_si)
        hold(self, "flow_si", float, (None,))
        for name in ("value_si", "sigma_si", "trace_sigma_si"):
            hold(self, name, float, (n,))
        hold(self, "calibration_si", float, (n, 4))
        hold(self, "flags", np.uint8, (n,))

    @property
    def iso(self) -> bool:
        """Whether this is a line of equal efficiency, power or NPSH."""
        return self.quantity.startswith("iso_")


@dataclass(frozen=True, slots=True, eq=False)
class Band(Record):
    """A band about a fitted curve on a flow grid, SI.

    kind : "pointwise" or "simultaneous" confidence of the curve, "prediction" of a new point.
    low, high : None where the band is not known.
    """

    flow_si: Array
    value_si: Array
    low_si: Array | None
    high_si: Array | None
    kind: Literal["pointwise", "simultaneous", "prediction"]
    confidence: float

    def __post_init__(self) -> None:
        hold(self, "flow_si", float, (None,))
        for name in ("value_si", "low_si", "high_si"):
            hold(self, name, float, (len(self.flow_si),))


@dataclass(frozen=True, slots=True, eq=False)
class Fit(Record):
    """An equation fitted to one curve or to a family, SI.

    coefficients : plain, constant term first, of value_si in flow_si (polynomials), else None.
    parameters : name → value, SI, for the other families.
    covariance : (k, k) of the coefficients or parameters, all causes but the calibration; None
        where unknown. factors : (m, grid) the trace and equation errors on the band's flow grid,
        one row an independent unit-variance cause; calibration : (4, grid) likewise for the axes
        (flow axis two, value axis two), to be propagated jointly over curves of the same axes.
    flow_range_si : the fitted range; outside it nothing is given.
    derived : "bep", "shut_off", "specific_speed" → dicts of SI numbers and their u_….
    candidates : (name, criterion, note) of each model tried; reason : why this one.
    """

    name: str
    curves: tuple[Curve, ...]
    family: Literal["polynomial", "power", "affinity", "piecewise"]
    degree: int | None
    flow_range_si: tuple[float, float]
    band: Band
    coefficients: Array | None = None
    parameters: dict[str, float] = field(default_factory=dict)
    covariance: Array | None = None
    factors: Array | None = None
    calibration: Array | None = None
    residual_rms_si: float = 0.0
    effective_points: float = 0.0
    derived: dict[str, dict[str, float | None]] = field(default_factory=dict)
    candidates: tuple[tuple[str, float, str], ...] = ()
    reason: str = ""
    knots_si: Array | None = None
    findings: tuple[Finding, ...] = ()

    def __post_init__(self) -> None:
        hold(self, "coefficients", float, (None,))
        hold(self, "covariance", float, (None, None))
        hold(self, "factors", float, (None, len(self.band.flow_si)))
        hold(self, "calibration", float, (4, len(self.band.flow_si)))
        hold(self, "knots_si", float, (None, None))

    @property
    def curve(self) -> Curve:
        """The fitted curve (the first one of a family)."""
        return self.curves[0]


@dataclass(frozen=True, slots=True)
class Interval(Record):
    """A value with its 95 % interval, SI; low and high are None where they are not known."""

    value: float
    low: float | None = None
    high: float | None = None


@dataclass(frozen=True, slots=True)
class DutyPoint(Record):
    """One crossing of pump and system, SI; None where the chart or the system does not tell.

    shaft_power_si is read from the power curve, hydraulic_power_si is ρgQH, computed_power_si is
    ρgQH/η. stable : a disturbance of the flow dies away. share_of_bep : flow over BEP flow.
    energy_si : energy to the shaft per volume pumped [J/m³]; energy_year_si [J].
    """

    flow_si: Interval
    head_si: Interval
    stable: bool
    efficiency_si: Interval | None = None
    shaft_power_si: Interval | None = None
    computed_power_si: Interval | None = None
    hydraulic_power_si: float | None = None
    npsh_required_si: Interval | None = None
    npsh_available_si: Interval | None = None
    share_of_bep: float | None = None
    energy_si: float | None = None
    energy_year_si: float | None = None


@dataclass(frozen=True, slots=True, eq=False)
class Reading(Record):
    """All that was read from one page of a chart."""

    page: Page
    panels: tuple[Panel, ...] = ()
    traces: tuple[Trace, ...] = ()
    curves: tuple[Curve, ...] = ()
    pumps: tuple[Pump, ...] = ()
    fits: tuple[Fit, ...] = ()
    findings: tuple[Finding, ...] = ()
    notes: Any = None
    seconds: dict[str, float] = field(default_factory=dict)
