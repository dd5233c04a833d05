"""Where pump and system meet: all crossings, and what is missing where there are none."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Crossing", "crossings", "root"]

Array = NDArray[np.float64]
Curve = Callable[[Array], Array]


@dataclass(frozen=True, slots=True)
class Crossing:
    """A duty point: flow [m³/s], head [m] and whether it is stable.

    Stable: the pump's head falls below the system's when the flow grows, so that a disturbance
    dies away. slope : d(pump − system)/dQ there [m/(m³/s)].
    """

    flow: float
    head: float
    stable: bool
    slope: float


def crossings(
    pump: Curve, system: Curve, low: float, high: float, samples: int = 1001
) -> tuple[Crossing, ...]:
    """All crossings of a pump curve and a system curve between two flows, by rising flow.

    Parameters
    ----------
    pump, system : functions of flow (n,) [m³/s] giving head (n,) [m]
    low, high : flow range [m³/s]
    samples : how finely the range is looked through for changes of sign
    """
    flow = np.linspace(low, high, samples)

    def gap(q: Array) -> Array:
        return pump(q) - system(q)

    values = gap(flow)
    found = []
    for i in np.flatnonzero(np.sign(values[:-1]) * np.sign(values[1:]) < 0):
        found.append(root(gap, flow[i], flow[i + 1]))
    found += [float(q) for q in flow[values == 0]]
    step = (high - low) * 1e-5
    result = []
    for q in sorted(found):
        a, b = max(q - step, low), min(q + step, high)
        slope = float((gap(np.array([b])) - gap(np.array([a])))[0] / (b - a))
        head = float(pump(np.array([q]))[0])
        result.append(Crossing(q, head, slope < 0, slope))
    return tuple(result)


def root(f: Curve, a: float, b: float) -> float:
    """The zero of f between a and b, where it changes sign.

    Notes
    -----
    Halving to the last bit: a few milliseconds, where loading an optimiser for it takes longer
    than all the rest of a duty-point check.
    """
    low = float(f(np.array([a]))[0])
    while True:
        middle = 0.5 * (a + b)
        if middle in (a, b):
            return middle
        value = float(f(np.array([middle]))[0])
        if value == 0.0:
            return middle
        a, b = (middle, b) if (value > 0) == (low > 0) else (a, middle)
