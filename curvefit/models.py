"""Curve equations, pure: how to evaluate, convert, differentiate and print them.

Polynomials are fitted in Legendre polynomials over the fitted flow range, where they are well
conditioned, and handed out as plain coefficients, constant term first.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import comb

import numpy as np
from numpy.typing import ArrayLike, NDArray

__all__ = [
    "SPEED_EXPONENTS",
    "at_speed",
    "bernstein_from_legendre",
    "equation",
    "evaluate",
    "extrema",
    "legendre",
    "monotone_cubic",
    "plain_from_legendre",
    "power",
    "power_gradient",
    "rescale",
    "rescale_covariance",
    "to_unit_range",
]

Array = NDArray[np.float64]


def to_unit_range(flow: ArrayLike, low: float, high: float) -> Array:
    """Flows mapped from [low, high] to [−1, 1]; any shape."""
    return np.asarray((2.0 * np.asarray(flow, float) - low - high) / (high - low))


def legendre(t: ArrayLike, degree: int) -> Array:
    """Legendre polynomials P₀ … P_degree at t ∈ [−1, 1]; shape (n, degree + 1)."""
    return np.asarray(np.polynomial.legendre.legvander(np.asarray(t, float), degree))


def plain_from_legendre(low: float, high: float, degree: int) -> Array:
    """The matrix that turns Legendre coefficients over [low, high] into plain ones.

    Returns
    -------
    ndarray, shape (degree + 1, degree + 1)
        ``plain = matrix @ coefficients``; constant term first.

    Examples
    --------
    >>> plain_from_legendre(0.0, 2.0, 1) @ [3.0, 1.0]  # 3 + t with t = q − 1
    array([2., 1.])
    """
    n = degree + 1
    in_t = np.zeros((n, n))
    for k in range(n):
        column = np.polynomial.legendre.leg2poly(np.eye(n)[k])
        in_t[: len(column), k] = column
    shift, scale = -(high + low) / (high - low), 2.0 / (high - low)
    in_q = np.zeros((n, n))
    for k in range(n):
        for j in range(k + 1):
            in_q[j, k] = comb(k, j) * scale**j * shift ** (k - j)
    return np.asarray(in_q @ in_t)


def bernstein_from_legendre(degree: int) -> Array:
    """The matrix that turns Legendre coefficients into Bernstein ones of the same degree.

    The Bernstein coefficients bound the polynomial and its course: where they rise and then fall,
    so does the polynomial (variation diminishing).
    """
    n = degree + 1
    u = np.linspace(0.0, 1.0, n)
    bernstein = np.stack([comb(degree, k) * u**k * (1 - u) ** (degree - k) for k in range(n)], 1)
    return np.asarray(np.linalg.solve(bernstein, legendre(2.0 * u - 1.0, degree)))


def evaluate(coefficients: ArrayLike, flow: ArrayLike) -> Array:
    """Values of a polynomial with plain coefficients (k,) at flows of any shape.

    Examples
    --------
    >>> evaluate([32.0, 0.0, -2.0], [0.0, 1.0, 2.0])
    array([32., 30., 24.])
    """
    return np.asarray(
        np.polynomial.polynomial.polyval(np.asarray(flow, float), np.asarray(coefficients))
    )


def rescale(coefficients: ArrayLike, flow_factor: float, value_factor: float) -> Array:
    """Plain SI coefficients (k,) turned into those between other units.

    Parameters
    ----------
    coefficients : (k,) of the SI value in the SI flow, constant term first.
    flow_factor, value_factor : SI value of one unit of flow and of value.

    Notes
    -----
    With q = f·q' and v = w·v', c'ₖ = cₖ fᵏ / w.

    Examples
    --------
    >>> rescale([40.0, 0.0, -1000.0], 1e-3, 1.0)  # m in m³/s → m in l/s
    array([ 4.e+01,  0.e+00, -1.e-03])
    """
    c = np.asarray(coefficients, float)
    return np.asarray(c * flow_factor ** np.arange(len(c)) / value_factor)


def rescale_covariance(covariance: ArrayLike, flow_factor: float, value_factor: float) -> Array:
    """The covariance (k, k) that belongs to :func:`rescale`d coefficients."""
    c = np.asarray(covariance, float)
    scale = flow_factor ** np.arange(len(c)) / value_factor
    return np.asarray(c * scale[:, None] * scale[None, :])


#: how values grow with the speed; those not named do not
SPEED_EXPONENTS = {
    "head": 2,
    "differential_pressure": 2,
    "npsh_required": 2,
    "shaft_power": 3,
    "input_power": 3,
}


def at_speed(coefficients: ArrayLike, ratio: float, quantity: str) -> Array:
    """Plain coefficients of the same curve at another speed, exactly.

    Parameters
    ----------
    coefficients : (k,) plain, constant term first
    ratio : new speed over charted speed
    quantity : "head", "shaft_power", "efficiency" …

    Notes
    -----
    Affinity laws: at the flow q·r the value is rᵖ·v(q), so that c'ₖ = cₖ rᵖ⁻ᵏ, with p = 2 for
    head, pressure and NPSHr, 3 for power, 0 for efficiency. The coefficient of Q² of a head curve
    does not change with speed.
    """
    c = np.asarray(coefficients, float)
    exponent = SPEED_EXPONENTS.get(quantity, 0)
    return np.asarray(c * ratio ** (exponent - np.arange(len(c), dtype=float)))


def power(flow: ArrayLike, constant: float, factor: float, exponent: float) -> Array:
    """constant + factor·Qⁿ: H = H0 − a·Qⁿ with a negative factor, NPSHr = c0 + c1·Qⁿ."""
    return np.asarray(constant + factor * np.asarray(flow, float) ** exponent)


def power_gradient(flow: ArrayLike, constant: float, factor: float, exponent: float) -> Array:
    """Derivatives of :func:`power` by constant, factor and exponent; shape (n, 3)."""
    q = np.asarray(flow, float)
    raised = q**exponent
    logs = np.log(np.where(q > 0, q, 1.0))
    return np.stack([np.ones_like(q), raised, factor * raised * logs], axis=1)


def extrema(coefficients: ArrayLike, low: float, high: float) -> Array:
    """Flows strictly inside (low, high) where a polynomial turns, ascending."""
    c = np.asarray(coefficients, float)
    slope = c[1:] * np.arange(1, len(c))
    span = high - low
    # in u = (q − low)/span, where the roots are of order one
    moved = np.polynomial.Polynomial(slope)(np.polynomial.Polynomial([low, span])).coef
    moved = np.trim_zeros(moved, "b")
    if len(moved) < 2:
        return np.zeros(0)
    roots = np.polynomial.polynomial.polyroots(moved)
    real = np.sort(roots[np.abs(roots.imag) < 1e-7 * (1 + np.abs(roots.real))].real)
    return np.asarray(low + span * real[(real > 0) & (real < 1)])


def monotone_cubic(knots: ArrayLike, values: ArrayLike, flow: ArrayLike) -> Array:
    """A piecewise cubic through knots that rises and falls only where its knots do.

    Outside the knots the value is NaN.

    References
    ----------
    Fritsch & Butland (1984), *SIAM J. Sci. Stat. Comput.* 5:300, as scipy's PCHIP.
    """
    from scipy.interpolate import PchipInterpolator

    return np.asarray(
        PchipInterpolator(np.asarray(knots, float), np.asarray(values, float), extrapolate=False)(
            np.asarray(flow, float)
        )
    )


def equation(
    coefficients: Sequence[float] | Array, symbol: str = "H", digits: int | None = None
) -> str:
    """The polynomial written out: "H = 32.1 − 0.0021·Q²" with all digits needed, or `digits`.

    Terms whose coefficient is exactly zero are left out.
    """
    parts: list[str] = []
    for k, c in enumerate(coefficients):
        if c == 0.0 and len(coefficients) > 1:
            continue
        number = repr(abs(float(c))) if digits is None else f"{abs(float(c)):.{digits}g}"
        raised = "" if k == 0 else "·Q" + ("" if k == 1 else str(k).translate(_SUPERSCRIPT))
        sign = ("−" if c < 0 else "") if not parts else (" − " if c < 0 else " + ")
        parts.append(sign + number + raised)
    return f"{symbol} = " + ("".join(parts) or "0")


_SUPERSCRIPT = str.maketrans("0123456789", "⁰¹²³⁴⁵⁶⁷⁸⁹")
