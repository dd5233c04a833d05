"""Curves and fits as they leave: in the units chosen, thinned if asked, with their findings.

Made once per reading, so that the JSON, the CSV and the report can never disagree.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from curvefit.models import evaluate, monotone_cubic, power, rescale, rescale_covariance
from curvefit.records import Curve, Finding, Fit, Pump, Reading, flag_names
from curvefit.units import Unit
from curvefit.write.derived import derived_out
from curvefit.write.out_units import OutUnits, choose_units, density_finding, out_units
from curvefit.write.rescaled import rescaled_parameters

__all__ = ["CurveOut", "FitOut", "Outgoing", "outgoing"]

Array = NDArray[np.float64]
Z95 = 1.959963984540054  #: 95 % of a normal distribution lie within ± this many sigma


@dataclass(frozen=True, slots=True, eq=False)
class CurveOut:
    """One curve in the units in which it leaves; arrays of shape (n,), NaN where unknown.

    xy : (n, 2) px of the stored image, or None for curves that were not traced.
    calibration : (n, 4), see Curve.
    """

    curve: Curve
    units: OutUnits
    pump: Pump | None
    flow: Array
    value: Array
    u: Array
    trace_u: Array
    calibration: Array | None
    correlation: float | None
    flags: tuple[str, ...]
    xy: Array | None
    findings: tuple[Finding, ...]

    @property
    def speed_si(self) -> float | None:
        """The curve's own speed, else its pump's [1/s]."""
        if self.curve.speed_si is not None:
            return self.curve.speed_si
        rated = self.pump.speed_si if self.pump is not None else None
        if rated is not None and self.curve.speed_ratio is not None:
            return rated * self.curve.speed_ratio
        return rated


@dataclass(frozen=True, slots=True, eq=False)
class FitOut:
    """One fit in the units of its first curve; low, high NaN where unknown."""

    fit: Fit
    units: OutUnits
    flow: Array
    value: Array
    low: Array
    high: Array
    coefficients: Array | None
    covariance: Array | None
    parameters: dict[str, float]
    knots: Array | None
    flow_range: tuple[float, float]
    residual_rms: float
    derived: dict[str, dict[str, dict[str, Any]]]

    def at(self, flow: Array) -> Array:
        """Values of the equation at flows in its range; the band's centre where it has none."""
        if self.coefficients is not None:
            return evaluate(self.coefficients, flow)
        if self.fit.family == "power" and len(self.parameters) == 3:
            constant, factor, n = self.parameters.values()
            sign = -1.0 if "H0" in self.parameters else 1.0
            return power(flow, constant, sign * factor, n)
        if self.knots is not None:
            return monotone_cubic(self.knots[:, 0], self.knots[:, 1], flow)
        return np.interp(flow, self.flow, self.value)


@dataclass(frozen=True, slots=True, eq=False)
class Outgoing:
    """All curves, fits and findings of a reading on their way out.

    derived : curves that stand on no line of the page but were made of others for a fit (the
    efficiency of a hill chart's impellers).
    """

    reading: Reading
    curves: tuple[CurveOut, ...]
    derived: tuple[CurveOut, ...]
    fits: tuple[FitOut, ...]
    findings: tuple[Finding, ...]
    points: int | None

    def fits_of(self, curve: Curve) -> tuple[FitOut, ...]:
        """The fits of one curve alone."""
        return tuple(
            f for f in self.fits if len(f.fit.curves) == 1 and f.fit.curve.name == curve.name
        )


def outgoing(
    reading: Reading, units: Mapping[str, str | None] | None = None, points: int | None = None
) -> Outgoing:
    """A reading's curves and fits as they leave; see :func:`curvefit.write.write`."""
    chosen = choose_units(units)
    pumps = {p.name: p for p in reading.pumps}
    stated: list[Finding] = []

    def leaving(curve: Curve) -> CurveOut:
        pump = pumps.get(curve.pump)
        out = out_units(curve, chosen, pump)
        if out.density is not None:
            stated.append(density_finding(curve, out, bool(pump and pump.density_si)))
        return _curve_out(reading, curve, out, pump, points)

    curves = tuple(leaving(c) for c in reading.curves)
    read = {c.name for c in reading.curves}
    made = {c.name: c for f in reading.fits for c in f.curves if c.name not in read}
    derived = tuple(leaving(c) for c in made.values())
    fits = tuple(_fit_out(f, chosen, pumps) for f in reading.fits)
    return Outgoing(reading, curves, derived, fits, reading.findings + tuple(stated), points)


def findings_of(curve: Curve, findings: Sequence[Finding]) -> tuple[Finding, ...]:
    """Findings about a curve, its axes, or its whole panel."""
    panel = curve.panel.name if curve.panel is not None else None
    axes = (curve.flow_axis, curve.value_axis)

    def about(f: Finding) -> bool:
        w = f.where
        if w.curve is not None:
            return w.curve == curve.name
        if w.axis is not None:
            return w.axis in axes
        return w.panel is not None and w.panel == panel

    return tuple(f for f in findings if about(f))


def _curve_out(
    reading: Reading, curve: Curve, units: OutUnits, pump: Pump | None, points: int | None
) -> CurveOut:
    keep = _kept(curve, points)
    n = len(curve.flow_si)
    flags = curve.flags if curve.flags is not None else np.zeros(n, np.uint8)
    trace = curve.trace
    xy = None
    if trace is not None and len(trace.flat) == n:
        xy = reading.page.to_stored(trace.xy)[keep]

    def leaving(si: Array | None) -> Array:
        return np.full(len(keep), np.nan) if si is None else units.values(si[keep])

    return CurveOut(
        curve,
        units,
        pump,
        units.flows(curve.flow_si[keep]),
        units.values(curve.value_si[keep]),
        leaving(curve.sigma_si),
        leaving(curve.trace_sigma_si),
        None if curve.calibration_si is None else units.values(curve.calibration_si[keep]),
        None if curve.correlation_si is None else curve.correlation_si / units.flow_si,
        tuple(flag_names(int(b)) for b in flags[keep]),
        xy,
        findings_of(curve, reading.findings),
    )


def _kept(curve: Curve, points: int | None) -> NDArray[np.intp]:
    """Indices of the points that leave: all, or `points` of them evenly spread, ends kept.

    Traced points are picked, never interpolated, so that each still has its pixel.
    """
    n = len(curve.flow_si)
    if points is None or points >= n:
        return np.arange(n)
    along = curve.flow_si
    if curve.iso or bool(np.any(np.diff(along) <= 0)):
        spans = [max(float(np.ptp(a)), 1e-300) for a in (curve.flow_si, curve.value_si)]
        steps = np.hypot(np.diff(curve.flow_si) / spans[0], np.diff(curve.value_si) / spans[1])
        along = np.r_[0.0, np.cumsum(steps)]
    wanted = np.linspace(along[0], along[-1], max(points, 2))
    near = np.clip(np.searchsorted(along, wanted), 1, n - 1)
    near -= wanted - along[near - 1] < along[near] - wanted
    return np.unique(near)


def _fit_out(fit: Fit, chosen: Mapping[str, Unit], pumps: Mapping[str, Pump]) -> FitOut:
    units = out_units(fit.curve, chosen, pumps.get(fit.curve.pump))
    band = fit.band
    nothing = np.full(len(band.flow_si), np.nan)
    low, high = (nothing if a is None else units.values(a) for a in (band.low_si, band.high_si))
    coefficients, covariance, parameters = fit.coefficients, fit.covariance, fit.parameters
    if coefficients is not None:
        coefficients = rescale(coefficients, units.flow_si, units.value_si)
        if covariance is not None:
            covariance = rescale_covariance(covariance, units.flow_si, units.value_si)
    else:
        parameters, covariance = rescaled_parameters(
            parameters, covariance, units.flow_si, units.value_si
        )
    knots = fit.knots_si
    if knots is not None:
        knots = np.c_[units.flows(knots[:, 0]), units.values(knots[:, 1])]
    low_flow, high_flow = fit.flow_range_si
    return FitOut(
        fit,
        units,
        units.flows(band.flow_si),
        units.values(band.value_si),
        low,
        high,
        coefficients,
        covariance,
        dict(parameters),
        knots,
        (low_flow / units.flow_si, high_flow / units.flow_si),
        fit.residual_rms_si / units.value_si,
        derived_out(
            fit.derived,
            chosen,
            {"flow": fit.curve.flow_unit, fit.curve.quantity: fit.curve.unit},
        ),
    )
