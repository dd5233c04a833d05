"""The fit of one traced line: equation, band, candidates and reason."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.errors import InputError
from curvefit.fit.average import Average, Member, average
from curvefit.fit.bands import spread, sup_t
from curvefit.fit.choice import Choice, Settings
from curvefit.fit.piecewise import Piecewise, fit_piecewise
from curvefit.fit.power import fit_power
from curvefit.fit.quantiles import normal_two_sided
from curvefit.fit.said import finding, where
from curvefit.fit.shape import breaks_shape, hold_shape
from curvefit.models import evaluate, plain_from_legendre, power
from curvefit.records import QUANTITIES, Band, Curve, Finding, Fit

__all__ = ["fit_traced"]

Array = NDArray[np.float64]

#: quantities that are zero at zero flow
_FROM_ZERO = ("efficiency", "overall_efficiency")


@dataclass(frozen=True, slots=True, eq=False)
class _Equation:
    """The curve that is handed out: a polynomial, a power form or knots."""

    family: str
    value: Array
    degree: int | None = None
    coefficients: Array | None = None
    parameters: dict[str, float] | None = None
    covariance: Array | None = None
    knots: Array | None = None


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
        else (pieces.smooth(grid), pieces.factors(grid))
    )
    equation, candidates, reason = _equation(
        curve, choice, settings, fitted, pieces, (flow, value, u), grid, said
    )
    factors = np.concatenate([factors, (centre - equation.value)[None]])
    calibration = on_grid(curve.calibration_si, curve.flow_si, grid)
    causes = factors if calibration is None else np.concatenate([factors, calibration])
    wide = normal_two_sided(choice.confidence)
    if choice.kind == "simultaneous":
        rng = rng or np.random.default_rng(0)
        wide = sup_t(causes, choice.confidence, rng, settings.draws)
    half = wide * spread(causes)
    if outside:
        said.append(outside_finding(curve, grid, flow))
    at_points = _at(equation, flow, fitted)
    rms = float(np.sqrt(np.mean((value - at_points) ** 2)))
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


# --- which equation ---------------------------------------------------------------------------


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
        return fit_piecewise(flow, value, u, settings)
    if len(flow) < 24:
        return None
    missed = value - fitted.basis(flow) @ fitted.coefficients
    rms, span = float(np.sqrt(np.mean(missed**2))), float(np.ptp(value))
    if rms < max(0.3 * settings.poor * span, settings.poor_sigmas * float(np.median(u))):
        return None
    pieces = fit_piecewise(flow, value, u, settings)
    better = float(np.sqrt(np.mean((value - pieces.value(flow)) ** 2)))
    return pieces if better < 0.6 * rms else None


def _equation(
    curve: Curve,
    choice: Choice,
    settings: Settings,
    fitted: Average,
    pieces: Piecewise | None,
    points: tuple[Array, Array, Array],
    grid: Array,
    said: list[Finding],
) -> tuple[_Equation, tuple[tuple[str, float, str], ...], str]:
    flow, value, u = points
    candidates = [
        (f"polynomial of degree {m.degree}", m.criterion, f"weight {m.weight:.3f}")
        for m in fitted.members
    ]
    if pieces is not None:
        candidates.append((f"piecewise, {len(pieces.knots)} knots", pieces.criterion, ""))
    if choice.family == "power":
        chosen, squares = _power(curve, fitted, flow, value, grid)
        m = len(flow)
        criterion = m * np.log(max(squares, 1e-300) / m) + 8 + 40 / max(m - 5, 1e-3)
        candidates.append(("power form", float(criterion), "asked for"))
        return chosen, tuple(candidates), "the power form was asked for"
    if pieces is not None and choice.family != "polynomial":
        missed = float(
            np.sqrt(np.mean((value - fitted.basis(flow) @ fitted.best.coefficients) ** 2))
        )
        share = missed / (float(np.ptp(value)) or 1.0)
        asked = choice.family == "piecewise"
        if asked or (share > settings.poor and choice.degree is None and not choice.without):
            knots = np.stack([pieces.knots, pieces.values], axis=1)
            chosen = _Equation("piecewise", _clipped(pieces, grid), knots=knots)
            if asked:
                return chosen, tuple(candidates), "the piecewise cubic was asked for"
            said.append(
                finding(
                    "info",
                    "fit.piecewise",
                    curve,
                    f"No polynomial up to degree {settings.highest} follows the line: it misses it "
                    f"by {share:.2%} of the range; a piecewise cubic is given instead.",
                    "Use --family polynomial for an equation with a wider band.",
                )
            )
            return chosen, tuple(candidates), "no polynomial follows the line"
    return _polynomial(curve, choice, settings, fitted, points, grid, said, candidates)


def _polynomial(
    curve: Curve,
    choice: Choice,
    settings: Settings,
    fitted: Average,
    points: tuple[Array, Array, Array],
    grid: Array,
    said: list[Finding],
    candidates: list[tuple[str, float, str]],
) -> tuple[_Equation, tuple[tuple[str, float, str], ...], str]:
    member, reason = fitted.best, f"degree {fitted.best.degree} predicts best (smallest AICc)"
    if choice.degree is not None or choice.without:
        degree = choice.degree or fitted.best.degree
        own = average(*points, (degree,), settings, choice.without, fitted.noise)
        member, reason = own.members[0], f"degree {degree} was asked for"
        if choice.without:
            held = ", ".join(
                f"Q{k}" if k > 1 else ("Q" if k else "constant") for k in choice.without
            )
            reason += f", without {held}"
        name = f"polynomial of degree {degree}"
        if choice.without or name not in [c[0] for c in candidates]:
            candidates.append((name, member.criterion, "asked for"))
    low, high = fitted.low, fitted.high
    matrix = plain_from_legendre(low, high, member.degree)
    legendre = member.coefficients
    broken = breaks_shape(curve.quantity, matrix @ legendre[: member.degree + 1], low, high)
    if broken:
        nearest, allowed = hold_shape(curve.quantity, member, fitted)
        word = QUANTITIES[curve.quantity].title.lower()
        if allowed:
            legendre = nearest
            reason += f"; held to one turn (the free fit {broken})"
            said.append(
                finding(
                    "info",
                    "fit.shape-held",
                    curve,
                    f"The free fit of the {word} {broken}; within its uncertainty one turn fits as "
                    "well, and that is given.",
                )
            )
        else:
            said.append(
                finding(
                    "info",
                    "fit.shape-free",
                    curve,
                    f"The fit of the {word} {broken}, and the line itself does so: it was left free.",
                    "Look at the overlay; correct the path in the notes if the line was lost.",
                )
            )
    degree = member.degree
    coefficients = matrix @ legendre[: degree + 1]
    for k in choice.without or (() if 0 not in _held(member) else (0,)):
        if k <= degree:
            coefficients[k] = 0.0
    block = matrix @ member.covariance[: degree + 1, : degree + 1] @ matrix.T
    value = np.polynomial.legendre.legval(
        (2 * grid - low - high) / (high - low), legendre[: degree + 1]
    )
    chosen = _Equation("polynomial", np.asarray(value), degree, coefficients, covariance=block)
    return chosen, tuple(candidates), reason


def _held(member: Member) -> tuple[int, ...]:
    """(0,) where the constant term was held at zero."""
    return (0,) if member.terms.shape[1] < member.degree + 1 else ()


def _power(
    curve: Curve, fitted: Average, flow: Array, value: Array, grid: Array
) -> tuple[_Equation, float]:
    found = fit_power(flow, value, fitted.noise.whitener)
    if not found.settled:
        raise InputError(
            f"no power form follows curve {curve.name!r}: its exponent runs to "
            f"{found.parameters[2]:.2g}",
            where=where(curve),
            remedy="Use --family polynomial.",
        )
    constant, factor, exponent = map(float, found.parameters)
    names = power_names(curve.quantity, constant, factor, exponent)
    freedom = max(len(flow) - 3, 1)
    scale = max(found.squares / freedom, fitted.noise.scale**2)
    turn = np.diag([1.0, -1.0 if "H0" in names else 1.0, 1.0])
    covariance = turn @ (found.cofactor * scale) @ turn
    at = power(np.maximum(grid, 0.0), constant, factor, exponent)
    return _Equation("power", at, None, None, names, covariance), found.squares


def power_names(quantity: str, constant: float, factor: float, exponent: float) -> dict[str, float]:
    """The parameters under the names of the quantity's form: H0 − a·Qⁿ or c0 + c1·Qⁿ."""
    if quantity in ("head", "differential_pressure"):
        return {"H0": constant, "a": -factor, "n": exponent}
    return {"c0": constant, "c1": factor, "n": exponent}


def _clipped(pieces: Piecewise, grid: Array) -> Array:
    """The piecewise cubic inside its knots, the smooth one outside."""
    inside = (grid >= pieces.knots[0]) & (grid <= pieces.knots[-1])
    return np.where(inside, pieces.value(grid), pieces.smooth(grid))


def _at(equation: _Equation, flow: Array, fitted: Average) -> Array:
    """The equation at the thinned points."""
    if equation.coefficients is not None:
        return evaluate(equation.coefficients, flow)
    if equation.knots is not None:
        from curvefit.models import monotone_cubic

        return monotone_cubic(equation.knots[:, 0], equation.knots[:, 1], flow)
    constant, factor, exponent = (equation.parameters or {}).values()
    sign = -1.0 if "H0" in (equation.parameters or {}) else 1.0
    return power(np.maximum(flow, 0.0), constant, sign * factor, exponent)


def _doubts(
    curve: Curve, equation: _Equation, rms: float, value: Array, u: Array, settings: Settings
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
