"""A piecewise cubic where no equation serves: knots by least squares, monotone between them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.fit.choice import Settings
from curvefit.fit.noise import Noise, find_noise
from curvefit.models import monotone_cubic

__all__ = ["Piecewise", "fit_piecewise"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Piecewise:
    """knots (k,) flows and values (k,); spread (k, c): one independent cause a column."""

    knots: Array
    values: Array
    spread: Array
    criterion: float
    effective: float

    def value(self, flow: Array) -> Array:
        """Values at flows (n,); straight on outside the knots."""
        return _curve(self.knots, self.values[:, None], flow)[:, 0]

    def factors(self, flow: Array) -> Array:
        """(k, n): what one standard deviation of each independent cause does."""
        return np.asarray((_response(self.knots, self.values, flow) @ self.spread).T)


def fit_piecewise(
    flow: Array, value: Array, u: Array, settings: Settings, turn: int | None = None
) -> Piecewise:
    """The piecewise cubic whose number of knots predicts best.

    Parameters
    ----------
    flow, value, u : (m,) the thinned line and its own uncertainty
    turn : 1 where the curve may rise and then falls, −1 where it may fall and then rises, 0 for
        either, None for no such rule; what holding to it changes is a cause of its own

    Notes
    -----
    Gauss–Newton steps on the values at evenly spaced knots, under the noise that a cubic spline
    through the largest number of knots leaves; the number by AICc.
    """
    low, high = float(flow[0]), float(flow[-1])
    t = (flow - low) / (high - low)
    m = len(flow)
    counts = [k for k in (6, 8, 11, 15, 20) if k <= m // 3] or [max(2, min(4, m // 2))]
    most = np.linspace(0, 1, counts[-1])
    noise = find_noise(t, value, u, _response(most, np.interp(most, t, value), t), settings)
    found = [_settled(np.linspace(0, 1, k), t, value, noise) for k in counts]
    best = min(found, key=lambda f: f[0])
    criterion, knots, values, root = best
    spread = np.asarray(noise.scale * np.linalg.inv(root), float)
    if turn is not None:
        held = _one_turn(values, turn)
        spread, values = np.c_[spread, values - held], held
    return Piecewise(low + (high - low) * knots, values, spread, criterion, noise.effective)


def _one_turn(values: Array, turn: int) -> Array:
    """The nearest values that rise and then fall (or the other way round)."""
    from scipy.optimize import isotonic_regression

    tried = []
    for sign in (turn,) if turn else (1, -1):
        up = sign * values
        for peak in range(len(values) + 1):
            rise = isotonic_regression(up[:peak]).x if peak else up[:0]
            fall = isotonic_regression(up[peak:], increasing=False).x if peak < len(up) else up[:0]
            tried.append(sign * np.r_[rise, fall])
    return min(tried, key=lambda v: float(np.sum((v - values) ** 2)))


def _settled(
    knots: Array, t: Array, value: Array, noise: Noise
) -> tuple[float, Array, Array, Array]:
    """Criterion, knots, values at them, and the triangle R of the whitened response."""
    values = np.interp(knots, t, value)

    def missed(v: Array) -> Array:
        return noise.whiten(value - _curve(knots, v[:, None], t)[:, 0])

    residual = missed(values)
    squares = float(residual @ residual)
    for _ in range(6):
        q, root = np.linalg.qr(noise.whiten(_response(knots, values, t)))
        step = np.linalg.solve(root, q.T @ residual)
        for size in (1.0, 0.5, 0.25, 0.125):
            trial = missed(values + size * step)
            if float(trial @ trial) < squares:
                break
        else:
            break
        gain = squares - float(trial @ trial)
        values, residual, squares = values + size * step, trial, squares - gain
        if gain < 1e-3 * squares:
            break
    triangle = np.linalg.qr(noise.whiten(_response(knots, values, t)), mode="r")
    m, k = len(t), len(knots) + 1
    criterion = m * np.log(max(squares, 1e-300) / m) + 2 * k
    criterion += 2 * k * (k + 1) / max(m - k - 1, 1e-3)
    return float(criterion), knots, values, np.asarray(triangle)


def _curve(knots: Array, values: Array, flow: Array) -> Array:
    """Monotone cubics through columns of values (k, c): shape (n, c); straight on outside."""
    inside = np.clip(flow, knots[0], knots[-1])
    rows = monotone_cubic(knots, values, inside)
    step = 1e-6 * (knots[-1] - knots[0])
    for end, sign in ((knots[0], 1.0), (knots[-1], -1.0)):
        outside = (flow < end) if sign > 0 else (flow > end)
        if outside.any():
            pair = monotone_cubic(knots, values, np.array([end, end + sign * step]))
            slope = (pair[1] - pair[0]) / (sign * step)
            rows[outside] += (flow[outside] - end)[:, None] * slope
    return rows


def _response(knots: Array, values: Array, flow: Array) -> Array:
    """Derivatives (n, k) of the curve by the values at its knots."""
    size = 1e-5 * (float(np.ptp(values)) or float(np.abs(values).max()) or 1.0)
    shifted = values[:, None] + size * np.c_[np.eye(len(knots)), -np.eye(len(knots))]
    rows = _curve(knots, shifted, flow)
    k = len(knots)
    return np.asarray((rows[:, :k] - rows[:, k:]) / (2 * size))
