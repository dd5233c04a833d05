"""Invented pumps with physical curves: head from losses, power from the work done, η = ρgQH/P.

No curve is a polynomial that a fit could hit exactly, and trimmed impellers do not obey the
nominal affinity exponents; speeds do.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

DENSITY = 998.2  # kg/m³, water at 20 °C
GRAVITY = 9.80665  # m/s²


@dataclass(frozen=True)
class InventedPump:
    """A centrifugal pump at one speed with its largest impeller; flow m³/s, head m, power W.

    slip, friction, shock, swirl : shares of the best-point head that shape the head curve.
    leak, disc, churn : shares of the best-point power that are lost.
    trim_flow, trim_head : exponents by which flow and head shrink with the diameter.
    """

    flow_best: float
    head_best: float
    speed: float  # 1/min
    diameter: float  # mm
    slip: float = 0.45
    friction: float = 0.12
    shock: float = 0.18
    swirl: float = 0.06
    leak: float = 0.03
    disc: float = 0.07
    churn: float = 0.12
    npsh_best: float = 3.0
    trim_flow: float = 1.15
    trim_head: float = 2.15
    trim_loss: float = 0.9

    def _work(self, x: Array) -> Array:
        return 1.0 + self.friction + self.slip * (1.0 - x)

    def _head(self, x: Array) -> Array:
        lost = self.friction * x**2 + self.shock * ((x - 1.0) ** 2)
        return self._work(x) - lost - self.swirl * np.exp(-((x / 0.25) ** 2)) * (1 - x)

    def head(self, flow: Array, diameter: float | None = None, ratio: float = 1.0) -> Array:
        """Head [m] at flows [m³/s] for an impeller diameter [mm] and a speed ratio."""
        x, head_scale, _ = self._scaled(flow, diameter, ratio)
        return np.asarray(head_scale * self._head(x))

    def power(self, flow: Array, diameter: float | None = None, ratio: float = 1.0) -> Array:
        """Shaft power [W], so that η = ρgQH/P holds exactly."""
        x, head_scale, flow_scale = self._scaled(flow, diameter, ratio)
        loss = self.trim_loss * (1.0 - (diameter or self.diameter) / self.diameter)
        useful = (x + self.leak) * self._work(x) * (1.0 + loss)
        lost = self.disc + self.churn * np.exp(-((x / 0.35) ** 2))
        return np.asarray(DENSITY * GRAVITY * flow_scale * head_scale * (useful + lost))

    def efficiency(self, flow: Array, diameter: float | None = None, ratio: float = 1.0) -> Array:
        """Pump efficiency, a fraction."""
        hydraulic = DENSITY * GRAVITY * flow * self.head(flow, diameter, ratio)
        return np.asarray(hydraulic / self.power(flow, diameter, ratio))

    def npsh(self, flow: Array, diameter: float | None = None, ratio: float = 1.0) -> Array:
        """NPSH required [m]: a friction part, an incidence part, a steep end; rises throughout."""
        x, _, _ = self._scaled(flow, diameter, ratio)
        shape = 0.45 + 0.35 * x**2 + 0.02 * np.exp(2.3 * x)
        return np.asarray(self.npsh_best * ratio**2 * shape)

    def _scaled(
        self, flow: Array, diameter: float | None, ratio: float
    ) -> tuple[Array, float, float]:
        cut = (diameter or self.diameter) / self.diameter
        flow_scale = self.flow_best * cut**self.trim_flow * ratio
        head_scale = self.head_best * cut**self.trim_head * ratio**2
        return np.asarray(flow, float) / flow_scale, head_scale, flow_scale


def invent(rng: np.random.Generator, flow_best: float | None = None) -> InventedPump:
    """A pump of random size and shape; `flow_best` [m³/s] fixes its size."""
    flow = flow_best or float(10 ** rng.uniform(-2.4, -0.7))
    head = float(rng.uniform(14, 85))
    return InventedPump(
        flow_best=flow,
        head_best=head,
        speed=float(rng.choice([1450, 1475, 1750, 2900, 2950, 3500])),
        diameter=float(rng.integers(36, 84) * 5),
        slip=float(rng.uniform(0.36, 0.58)),
        friction=float(rng.uniform(0.08, 0.2)),
        shock=float(rng.uniform(0.08, 0.24)),
        swirl=float(rng.uniform(0.0, 0.06)),
        leak=float(rng.uniform(0.015, 0.06)),
        disc=float(rng.uniform(0.04, 0.12)),
        churn=float(rng.uniform(0.05, 0.18)),
        npsh_best=float(rng.uniform(1.8, 5.0)),
        trim_flow=float(rng.uniform(1.0, 1.4)),
        trim_head=float(rng.uniform(2.0, 2.4)),
    )


def iso_efficiency(
    pump: InventedPump, level: float, diameters: tuple[float, float], flows: tuple[float, float]
) -> list[tuple[Array, Array]]:
    """Lines (flow, head) along which the efficiency of trimmed impellers equals `level`."""
    from contourpy import contour_generator

    d = np.linspace(*diameters, 600)
    share = np.linspace(*flows, 900)  # of the best flow of each diameter
    best = pump.flow_best * (d / pump.diameter) ** pump.trim_flow
    eta = np.array(
        [pump.efficiency(share * q, diameter=one) for q, one in zip(best, d, strict=True)]
    )
    lines = []
    for line in contour_generator(x=share, y=d, z=eta).lines(level):
        if len(line) < 30:
            continue
        flow = line[:, 0] * pump.flow_best * (line[:, 1] / pump.diameter) ** pump.trim_flow
        head = [pump.head(np.array([q]), one)[0] for q, one in zip(flow, line[:, 1], strict=True)]
        lines.append((flow, np.array(head)))
    return lines
