"""Which equation is handed out for a traced line, and the candidates it won against."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.errors import InputError
from curvefit.fit.average import Average, Member, average
from curvefit.fit.choice import Choice, Settings
from curvefit.fit.piecewise import Piecewise
from curvefit.fit.power import fit_power
from curvefit.fit.said import finding, where
from curvefit.fit.shape import breaks_shape, hold_shape
from curvefit.models import evaluate, monotone_cubic, plain_from_legendre, power
from curvefit.records import QUANTITIES, Curve, Finding

__all__ = ["Chosen", "Equation", "at_points", "choose", "power_names"]

Array = NDArray[np.float64]
Candidates = tuple[tuple[str, float, str], ...]
Chosen = tuple["Equation", Candidates, str]


#: quantities whose default may be the power form, and by how much it must predict better
POWERED = ("head", "differential_pressure", "npsh_required")
CLEARLY = 2.0


@dataclass(frozen=True, slots=True, eq=False)
class Equation:
    """The curve that is handed out: a polynomial, a power form or knots."""

    family: str
    value: Array
    degree: int | None = None
    coefficients: Array | None = None
    parameters: dict[str, float] | None = None
    covariance: Array | None = None
    knots: Array | None = None


def choose(
    curve: Curve,
    choice: Choice,
    settings: Settings,
    fitted: Average,
    pieces: Piecewise | None,
    points: tuple[Array, Array, Array],
    grid: Array,
    said: list[Finding],
) -> Chosen:
    flow, value, _ = points
    candidates = [
        (f"polynomial of degree {m.degree}", m.criterion, f"weight {m.weight:.3f}")
        for m in fitted.members
    ]
    if pieces is not None:
        name = f"piecewise, {len(pieces.knots)} knots"
        candidates.append((name, pieces.criterion, "under a noise of its own, not comparable"))
    powered = _power_candidate(curve, choice, fitted, flow, value, grid)
    if powered is not None:
        chosen, criterion = powered
        asked = choice.family == "power"
        candidates.append(("power form", criterion, "asked for" if asked else ""))
        if asked:
            return chosen, tuple(candidates), "the power form was asked for"
        if pieces is None and criterion < fitted.best.criterion - CLEARLY:
            return chosen, tuple(candidates), "the power form predicts best (smallest AICc)"
    if pieces is not None and choice.family != "polynomial":
        missed = float(
            np.sqrt(np.mean((value - fitted.basis(flow) @ fitted.best.coefficients) ** 2))
        )
        share = missed / (float(np.ptp(value)) or 1.0)
        asked = choice.family == "piecewise"
        if asked or (share > settings.poor and choice.degree is None and not choice.without):
            knots = np.stack([pieces.knots, pieces.values], axis=1)
            chosen = Equation("piecewise", pieces.value(grid), knots=knots)
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
) -> Chosen:
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
                    f"The fit of the {word} {broken}, and so does the line: it was left free.",
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
    chosen = Equation("polynomial", np.asarray(value), degree, coefficients, covariance=block)
    return chosen, tuple(candidates), reason


def _held(member: Member) -> tuple[int, ...]:
    """(0,) where the constant term was held at zero."""
    return (0,) if member.terms.shape[1] < member.degree + 1 else ()


def _power_candidate(
    curve: Curve, choice: Choice, fitted: Average, flow: Array, value: Array, grid: Array
) -> tuple[Equation, float] | None:
    """The power form and its criterion, where it is asked for or the quantity may have it."""
    asked = choice.family == "power"
    free = choice.family == "auto" and choice.degree is None and not choice.without
    if not asked and not (free and curve.quantity in POWERED and fitted.low >= 0):
        return None
    found = fit_power(flow, value, fitted.noise.whitener)
    if not found.settled and not asked:
        return None
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
    m = len(flow)  # three parameters and the noise's scale
    criterion = m * np.log(max(found.squares, 1e-300) / m) + 8 + 40 / max(m - 5, 1e-3)
    return Equation("power", at, None, None, names, covariance), float(criterion)


def power_names(quantity: str, constant: float, factor: float, exponent: float) -> dict[str, float]:
    """The parameters under the names of the quantity's form: H0 − a·Qⁿ or c0 + c1·Qⁿ."""
    if quantity in ("head", "differential_pressure"):
        return {"H0": constant, "a": -factor, "n": exponent}
    return {"c0": constant, "c1": factor, "n": exponent}


def at_points(equation: Equation, flow: Array) -> Array:
    """The equation at the thinned points."""
    if equation.coefficients is not None:
        return evaluate(equation.coefficients, flow)
    if equation.knots is not None:
        return monotone_cubic(equation.knots[:, 0], equation.knots[:, 1], flow)
    constant, factor, exponent = (equation.parameters or {}).values()
    sign = -1.0 if "H0" in (equation.parameters or {}) else 1.0
    return power(np.maximum(flow, 0.0), constant, sign * factor, exponent)
