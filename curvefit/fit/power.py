"""The power form: H = H0 − a·Qⁿ and NPSHr = c0 + c1·Qⁿ."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.models import power, power_gradient

__all__ = ["PowerFit", "fit_power"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class PowerFit:
    """constant, factor, exponent (3,) in SI; their cofactor (3, 3), to be multiplied by s².

    squares : weighted sum of squared residuals; settled : whether the steps came to rest.
    """

    parameters: Array
    cofactor: Array
    squares: float
    settled: bool

    def value(self, flow: Array) -> Array:
        """Values at flows (n,)."""
        return power(flow, *self.parameters)


def fit_power(
    flow: Array, value: Array, whitener: Array, exponents: tuple[float, float] = (0.3, 8.0)
) -> PowerFit:
    """The power form by (generalised) least squares.

    Parameters
    ----------
    flow, value : (m,)
    whitener : (m, m) lower triangle C of the covariance C Cᵀ, or (m,) standard uncertainties
    exponents : range searched

    Notes
    -----
    For a given exponent the form is linear in constant and factor; the exponent is searched on a
    grid and then all three are refined by Gauss–Newton steps. Flows are scaled by the largest, so
    that the steps are well conditioned.
    """
    scale = float(np.abs(flow).max()) or 1.0
    x = np.maximum(flow / scale, 0.0)

    def white(rows: Array) -> Array:
        if whitener.ndim == 1:
            return np.asarray((rows.T / whitener).T)
        return np.asarray(np.linalg.solve(whitener, rows))

    target = white(value)
    flat = white(np.ones_like(x))
    best = (np.inf, np.zeros(3))
    for n in np.geomspace(*exponents, 25):
        columns = np.stack([flat, white(x**n)], axis=1)
        linear, *_ = np.linalg.lstsq(columns, target, rcond=None)
        squares = float(np.sum((target - columns @ linear) ** 2))
        if squares < best[0]:
            best = (squares, np.array([*linear, n]))
    squares, p = best
    settled = False
    for _ in range(50):
        gradient = white(power_gradient(x, *p))
        step, *_ = np.linalg.lstsq(gradient, target - white(power(x, *p)), rcond=None)
        p, squares, moved = _damped(
            p, np.asarray(step), squares, lambda q: target - white(power(x, *q))
        )
        if moved < 1e-12:
            settled = True
            break
    gradient = white(power_gradient(x, *p))
    inverse = np.linalg.pinv(np.linalg.qr(gradient, mode="r"))
    cofactor = inverse @ inverse.T
    constant, factor, exponent = p
    # back to SI: factor·(q/scale)ⁿ = factor·scale⁻ⁿ·qⁿ
    si = factor * scale**-exponent
    turn = np.eye(3)
    turn[1, 1] = scale**-exponent
    turn[1, 2] = -si * np.log(scale)
    inside = exponents[0] < exponent < exponents[1]
    return PowerFit(
        np.array([constant, si, exponent]),
        turn @ cofactor @ turn.T,
        squares,
        settled and bool(inside),
    )


def _damped(
    p: Array, step: Array, squares: float, residual: Callable[[Array], Array]
) -> tuple[Array, float, float]:
    """A Gauss–Newton step, halved until the sum of squares does not grow."""
    size = 1.0
    for _ in range(30):
        trial = p + size * step
        if 0.05 < trial[2] < 20.0:
            r = residual(trial)
            new = float(r @ r)
            if new <= squares * (1 + 1e-14):
                moved = float(np.max(np.abs(size * step) / (np.abs(p) + 1e-300)))
                return trial, new, moved
        size /= 2.0
    return p, squares, 0.0
