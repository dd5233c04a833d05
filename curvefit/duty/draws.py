"""How sure a duty point is: Monte Carlo over all causes, beside the first-order figure.

References
----------
JCGM 101:2008, propagation of distributions by a Monte Carlo method; its clause 8 for the
comparison with the first-order (GUM) framework.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.duty.crossing import Crossing
from curvefit.duty.machine import Line
from curvefit.duty.system import System
from curvefit.records import Interval

__all__ = ["Draws", "draw_duty", "first_order_flow"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Draws:
    """Values at the duty, one per draw, shape (n,), by quantity; and the share of draws whose
    crossing fell outside the flows that were read."""

    values: Mapping[str, Array]
    outside: float

    def interval(self, quantity: str, value: float) -> Interval:
        """The value with the probabilistically symmetric 95 % interval of its draws."""
        low, high = np.percentile(self.values[quantity], [2.5, 97.5])
        return Interval(value, float(low), float(high))


def first_order_flow(crossing: Crossing, pump: Line, system: System) -> float:
    """Standard uncertainty of the duty flow [m³/s] by first-order propagation: u(H − S)/|slope|."""
    at = np.array([crossing.flow])
    own = pump.standard_uncertainty(at)[0]
    losses = system.losses(at)[0] * system.u_losses
    return float(np.sqrt(own**2 + losses**2 + system.u_static**2) / abs(crossing.slope))


def draw_duty(
    crossing: Crossing,
    lines: Mapping[str, Line],
    system: System,
    rng: np.random.Generator,
    draws: int = 100_000,
) -> Draws:
    """Draws of the duty flow and of every quantity there.

    Parameters
    ----------
    crossing : the crossing of the read curves, about which the draws lie
    lines : by quantity; "head" is needed
    system : with u_losses, u_static
    rng : random generator, seeded by the caller
    draws : number of draws

    Notes
    -----
    Each named cause gets one standard normal draw, used in every line that knows it, so that
    what lines share stays shared. Each draw's crossing is found by Newton steps on that draw's
    curves with the slope of the read ones.
    """
    names = sorted({name for line in lines.values() for name in line.causes})
    z = dict(zip(names, rng.standard_normal((len(names), draws)), strict=True))
    factor = 1.0 + system.u_losses * rng.standard_normal(draws)
    static = system.static_head + system.u_static * rng.standard_normal(draws)
    head = lines["head"]
    flow = np.full(draws, crossing.flow)
    low, high = head.range
    losses = _tabulated(system, low, high)
    for _ in range(6):
        gap = _drawn(head, flow, z) - static - factor * losses(flow)
        step = np.clip(gap / crossing.slope, -0.25 * (high - low), 0.25 * (high - low))
        flow = np.clip(flow - step, 0.5 * low, high + 0.5 * (high - low))
        if np.abs(step).max() < 1e-9 * high:
            break
    outside = float(np.mean((flow < low) | (flow > high)))
    values = {"flow": flow}
    values |= {name: _drawn(line, flow, z) for name, line in lines.items()}
    if system.suction is not None and system.liquid.vapour_pressure is not None:
        grid = np.linspace(max(0.0, 0.5 * low), 1.5 * high, 65)
        still = system.npsh_available(np.zeros(1))[0]
        lost = np.interp(flow, grid, system.suction_losses(grid))
        values["npsh_available"] = still - factor * lost
    return Draws(values, outside)


def _tabulated(system: System, low: float, high: float) -> _Table:
    grid = np.linspace(0.0, 1.5 * high, 257)
    return _Table(grid, system.losses(grid))


@dataclass(frozen=True, slots=True)
class _Table:
    """Losses against flow², between whose points they are almost straight."""

    flow: Array
    loss: Array

    def __call__(self, flow: Array) -> Array:
        return np.interp(flow**2, self.flow**2, self.loss)


def _drawn(line: Line, flow: Array, z: Mapping[str, Array]) -> Array:
    """Values of a line at each draw's own flow, shape (n,)."""
    total = line.value(flow).copy()
    for name, effect in line.causes.items():
        total += z[name] * effect(flow)
    return total
