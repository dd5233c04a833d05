"""The noise of a traced line: how large it is and how far along the line it stays alike.

Neighbouring points of a trace share their error, so that a thousand of them carry far less than a
thousand independent ones. The noise is modelled as V = s² D [(1−ν)·exp(−d/L) + ν·I] D with D the
stated uncertainties, d the distance along the flow and s, L, ν found by restricted likelihood
under the richest equation, so that the choice of the equation does not change the noise.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.fit.choice import Settings

__all__ = ["Noise", "find_noise"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Noise:
    """scale s over the stated uncertainty, length L (share of the range), nugget ν.

    whitener : (m, m) lower triangle C with V = s² C Cᵀ; effective : number of points that
    independent noise would need to tell as much.
    """

    scale: float
    length: float
    nugget: float
    whitener: Array
    effective: float

    def whiten(self, rows: Array) -> Array:
        """C⁻¹ times an array of shape (m,) or (m, k)."""
        return np.asarray(np.linalg.solve(self.whitener, rows))


def find_noise(t: Array, value: Array, u: Array, design: Array, settings: Settings) -> Noise:
    """The noise that makes the residuals of `design` most likely.

    Parameters
    ----------
    t : (m,) places along the flow, the range mapped to [0, 1]
    value : (m,)
    u : (m,) stated standard uncertainties of the line alone, > 0
    design : (m, p) the richest equation's columns
    settings : grids of lengths and nuggets, prior of the scale

    Notes
    -----
    Restricted likelihood on a grid of (L, ν); at each, s maximises it together with a normal
    prior on log s, whose equation (m−p) − q·e^(−2 log s) + log s/τ² = 0 has one root.
    """
    m, p = design.shape
    grid = [(length, nu) for length in settings.lengths for nu in settings.nuggets]
    distance = np.abs(t[:, None] - t[None, :])
    lengths = np.array([g[0] for g in grid])
    nuggets = np.array([g[1] for g in grid])
    kernel = np.exp(-distance[None] / lengths[:, None, None]) * (1 - nuggets)[:, None, None]
    kernel[:, np.arange(m), np.arange(m)] = 1.0
    lower = np.linalg.cholesky(kernel)
    rows = np.concatenate([design, value[:, None]], axis=1) / u[:, None]
    white = np.linalg.solve(lower, np.broadcast_to(rows, (len(grid), *rows.shape)))
    triangle = np.linalg.qr(white, mode="r")
    diagonal = np.abs(np.diagonal(triangle, axis1=1, axis2=2))
    q = diagonal[:, p] ** 2
    log_kernel = 2.0 * np.log(np.diagonal(lower, axis1=1, axis2=2)).sum(1)
    log_design = 2.0 * np.log(diagonal[:, :p]).sum(1)
    log_s = _log_scale(q, m - p, settings.scale_prior)
    likelihood = -0.5 * (
        2.0 * (m - p) * log_s + log_kernel + log_design + q * np.exp(-2.0 * log_s)
    ) - log_s**2 / (2.0 * settings.scale_prior**2)
    best = int(np.argmax(likelihood))
    length, nugget = grid[best]
    alike = (1 - nugget) * np.exp(-float(np.median(np.diff(t))) / length)
    return Noise(
        float(np.exp(log_s[best])),
        length,
        nugget,
        np.asarray(u[:, None] * lower[best]),
        m * (1 - alike) / (1 + alike),
    )


def _log_scale(q: Array, freedom: int, prior: float) -> Array:
    """Root of freedom − q·e^(−2x) + x/prior², by Newton steps from the side where it is safe."""
    tiny = np.finfo(float).tiny
    x = np.minimum(0.5 * np.log(np.maximum(q, tiny) / max(freedom, 1)), 0.0)
    x = np.maximum(x, -30.0)
    for _ in range(60):
        pull = q * np.exp(-2.0 * x)
        step = (freedom - pull + x / prior**2) / (2.0 * pull + 1.0 / prior**2)
        x = x - np.clip(step, -1.0, 1.0)
        if np.abs(step).max() < 1e-10:
            break
    return np.asarray(x)
