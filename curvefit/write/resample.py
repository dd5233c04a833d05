"""Points between which straight lines stay close to a curve: few for a tolerance, or the best N."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import NDArray

__all__ = ["best_points", "common_points", "falling", "fewest_points", "largest_gap"]

Array = NDArray[np.float64]
_FINE = 4001  #: places at which the distance from the curve is looked at


def fewest_points(curves: Sequence[Callable[[Array], Array]], low: float, high: float,
                  tolerances: Sequence[float]) -> Array:  # fmt: skip
    """The fewest flows at which points of every curve, joined by lines, keep to its tolerance.

    Parameters
    ----------
    curves : functions of flow (n,) → values (n,)
    low, high : range of flow; both ends are among the flows
    tolerances : largest distance of the joined lines from each curve [unit of its values]

    Returns
    -------
    (m,) flows, strictly increasing.

    Notes
    -----
    From each point the farthest next one is taken. The corners lie on the curve; where it bends
    one way only, no other choice of such corners needs fewer.
    """
    x = np.linspace(low, high, _FINE)
    ys = [np.asarray(curve(x)) for curve in curves]
    chosen, last = [0], _FINE - 1
    while chosen[-1] < last:
        chosen.append(_farthest(x, ys, tolerances, chosen[-1], last))
    return x[chosen]


def best_points(curves: Sequence[Callable[[Array], Array]], low: float, high: float,
                count: int, spans: Sequence[float] | None = None) -> Array:  # fmt: skip
    """The `count` flows whose points, joined by lines, keep closest to all curves.

    Closeness is relative to each curve's own range of values, or to `spans`.

    Returns
    -------
    (count,) flows, strictly increasing; low and high are among them.
    """
    x = np.linspace(low, high, _FINE)
    ys = [np.asarray(curve(x)) for curve in curves]
    scales = np.array([max(float(np.ptp(y)), 1e-300) for y in ys] if spans is None else spans)
    close, far = 1e-9, 1.0
    for _ in range(16):  # halving the logarithm: far ends within a thousandth of the best
        middle = float(np.sqrt(close * far))
        if len(fewest_points(curves, low, high, list(middle * scales))) > count:
            close = middle
        else:
            far = middle
    return _filled(fewest_points(curves, low, high, list(far * scales)), count)


def common_points(flows: Sequence[Array]) -> Array:
    """One strictly increasing flow grid that holds all those given; shape (m,)."""
    merged = np.unique(np.concatenate([np.asarray(f) for f in flows]))
    span = float(merged[-1] - merged[0]) or 1.0
    return merged[np.r_[True, np.diff(merged) > 1e-9 * span]]


def largest_gap(curve: Callable[[Array], Array], flow: Array) -> float:
    """The largest distance of a curve from the lines that join its points at these flows."""
    x = np.linspace(flow[0], flow[-1], _FINE)
    return float(np.abs(np.interp(x, flow, np.asarray(curve(flow))) - np.asarray(curve(x))).max())


def falling(value: Array, step: float) -> Array:
    """The values closest to those given (least squares) that fall by a step or more each time.

    Parameters
    ----------
    value : (n,)
    step : least fall from one value to the next

    Notes
    -----
    Pool adjacent violators on value + step·i, which must not rise.
    """
    from scipy.optimize import isotonic_regression

    ramp = step * np.arange(len(value))
    return np.asarray(isotonic_regression(value + ramp, increasing=False).x - ramp)


def _farthest(
    x: Array, ys: Sequence[Array], tolerances: Sequence[float], start: int, last: int
) -> int:
    """The last place to which a straight line from `start` keeps to all tolerances."""

    def keeps(stop: int) -> bool:
        part = slice(start, stop + 1)
        t = (x[part] - x[start]) / (x[stop] - x[start])
        return all(
            bool(np.abs(y[start] + t * (y[stop] - y[start]) - y[part]).max() <= tolerance)
            for y, tolerance in zip(ys, tolerances, strict=True)
        )

    reach, step = start + 1, 1
    while reach + step <= last and keeps(reach + step):
        reach += step
        step *= 2
    while step >= 1:
        if reach + step <= last and keeps(reach + step):
            reach += step
        else:
            step //= 2
    return reach


def _filled(flow: Array, count: int) -> Array:
    """Points added in the widest stretches until there are `count`."""
    flow = np.asarray(flow)
    while len(flow) < count:
        widest = int(np.argmax(np.diff(flow)))
        flow = np.insert(flow, widest + 1, (flow[widest] + flow[widest + 1]) / 2)
    return flow
