"""A piecewise cubic where no equation serves: knots by least squares, monotone between them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.fit.choice import Settings
from curvefit.fit.noise import find_noise
from curvefit.models import monotone_cubic

__all__ = ["Piecewise", "fit_piecewise"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Piecewise:
    """knots (k,) flows and values (k,); spread (k, k): one independent cause a column."""

    knots: Array
    values: Array
    spread: Array
    criterion: float
    scale: float
    effective: float

    def value(self, flow: Array) -> Array:
        """Values at flows (n,) inside the knots."""
        return monotone_cubic(self.knots, self.values, np.clip(flow, self.knots[0], self.knots[-1]))

    def smooth(self, flow: Array) -> Array:
        """The same knots joined by a cubic with a continuous second derivative."""
        return np.asarray(_cardinal(self.knots, flow) @ self.values)

    def factors(self, flow: Array) -> Array:
        """(k + 1, n): the knots' errors and what the way of joining them changes."""
        rows = (_cardinal(self.knots, flow) @ self.spread).T
        return np.concatenate([rows, (self.value(flow) - self.smooth(flow))[None]])


def fit_piecewise(flow: Array, value: Array, u: Array, settings: Settings) -> Piecewise:
    """The piecewise cubic whose number of knots predicts best.

    Parameters
    ----------
    flow, value, u : (m,) the thinned line and its own uncertainty
    """
    low, high = float(flow[0]), float(flow[-1])
    t = (flow - low) / (high - low)
    m = len(flow)
    counts = [k for k in (6, 8, 11, 15, 20) if k <= m // 3] or [max(2, min(4, m // 2))]
    noise = find_noise(t, value, u, _cardinal(np.linspace(0, 1, counts[-1]), t), settings)
    best: Piecewise | None = None
    target = noise.whiten(value)
    for k in counts:
        knots = np.linspace(0, 1, k)
        q, root = np.linalg.qr(noise.whiten(_cardinal(knots, t)))
        values = np.linalg.solve(root, q.T @ target)
        residual = target - q @ (q.T @ target)
        criterion = m * np.log(max(float(residual @ residual), 1e-300) / m) + 2 * (k + 1)
        criterion += 2 * (k + 1) * (k + 2) / max(m - k - 2, 1e-3)
        if best is None or criterion < best.criterion:
            spread = noise.scale * np.linalg.inv(root)
            best = Piecewise(
                low + (high - low) * knots, values, spread, criterion, noise.scale, noise.effective
            )
    assert best is not None
    return best


def _cardinal(knots: Array, at: Array) -> Array:
    """(n, k): the cubic spline through a one at each knot in turn and zeros elsewhere."""
    from scipy.interpolate import CubicSpline

    kind = "not-a-knot" if len(knots) > 3 else "natural"
    return np.asarray(CubicSpline(knots, np.eye(len(knots)), bc_type=kind)(at))
