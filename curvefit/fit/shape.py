"""Does a fitted polynomial keep the shape that its quantity has, and the nearest one that does.

A head curve may rise and then falls; an efficiency or a power has one peak at most; NPSHr may
fall at first and then rises. More turns than that are wiggles that the equation brought along.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from curvefit.fit.average import Average, Member
from curvefit.fit.quantiles import chi_square
from curvefit.models import bernstein_from_legendre, extrema, plain_from_legendre

__all__ = ["TURN", "breaks_shape", "hold_shape"]

Array = NDArray[np.float64]

#: first direction of the one turn that a quantity may take; 0: either
TURN = {
    "head": 1,
    "differential_pressure": 1,
    "efficiency": 1,
    "overall_efficiency": 1,
    "npsh_required": -1,
    "shaft_power": 0,
    "input_power": 0,
}


def breaks_shape(quantity: str, coefficients: Array, low: float, high: float) -> str:
    """What is wrong with the course of a polynomial (plain coefficients); "" where nothing is."""
    turn = TURN.get(quantity)
    if turn is None:
        return ""
    at = extrema(coefficients, low, high)
    if len(at) > 1:
        return f"turns {len(at)} times"
    if len(at) == 1 and turn:
        start, peak = np.polynomial.polynomial.polyval(np.array([low, at[0]]), coefficients)
        if (peak - start) * turn < 0:
            return "falls and rises again" if turn > 0 else "rises and falls again"
    return ""


def hold_shape(quantity: str, member: Member, fitted: Average) -> tuple[Array, bool]:
    """The nearest polynomial of the same degree that keeps the shape, and whether data allow it.

    Returns
    -------
    coefficients : (7,) Legendre
    allowed : whether it lies within the 95 % region of the free fit (χ² of the projection).

    Notes
    -----
    Bernstein coefficients that rise and then fall make a polynomial that does. For each place of
    the turn the steps between them have given signs, which is a cone; the nearest point in it is
    a bounded least-squares problem of the size of the equation.
    """
    from scipy.optimize import lsq_linear

    n = member.terms.shape[1]
    degree = member.degree
    bernstein = bernstein_from_legendre(degree) @ member.terms[: degree + 1]
    if n != degree + 1:  # terms held at zero: no cone form, leave the free fit
        return member.coefficients, False
    from_bernstein = np.linalg.inv(bernstein)
    turns = (TURN[quantity],) if TURN[quantity] else (1, -1)
    best: tuple[float, Array, int] | None = None
    target = member.root @ member.free
    for turn in turns:
        for peak in range(degree + 1):
            signs = np.where(np.arange(1, degree + 1) <= peak, turn, -turn)
            steps = np.tril(np.ones((n, n)))
            steps[:, 1:] *= signs
            matrix = member.root @ from_bernstein @ steps
            bounds = (np.r_[-np.inf, np.zeros(degree)], np.full(n, np.inf))
            found = lsq_linear(matrix, target, bounds, method="bvls")
            distance = 2.0 * float(found.cost)
            held = int(np.sum(found.x[1:] <= 0.0))
            if best is None or distance < best[0]:
                best = (distance, from_bernstein @ (steps @ found.x), held)
    assert best is not None
    distance, free, held = best
    allowed = distance / fitted.noise.scale**2 < chi_square(0.95, max(held, 1))
    return member.terms @ free, bool(allowed)


def plain(coefficients: Array, degree: int, low: float, high: float) -> Array:
    """Plain coefficients (degree + 1,) of Legendre ones over [low, high]."""
    return np.asarray(plain_from_legendre(low, high, degree) @ coefficients[: degree + 1])
