"""The inverse: which speed or diameter gives a wanted flow or head in a system."""

from __future__ import annotations

from collections.abc import Callable
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from curvefit.duty.crossing import root
from curvefit.duty.machine import Arrangement, Line
from curvefit.duty.system import System
from curvefit.errors import InputError

__all__ = ["diameter_for", "speed_for", "wanted_flow"]

Array = NDArray[np.float64]


def wanted_flow(system: System, flow: float | None, head: float | None, top: float) -> float:
    """The flow [m³/s] at which the system has a wanted head [m], or the wanted flow itself.

    Parameters
    ----------
    top : largest flow that is looked at [m³/s]

    Raises
    ------
    InputError
        If the system has that head at no flow.
    """
    if flow is not None:
        return flow
    if head is None or head <= system.static_head:
        raise InputError(
            f"a wanted head above the static head of {system.static_head:g} m is needed",
            remedy="Give a flow, or a head above the static head.",
        )
    if system.head(np.array([top]))[0] < head:
        raise InputError("the system does not reach the wanted head", remedy="Give a flow.")
    return root(lambda q: system.head(q) - head, 0.0, top)


def speed_for(
    head: Line, system: System, flow: float | None = None, wanted_head: float | None = None
) -> float:
    """Speed ratio at which pump and system meet at a wanted flow [m³/s] or head [m].

    Raises
    ------
    InputError
        If no speed ratio between 0.3 and 1.5 does so within the flows that were read.
    """
    at = wanted_flow(system, flow, wanted_head, 3 * head.range[1])
    ratios = np.linspace(0.3, 1.5, 241)
    inside = ratios[(head.range[0] * ratios <= at) & (at <= head.range[1] * ratios)]
    return _search(
        lambda r: head.arranged(Arrangement(speed_ratio=r)), inside, system, at, "speed ratio"
    )


def diameter_for(
    head_at: Callable[[float], Line],
    drawn: tuple[float, float],
    system: System,
    flow: float | None = None,
    wanted_head: float | None = None,
) -> float:
    """Impeller diameter [m] at which pump and system meet at a wanted flow [m³/s] or head [m].

    Parameters
    ----------
    head_at : the head's line at a diameter [m]
    drawn : smallest and largest diameter of the chart [m]; none outside is looked at

    Raises
    ------
    InputError
        If no diameter between those drawn does so within the flows that were read.
    """
    at = wanted_flow(system, flow, wanted_head, 3 * head_at(drawn[1]).range[1])
    return _search(head_at, np.linspace(*drawn, 25), system, at, "diameter [m]")


def _search(
    line_at: Callable[[float], Line], values: Array, system: System, flow: float, what: str
) -> float:
    """The value at which the line meets the system at a flow, between two that lie about it."""
    target = float(system.head(np.array([flow]))[0])

    def gap(value: float) -> float:
        line = line_at(value)
        if not line.range[0] <= flow <= line.range[1]:
            return np.nan
        return float(line.value(np.array([flow]))[0]) - target

    gaps = [gap(float(v)) for v in values]
    for (a, fa), (b, fb) in pairwise(zip(values, gaps, strict=True)):
        if fa * fb <= 0:
            return root(lambda v: np.array([gap(float(v[0]))]), float(a), float(b))
    span = f" from {values[0]:.4g} to {values[-1]:.4g}" if len(values) else ""
    raise InputError(
        f"no {what}{span} gives {flow * 3600:.4g} m³/h at {target:.4g} m within the flows that "
        "were read",
        remedy="Choose another flow, diameter or pump.",
    )
