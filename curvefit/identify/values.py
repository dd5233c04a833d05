"""Pixels of a trace → flow and value in SI, with every cause of uncertainty carried along."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.identify.inside import OVER
from curvefit.records import Axis, Trace
from curvefit.units import unit

__all__ = ["Values", "axis_factor", "values"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Values:
    """Flow and value of every point of a line, SI; shapes (n,), calibration (n, 4)."""

    flow: Array
    value: Array
    sigma: Array
    trace_sigma: Array
    calibration: Array
    correlation: float
    flags: NDArray[np.uint8]


def axis_factor(axis: Axis) -> float:
    """What turns the values of an axis into SI; 1 where its unit is not known."""
    return unit(axis.unit).factor if axis.unit else 1.0


def values(trace: Trace, flow_axis: Axis, value_axis: Axis, *, iso: bool = False) -> Values:
    """The line in SI against one flow axis and one value axis.

    Parameters
    ----------
    trace : Trace
    flow_axis, value_axis : Axis
        With known units.
    iso : bool
        The line is not a function of flow: points keep their order along the line.

    Returns
    -------
    Values
        Flow strictly increasing unless `iso`.

    Notes
    -----
    With v(t) the value at the fraction t of the box side and m = dv/dq the slope of the line, a
    trace error σ across the line moves the value at fixed flow by σ √(1 + (dy/dx)²) in pixels.
    One standard deviation of an independent axis error e moves the value by ∂v/∂e (value axis)
    or −m ∂q/∂e (flow axis). On an iso line, which may run upright, the value at fixed flow is
    not defined: σ itself, in value units, is taken as the uncertainty of the value, and the
    slope is held at one box pixel in one.
    """
    flat, keep = _ordered(trace, iso)
    sigma_px, flags = trace.sigma[keep], trace.flags[keep]
    width, height = trace.panel.warp.size
    across, up = flat[:, 0] / width, 1.0 - flat[:, 1] / height
    flow, flow_rate = _si(flow_axis, across)
    value, value_rate = _si(value_axis, up)

    dx, dy = _direction(flat, sigma_px, iso)
    if iso:
        steep = np.clip(np.divide(dy, dx, out=np.full_like(dx, 1e9), where=dx != 0), -1, 1)
        across_line = np.ones_like(dx)
    else:
        steep = dy / np.where(dx == 0, 1e-9, dx)
        across_line = np.hypot(1.0, steep)
    trace_sigma = sigma_px * across_line / height * np.abs(value_rate)
    slope = -steep * width / height * value_rate / flow_rate
    calibration = np.c_[
        -slope[:, None] * _axis_errors(flow_axis, across, flow_rate),
        _axis_errors(value_axis, up, value_rate),
    ]
    along = float(np.median(np.abs(dx) / np.maximum(np.hypot(dx, dy), 1e-12)))
    reach = 1.0 if iso else along
    correlation = trace.correlation * reach / width * float(np.median(np.abs(flow_rate)))
    if not iso and len(flow) > 1 and flow[-1] < flow[0]:
        back = slice(None, None, -1)
        flow, value, trace_sigma, flags = flow[back], value[back], trace_sigma[back], flags[back]
        calibration = calibration[back]
    flow, value = _from_zero(flow, flow_axis), _from_zero(value, value_axis)
    sigma = np.sqrt(trace_sigma**2 + (calibration**2).sum(1))
    return Values(flow, value, sigma, trace_sigma, calibration, correlation, flags)


def _ordered(trace: Trace, iso: bool) -> tuple[Array, NDArray[np.intp]]:
    """The points of a function of flow from left to right, a column once; an iso line as it is."""
    index = np.arange(len(trace.flat))
    if not iso and len(index) > 1 and not (np.diff(trace.flat[:, 0]) > 0).all():
        index = np.argsort(trace.flat[:, 0], kind="stable")
        x = trace.flat[index, 0]
        index = index[np.r_[True, np.diff(x) > 1e-6]]
    return trace.flat[index], index


def _si(axis: Axis, t: Array) -> tuple[Array, Array]:
    """Values in SI at fractions of the box side, and their change with the fraction."""
    factor = axis_factor(axis)
    value = axis.value(t) * factor
    if axis.scale == "log":
        return value, np.log(10.0) * axis.slope * value
    return value, np.full(len(value), axis.slope * axis.factor * factor)


def _from_zero(value: Array, axis: Axis) -> Array:
    """Values of an axis that starts at zero, without the hair by which some fall below it."""
    start, end = axis.value(np.array([0.0, 1.0])) * axis_factor(axis)
    hair = OVER * abs(end - start)
    below = (value < 0) & (value > -2 * hair)
    if abs(start) > hair or not below.any() or (axis.along_flow and below.sum() > 1):
        return value
    return np.where(below, 0.0, value)


def _axis_errors(axis: Axis, t: Array, rate: Array) -> Array:
    """Change of the value, (n, 2), for one deviation of each principal error of the axis."""
    spread, turn = np.linalg.eigh(axis.covariance)
    root = turn * np.sqrt(np.clip(spread, 0.0, None))
    return np.asarray((rate / axis.slope)[:, None] * (np.c_[np.ones_like(t), t] @ root))


def _direction(flat: Array, sigma: Array, iso: bool) -> tuple[Array, Array]:
    """Direction of the line at each point: differences over a stretch that outweighs the noise."""
    if len(flat) < 2:
        return np.ones(len(flat)), np.zeros(len(flat))
    step = float(np.median(np.hypot(*np.diff(flat, axis=0).T))) or 1.0
    reach = max(1, min(round(max(4.0, 20.0 * float(np.median(sigma))) / step), len(flat) // 6))
    i = np.arange(len(flat))
    low, high = np.maximum(i - reach, 0), np.minimum(i + reach, len(flat) - 1)
    change = flat[high] - flat[low]
    return change[:, 0], change[:, 1]
