"""The fit of one traced line: equation, band, candidates and reason."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from curvefit.errors import InputError
from curvefit.fit.average import Average, average
from curvefit.fit.bands import spread, sup_t
from curvefit.fit.choice import Choice, Settings
from curvefit.fit.equations import Equation, at_points, choose
from curvefit.fit.piecewise import Piecewise, fit_piecewise
from curvefit.fit.quantiles import normal_two_sided
from curvefit.fit.said import finding, where
from curvefit.fit.shape import TURN
from curvefit.records import Band, Curve, Finding, Fit

__all__ = ["band_grid", "fit_traced", "line_uncertainty", "on_grid", "outside_finding", "thinned"]

Array = NDArray[np.float64]

#: quantities that are zero at zero flow
_FROM_ZERO = ("efficiency", "overall_efficiency")


def fit_traced(
    curve: Curve, choice: Choice, settings: Settings, rng: np.random.Generator | None
) -> Fit:
    """The fit of a traced curve with at least five points; see :func:`curvefit.fit.fit_curve`."""
    if choice.kind == "prediction":
        raise InputError(
            f"curve {curve.name!r} was traced: a prediction band is for measured points",
            where=where(curve),
            remedy="Ask for a pointwise or a simultaneous band.",
        )
    kept = thinned(curve.flow_si, settings.thin)
    flow, value = curve.flow_si[kept], curve.value_si[kept]
    u = line_uncertainty(curve)[kept]
    grid, outside = band_grid(flow, choice, settings)
    said: list[Finding] = []

    top = min(settings.highest, len(flow) - 4)
    if choice.degree is not None and choice.degree > top:
        raise InputError(
            f"degree {choice.degree} needs at least {choice.degree + 4} points, "
            f"curve {curve.name!r} has {len(flow)}",
            where=where(curve),
            remedy=f"Use a degree up to {top}.",
        )
    degrees = tuple(range(min(settings.lowest, top), top + 1))
    fitted = average(flow, value, u, degrees, settings)
    if _starts_at_zero(curve, fitted, choice):
        fitted = average(flow, value, u, degrees, settings, (0,), fitted.noise)
    pieces = _pieces_if_needed(curve, fitted, flow, value, u, choice, settings)

    centre, factors = (
        _from_average(fitted, grid)
        if pieces is None
        else (pieces.value(grid), pieces.factors(grid))
    )
    equation, candidates, reason = choose(
        curve, choice, settings, fitted, pieces, (flow, value, u), grid, said
    )
    unexplained = _unexplained(flow, value - np.interp(flow, grid, centre), u, grid)
    factors = np.concatenate([factors, (centre - equation.value)[None], unexplained[None]])
    calibration = on_grid(curve.calibration_si, curve.flow_si, grid)
    causes = factors if calibration is None else np.concatenate([factors, calibration])
    wide = normal_two_sided(choice.confidence)
    if choice.kind == "simultaneous":
        rng = rng or np.random.default_rng(0)
        wide = sup_t(causes, choice.confidence, rng, settings.draws)
    half = wide * spread(causes)
    if outside:
        said.append(outside_finding(curve, grid, flow))
    rms = float(np.sqrt(np.mean((value - at_points(equation, flow)) ** 2)))
    said += _doubts(curve, equation, rms, value, u, settings)
    return Fit(
        curve.name,
        (curve,),
        equation.family,  # type: ignore[arg-type]
        equation.degree,
        (float(flow[0]), float(flow[-1])),
        Band(
            grid,
            equation.value,
            equation.value - half,
            equation.value + half,
            choice.kind,
            choice.confidence,
        ),
        equation.coefficients,
        equation.parameters or {},
        equation.covariance,
        factors,
        calibration,
        rms,
        float(pieces.effective if pieces is not None else fitted.noise.effective),
        candidates=candidates,
        reason=reason,
        knots_si=equation.knots,
        findings=tuple(said),
    )


# --- points and grid --------------------------------------------------------------------------


def thinned(flow: Array, count: int) -> NDArray[np.intp]:
    """Indices of about `count` points evenly in flow, both ends among them."""
    if len(flow) <= count:
        return np.arange(len(flow))
    even = np.linspace(flow[0], flow[-1], count)
    right = np.clip(np.searchsorted(flow, even), 1, len(flow) - 1)
    nearer = right - (even - flow[right - 1] < flow[right] - even)
    return np.unique(nearer)


def line_uncertainty(curve: Curve) -> Array:
    """Standard uncertainty of the line alone at every point, > 0."""
    u = curve.trace_sigma_si if curve.trace_sigma_si is not None else curve.sigma_si
    assert u is not None
    span = float(np.ptp(curve.value_si)) or float(np.abs(curve.value_si).max()) or 1.0
    positive = u[u > 0]
    floor = max(1e-7 * span, 0.01 * float(np.median(positive)) if len(positive) else 0.0)
    return np.maximum(u, floor)


def band_grid(flow: Array, choice: Choice, settings: Settings) -> tuple[Array, bool]:
    """The flows of the band, and whether some lie outside the fitted range."""
    low, high = float(flow[0]), float(flow[-1])
    if choice.extrapolate is None:
        return np.linspace(low, high, settings.grid), False
    start, end = min(low, choice.extrapolate[0]), max(high, choice.extrapolate[1])
    return np.linspace(start, end, settings.grid), start < low or end > high


def _unexplained(flow: Array, residual: Array, u: Array, grid: Array) -> Array:
    """What the line shows and no equation follows, on the grid: a doubt of its own.

    A line that is known much better than polynomials can bend leaves residuals that are no noise:
    what their running mean has beyond two uncertainties.
    """
    around = np.ones(5) / 5
    weight = np.convolve(np.ones(len(flow)), around, "same")
    mean = np.convolve(residual, around, "same") / weight
    beyond = np.sign(mean) * np.maximum(np.abs(mean) - 2.0 * u, 0.0)
    return np.asarray(np.interp(grid, flow, beyond))


def outside_finding(curve: Curve, grid: Array, flow: Array) -> Finding:
    """Says that the curve was carried on beyond its points."""
    return finding(
        "warning",
        "fit.extrapolated",
        curve,
        f"The curve was carried on to {grid[0]:.4g}–{grid[-1]:.4g} m³/s; it is known from "
        f"{flow[0]:.4g} to {flow[-1]:.4g} m³/s only. Outside, the band holds only if the equation "
        "does.",
        "Leave --extrapolate out to stay inside.",
    )


def on_grid(causes: Array | None, flow: Array, grid: Array) -> Array | None:
    """Causes (n, k) at flows (n,) brought to the grid: (k, grid); straight on outside."""
    if causes is None:
        return None
    rows = np.stack([np.interp(grid, flow, column) for column in causes.T])
    share = max(2, len(flow) // 5)
    for outside, part in (
        (grid < flow[0], slice(0, share)),
        (grid > flow[-1], slice(-share, None)),
    ):
        if outside.any():
            line = np.polynomial.polynomial.polyfit(flow[part], causes[part], 1)
            rows[:, outside] = np.polynomial.polynomial.polyval(grid[outside], line)
    return rows


def _from_average(fitted: Average, grid: Array) -> tuple[Array, Array]:
    """The averaged curve and its independent causes (7, grid)."""
    basis = fitted.basis(grid)
    sizes, turn = np.linalg.eigh(fitted.covariance)
    root = turn * np.sqrt(np.clip(sizes, 0.0, None))
    return np.asarray(basis @ fitted.coefficients), np.asarray((basis @ root).T)


# --- which way --------------------------------------------------------------------------------


def _starts_at_zero(curve: Curve, fitted: Average, choice: Choice) -> bool:
    """Whether the equation may be held to zero at zero flow without going against the line."""
    if curve.quantity not in _FROM_ZERO or choice.without or fitted.low > 0.02 * fitted.high:
        return False
    basis = fitted.basis(np.zeros(1))
    sd = float(np.sqrt(np.einsum("ij,jk,ik->i", basis, fitted.covariance, basis))[0])
    return abs(float((basis @ fitted.coefficients)[0])) < 2.0 * sd and fitted.low >= 0.0


def _pieces_if_needed(
    curve: Curve,
    fitted: Average,
    flow: Array,
    value: Array,
    u: Array,
    choice: Choice,
    settings: Settings,
) -> Piecewise | None:
    """The piecewise cubic where it is asked for or where polynomials miss the line."""
    if choice.family == "piecewise":
        return fit_piecewise(flow, value, u, settings, TURN.get(curve.quantity))
    if len(flow) < 24:
        return None
    missed = value - fitted.basis(flow) @ fitted.coefficients
    rms, span = float(np.sqrt(np.mean(missed**2))), float(np.ptp(value))
    if rms < max(0.3 * settings.poor * span, settings.poor_sigmas * float(np.median(u))):
        return None
    pieces = fit_piecewise(flow, value, u, settings, TURN.get(curve.quantity))
    better = float(np.sqrt(np.mean((value - pieces.value(flow)) ** 2)))
    return pieces if better < 0.6 * rms else None


def _doubts(
    curve: Curve, equation: Equation, rms: float, value: Array, u: Array, settings: Settings
) -> list[Finding]:
    span = float(np.ptp(value)) or 1.0
    if rms < max(2.0 * settings.poor * span, settings.poor_sigmas * float(np.median(u))):
        return []
    return [
        finding(
            "warning",
            "fit.misses",
            curve,
            f"The fit misses the line by {rms / span:.2%} of its range (root mean square), far "
            "more than the line's own uncertainty; its band says so.",
            "Use the curve's points, or --family piecewise.",
        )
    ]
