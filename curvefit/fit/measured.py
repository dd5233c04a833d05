"""The fit of measured points: ordinary (or weighted) least squares with the textbook bands."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.errors import ChartError, InputError
from curvefit.fit.average import held_terms
from curvefit.fit.bands import multiplier
from curvefit.fit.choice import Choice, Settings
from curvefit.fit.equations import power_names
from curvefit.fit.power import fit_power
from curvefit.fit.quantiles import normal_two_sided
from curvefit.fit.said import finding, where
from curvefit.fit.shape import breaks_shape
from curvefit.fit.solve import least_squares
from curvefit.fit.traced import band_grid, outside_finding
from curvefit.models import (
    evaluate,
    legendre,
    plain_from_legendre,
    power,
    power_gradient,
    to_unit_range,
)
from curvefit.records import QUANTITIES, Band, Curve, Finding, Fit

__all__ = ["fit_measured"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class _Regression:
    """A linear model at its solution: root R of the design, free coefficients, residual s².

    columns : (7, k) Legendre columns of the terms in use.
    """

    degree: int
    columns: Array
    free: Array
    root: Array
    squares: float
    freedom: int
    criterion: float

    @property
    def variance(self) -> float | None:
        """Residual variance s²; None where no degree of freedom is left."""
        return self.squares / self.freedom if self.freedom > 0 else None


def fit_measured(curve: Curve, choice: Choice, settings: Settings) -> Fit:
    """The fit of a table of measured points; see :func:`curvefit.fit.fit_curve`.

    Notes
    -----
    Errors are taken as independent, of one unknown variance. Confidence of the curve: t quantile
    (pointwise) or Working–Hotelling (simultaneous); prediction of a new point: t quantile with the
    residual variance added.
    """
    order = np.argsort(curve.flow_si, kind="stable")
    flow, value = curve.flow_si[order], curve.value_si[order]
    distinct = len(np.unique(flow))
    if distinct < 2:
        raise ChartError(
            f"curve {curve.name!r} has points at {distinct} different "
            f"flow{'s' if distinct != 1 else ''}, at least 2 are needed",
            where=where(curve),
            remedy="Check the column of flows.",
        )
    said: list[Finding] = []
    grid, outside = band_grid(flow, choice, settings)
    if outside:
        said.append(outside_finding(curve, grid, flow))
    if choice.family == "piecewise":
        return _joined(curve, flow, value, choice)
    if choice.family == "power":
        return _power(curve, flow, value, grid, choice, said)
    return _polynomial(curve, flow, value, distinct, grid, choice, said)


# --- polynomial -------------------------------------------------------------------------------


def _polynomial(
    curve: Curve,
    flow: Array,
    value: Array,
    distinct: int,
    grid: Array,
    choice: Choice,
    said: list[Finding],
) -> Fit:
    tried = _tried(curve, flow, value, distinct, choice)
    best = min(tried, key=lambda r: r.criterion)
    low, high = float(flow[0]), float(flow[-1])
    matrix = plain_from_legendre(low, high, best.degree) @ best.columns[: best.degree + 1]
    coefficients = matrix @ best.free
    for k in choice.without:
        if k <= best.degree:
            coefficients[k] = 0.0
    inverse = np.linalg.inv(best.root)
    variance = best.variance
    covariance = None
    rows = (_design(grid, low, high, best.columns) @ inverse).T
    centre = _design(grid, low, high, best.columns) @ best.free
    if variance is not None:
        spread = np.sqrt(variance) * (matrix @ inverse)
        covariance = spread @ spread.T
    else:
        said.append(_no_band(curve, len(flow), len(best.free)))
    broken = breaks_shape(curve.quantity, coefficients, low, high)
    if broken:
        word = QUANTITIES[curve.quantity].title.lower()
        said.append(
            finding(
                "warning",
                "fit.shape-free",
                curve,
                f"The fitted {word} {broken} between the points.",
                "Use a lower --degree, or --family power.",
            )
        )
    at = evaluate(coefficients, flow)
    name = "degree {} was asked for" if choice.degree else "degree {} predicts best (smallest AICc)"
    return Fit(
        curve.name,
        (curve,),
        "polynomial",
        best.degree,
        (low, high),
        _band(grid, centre, rows, variance, len(best.free), best.freedom, choice),
        coefficients,
        {},
        covariance,
        _factors(rows, variance, best.freedom),
        None,
        float(np.sqrt(np.mean((value - at) ** 2))),
        float(len(flow)),
        candidates=tuple((f"polynomial of degree {r.degree}", r.criterion, "") for r in tried),
        reason=name.format(best.degree),
        findings=tuple(said),
    )


def _tried(
    curve: Curve, flow: Array, value: Array, distinct: int, choice: Choice
) -> list[_Regression]:
    held = [k for k in choice.without if k <= 6]
    if choice.degree is not None:
        terms = choice.degree + 1 - sum(k <= choice.degree for k in held)
        if terms > distinct:
            raise InputError(
                f"degree {choice.degree} needs {terms} different flows, curve {curve.name!r} has "
                f"{distinct}",
                where=where(curve),
                remedy=f"Use a degree up to {distinct - 1 + len(held)}.",
            )
        return [_regress(flow, value, choice.degree, choice.without)]
    # one criterion needs two points more than parameters (the variance is one of them)
    top = max(1, min(6, len(flow) - 4, distinct - 1))
    degrees = [d for d in range(1, top + 1) if d + 1 - sum(k <= d for k in held) >= 1]
    return [_regress(flow, value, d, choice.without) for d in degrees]


def _design(flow: Array, low: float, high: float, columns: Array) -> Array:
    return np.asarray(legendre(to_unit_range(flow, low, high), 6) @ columns)


def _regress(flow: Array, value: Array, degree: int, without: tuple[int, ...]) -> _Regression:
    low, high = float(flow[0]), float(flow[-1])
    columns = held_terms(low, high, degree, without)
    free, root, residual = least_squares(
        lambda part: _design(flow[part], low, high, columns), value
    )
    n, k = len(flow), columns.shape[1] + 1
    squares = float(residual @ residual)
    criterion = n * np.log(max(squares, 1e-300) / n) + 2 * k
    criterion += 2 * k * (k + 1) / (n - k - 1) if n > k + 1 else np.inf
    return _Regression(degree, columns, free, root, squares, n - len(free), float(criterion))


# --- power form -------------------------------------------------------------------------------


def _power(
    curve: Curve, flow: Array, value: Array, grid: Array, choice: Choice, said: list[Finding]
) -> Fit:
    if len(np.unique(flow)) < 3:
        raise ChartError(
            f"the power form needs 3 different flows, curve {curve.name!r} has "
            f"{len(np.unique(flow))}",
            where=where(curve),
            remedy="Use --family polynomial.",
        )
    found = fit_power(flow, value, np.ones(len(flow)))
    constant, factor, exponent = map(float, found.parameters)
    if not found.settled:
        raise ChartError(
            f"no power form follows curve {curve.name!r}: its exponent runs to {exponent:.2g}",
            where=where(curve),
            remedy="Use --family polynomial.",
        )
    freedom = len(flow) - 3
    variance = found.squares / freedom if freedom > 0 else None
    names = power_names(curve.quantity, constant, factor, exponent)
    turn = np.diag([1.0, -1.0 if "H0" in names else 1.0, 1.0])
    if variance is None:
        said.append(_no_band(curve, len(flow), 3))
    at = np.maximum(grid, 0.0)
    root = np.linalg.cholesky(found.cofactor)
    rows = (power_gradient(at, constant, factor, exponent) @ root).T
    return Fit(
        curve.name,
        (curve,),
        "power",
        None,
        (float(flow[0]), float(flow[-1])),
        _band(grid, power(at, constant, factor, exponent), rows, variance, 3, freedom, choice),
        None,
        names,
        None if variance is None else turn @ (variance * found.cofactor) @ turn,
        _factors(rows, variance, freedom),
        None,
        float(np.sqrt(found.squares / len(flow))),
        float(len(flow)),
        candidates=(("power form", 0.0, "asked for"),),
        reason="the power form was asked for",
        findings=tuple(said),
    )


# --- what they share --------------------------------------------------------------------------


def _band(
    grid: Array,
    centre: Array,
    rows: Array,
    variance: float | None,
    terms: int,
    freedom: int,
    choice: Choice,
) -> Band:
    if variance is None:
        return Band(grid, centre, None, None, choice.kind, choice.confidence)
    leverage = np.sum(rows**2, axis=0)
    if choice.kind == "prediction":
        leverage = leverage + 1.0
    half = multiplier(choice.kind, choice.confidence, terms, freedom) * np.sqrt(variance * leverage)
    return Band(grid, centre, centre - half, centre + half, choice.kind, choice.confidence)


def _factors(rows: Array, variance: float | None, freedom: int) -> Array | None:
    """Independent causes on the grid, so wide that 1.96 of them are the 95 % t interval."""
    if variance is None:
        return None
    widen = multiplier("pointwise", 0.95, 0, freedom) / normal_two_sided(0.95)
    return np.asarray(np.sqrt(variance) * widen * rows)


def _no_band(curve: Curve, points: int, terms: int) -> Finding:
    return finding(
        "warning",
        "fit.no-band",
        curve,
        f"{points} points determine the {terms} terms of the equation and leave none to tell the "
        "scatter: the band is not known.",
        "Use a lower --degree, or give more points.",
    )


def _joined(curve: Curve, flow: Array, value: Array, choice: Choice) -> Fit:
    """The points joined by a monotone piecewise cubic; repeated flows are averaged."""
    knots, at = np.unique(flow, return_inverse=True)
    means = np.bincount(at, value) / np.bincount(at)
    if len(knots) < 3:
        raise ChartError(
            f"a piecewise cubic needs 3 different flows, curve {curve.name!r} has {len(knots)}",
            where=where(curve),
        )
    from curvefit.models import monotone_cubic

    grid = np.linspace(knots[0], knots[-1], 201)
    said = finding(
        "info",
        "fit.no-band",
        curve,
        "The piecewise cubic runs through every point, which leaves nothing to tell the scatter: "
        "its band is not known.",
        "Use --family polynomial for a band.",
    )
    return Fit(
        curve.name,
        (curve,),
        "piecewise",
        None,
        (float(knots[0]), float(knots[-1])),
        Band(grid, monotone_cubic(knots, means, grid), None, None, choice.kind, choice.confidence),
        effective_points=float(len(flow)),
        reason="the piecewise cubic was asked for",
        knots_si=np.stack([knots, means], axis=1),
        findings=(said,),
    )
