"""How well the shape of a line suits each quantity of a pump."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Shape", "misfit", "shape"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Shape:
    """A line in a few numbers, free of units.

    rise : (last − first) / range; peak, dip : where maximum and minimum lie, 0–1 along the line;
    bow : second-degree part / range, positive where it opens upwards;
    shut_off : value carried back to zero flow / maximum, None where the line starts too late;
    low, high : extreme values, SI.
    """

    rise: float
    peak: float
    dip: float
    bow: float
    shut_off: float | None
    low: float
    high: float


def shape(flow: Array, value: Array) -> Shape:
    """The shape of a line from its flow and value, SI, shape (n,)."""
    order = np.argsort(flow, kind="stable")
    q, v = flow[order], value[order]
    span = float(np.ptp(v)) or 1e-12
    s = 2 * (q - q[0]) / max(float(q[-1] - q[0]), 1e-12) - 1
    c = np.polynomial.polynomial.polyfit(s, v, min(2, len(s) - 1))
    bow = float(c[2]) if len(c) > 2 else 0.0
    shut_off = None
    if q[-1] > 0 and -0.05 * q[-1] < q[0] < 0.4 * q[-1] and v.max() > 0:
        back = np.polynomial.polynomial.polyfit(q / q[-1], v, min(4, len(q) - 1))
        shut_off = float(back[0] / v.max())
    return Shape(
        rise=float((v[-1] - v[0]) / span),
        peak=float((s[int(np.argmax(v))] + 1) / 2),
        dip=float((s[int(np.argmin(v))] + 1) / 2),
        bow=bow / span,
        shut_off=shut_off,
        low=float(v.min()),
        high=float(v.max()),
    )


def misfit(seen: Shape, quantity: str) -> float:
    """How badly a shape suits a quantity: 0 as it should be, 1 unusual, 3 and more hardly."""
    rule = {
        "head": _head,
        "differential_pressure": _head,
        "efficiency": _efficiency,
        "overall_efficiency": _efficiency,
        "shaft_power": _power,
        "input_power": _power,
        "npsh_required": _npsh,
    }.get(quantity)
    return rule(seen) if rule else 1.0


def _head(s: Shape) -> float:
    """Falls from a maximum at or near shut-off, bowed downwards."""
    cost = 3.0 * max(s.rise + 0.4, 0.0) / 1.4 if s.rise > -0.4 else 0.0
    cost += 2.0 * (s.peak > 0.6)
    cost += 0.5 * (s.bow > 0.15)
    return cost + 2.0 * (s.high <= 0)


def _efficiency(s: Shape) -> float:
    """Rises from nothing at shut-off, bowed downwards, to a peak inside; never above one."""
    cost = 0.0
    if s.shut_off is not None:
        cost += 3.0 * min(max(abs(s.shut_off) - 0.15, 0.0) / 0.35, 1.0)
    cost += 2.0 * (s.peak < 0.35) + 1.5 * (s.bow > 0.08)
    cost += 8.0 * (s.high > 1.02) + 1.5 * (s.high < 0.15)
    return cost


def _power(s: Shape) -> float:
    """Rises slowly from a part of its maximum at shut-off (falls only in axial machines)."""
    cost = 1.5 * (s.rise < -0.3)
    if s.shut_off is not None:
        cost += 2.0 * min(max(0.15 - s.shut_off, 0.0) / 0.1, 1.0)
    return cost + 0.4 * (s.bow < -0.35)


def _npsh(s: Shape) -> float:
    """Rises towards high flow, bowed upwards; a few metres."""
    cost = 2.5 * (s.rise < 0.2) + 1.5 * (s.dip > 0.7)
    cost += 2.0 * min(max(-s.bow - 0.03, 0.0) / 0.1, 1.0)
    if s.shut_off is not None:
        cost += 1.0 * (s.shut_off < 0.02)
    return cost + 1.5 * (s.high > 25.0) + 0.5 * (s.high > 15.0)
