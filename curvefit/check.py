"""Cross-checks of what was read: does the set of curves obey the physics of one pump?

Each check compares numbers that were read independently of each other, so that a misread tick, a
wrong unit or a curve given to the wrong axis shows. Tolerances allow for the uncertainty of the
reading and for how well makers' own curves agree with each other (about one per cent, common
practice, no source).
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from curvefit.errors import Location
from curvefit.records import QUANTITIES, Curve, Finding, Fit, Pump
from curvefit.units import G_N, RHO_WATER

__all__ = ["Tolerances", "check"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Tolerances:
    """own : relative disagreement between makers' own curves that is let pass.

    sigmas : how many combined standard uncertainties come on top. low_efficiency : where the
    efficiency is smaller (and less than half its peak), ρgQH/P says nothing. shut_off : share of
    its peak that an efficiency may have at zero flow, and how much more a share of the flow range
    adds to it. peak : hardly a pump's best efficiency is smaller (an overall efficiency: half of
    it); npsh : no pump's NPSHr [m] is larger (common practice, no source). trim : exponents of
    head against diameter (or speed) between which a family is believed.
    """

    own: float = 0.015
    sigmas: float = 3.0
    low_efficiency: float = 0.2
    shut_off: tuple[float, float] = (0.1, 6.0)
    peak: float = 0.15
    npsh: float = 40.0
    trim: tuple[float, float] = (0.8, 4.5)
    speed: tuple[float, float] = (1.7, 2.3)
    density: float = RHO_WATER


def check(
    curves: Sequence[Curve],
    fits: Sequence[Fit],
    pumps: Sequence[Pump] = (),
    tolerances: Tolerances | None = None,
) -> tuple[Finding, ...]:
    """The findings of the physics checks on the curves of one page.

    Parameters
    ----------
    curves : all curves of the page
    fits : their fits; the curves' own points are what is checked
    pumps : for the density of the liquid, where it is stated
    tolerances : what is let pass
    """
    allowed = tolerances or Tolerances()
    real = [c for c in curves if not c.iso and len(c.flow_si) > 3]
    found: list[Finding] = []
    for curve in real:
        found += _range(curve)
        found += _usual(curve, allowed)
        found += _shape(curve)
    density = {p.name: p.density_si for p in pumps if p.density_si is not None}
    for group in _pumps(real):
        found += _power_identity(group, density, allowed)
    for family in _families(real):
        found += _family(family, allowed)
    return tuple(found)


# --- one curve --------------------------------------------------------------------------------


def _range(curve: Curve) -> Iterable[Finding]:
    """Values that no pump has."""
    top = float(curve.value_si.max())
    if curve.quantity in ("efficiency", "overall_efficiency") and top > 1.0:
        yield _finding(
            "error",
            "check.efficiency-over-100",
            curve,
            f"The efficiency reaches {top:.1%}; no pump exceeds 100 %.",
            "Check the marks of its axis, or name the curve's quantity in the notes.",
        )
    if float(curve.value_si.min()) < -0.01 * top and curve.quantity != "differential_pressure":
        yield _finding(
            "warning",
            "check.negative",
            curve,
            f"The {_word(curve)} falls below zero.",
            "Check the marks of its axis.",
        )
    if float(curve.flow_si[0]) < -0.01 * float(curve.flow_si[-1]):
        yield _finding(
            "warning",
            "check.negative",
            curve,
            "The flow falls below zero.",
            "Check the marks of the flow axis.",
        )


def _usual(curve: Curve, allowed: Tolerances) -> Iterable[Finding]:
    """Values that hardly any pump has: a scale or an axis was mistaken for another."""
    top = float(curve.value_si.max())
    if curve.quantity in ("efficiency", "overall_efficiency"):
        start = float(curve.flow_si[0] / curve.flow_si[-1]) if curve.flow_si[-1] > 0 else 1.0
        limit = (allowed.shut_off[0] + allowed.shut_off[1] * max(start, 0.0)) * top
        limit += allowed.sigmas * float(_uncertainty(curve)[0])
        if start < 0.08 and curve.value_si[0] > limit:
            yield _finding(
                "warning",
                "check.efficiency-shut-off",
                curve,
                f"The efficiency is {curve.value_si[0]:.1%} near zero flow, where it is zero for "
                f"any pump ({limit:.1%} allowed).",
                "Check the marks of its axis, or name the curve's quantity in the notes.",
            )
        least = allowed.peak * (1.0 if curve.quantity == "efficiency" else 0.5)
        if top < least:
            yield _implausible(curve, f"{top:.1%}", f"{least:.1%} or more")
    if curve.quantity == "npsh_required" and top > allowed.npsh:
        yield _implausible(curve, f"{top:.3g} m", f"{allowed.npsh:g} m or less")


def _implausible(curve: Curve, top: str, usual: str) -> Finding:
    return _finding(
        "warning",
        "check.implausible",
        curve,
        f"The {_word(curve)} reaches {top}, where {usual} is usual.",
        "Check the unit and the marks of its axis, or name the curve's axis in the notes.",
    )


def _shape(curve: Curve) -> Iterable[Finding]:
    """A line whose course does not fit its quantity."""
    start, end, top = _levels(curve)
    span = max(top, abs(start), abs(end), 1e-300)
    u = _uncertainty(curve)
    step = 0.02 * span + 3.0 * float(np.median(u))
    if curve.quantity in ("head", "differential_pressure"):
        if end > start + step and end >= top - step:
            yield _finding(
                "warning",
                "check.head-rises",
                curve,
                "The head rises over the whole flow range; a pump's head falls.",
                "Name the curve's quantity or axis in the notes if it is not a head curve.",
            )
        elif top > start + step:
            yield _finding(
                "info",
                "check.unstable",
                curve,
                f"The head rises from {start:.4g} m at the smallest flow to {top:.4g} m before it "
                "falls: near shut-off one head has two flows.",
                "Avoid duties above the smaller of the two heads.",
            )
    if curve.quantity == "npsh_required" and end < start - step:
        yield _finding(
            "warning",
            "check.npsh-falls",
            curve,
            f"NPSHr falls from {start:.3g} to {end:.3g} m; it grows with flow.",
            "Name the curve's quantity or axis in the notes if it is not NPSHr.",
        )
    if curve.quantity in ("efficiency", "overall_efficiency") and end < start - step >= 0:
        falls = float(np.mean(np.diff(curve.value_si) <= 0))
        if falls > 0.95:
            yield _finding(
                "warning",
                "check.efficiency-falls",
                curve,
                "The efficiency falls over the whole flow range; it starts from zero flow at zero.",
                "Name the curve's quantity or axis in the notes if it is not the efficiency.",
            )


def _levels(curve: Curve) -> tuple[float, float, float]:
    """Value at the first and the last 2 % of points, and the largest."""
    n = max(1, len(curve.value_si) // 50)
    v = curve.value_si
    return float(np.median(v[:n])), float(np.median(v[-n:])), float(v.max())


# --- one pump ---------------------------------------------------------------------------------

_CONFUSIONS = (
    (0.7457, "kW and hp"),
    (0.7355, "kW and metric hp"),
    (3.6, "l/s and m³/h"),
    (4.4029, "m³/h and US gpm"),
    (1.2009, "US and imperial gallons"),
    (3.2808, "m and ft"),
    (10.0, "a factor of ten"),
    (9.80665, "m and kPa"),
    (15.850, "l/s and US gpm"),
)


def _pumps(curves: Sequence[Curve]) -> list[dict[str, Curve]]:
    """Curves of one pump, impeller and speed by quantity; those that are there twice are left."""
    groups: dict[tuple[object, ...], dict[str, list[Curve]]] = defaultdict(
        lambda: defaultdict(list)
    )
    for c in curves:
        key = (c.pump, _rounded(c.diameter_si), _rounded(c.speed_si), c.stages)
        groups[key][c.quantity].append(c)
    return [{q: cs[0] for q, cs in g.items() if len(cs) == 1} for g in groups.values()]


def _power_identity(
    group: dict[str, Curve], density: dict[str, float], allowed: Tolerances
) -> Iterable[Finding]:
    """η·P against ρgQH: efficiency pairs with shaft power, overall efficiency with input power."""
    head = group.get("head")
    for efficiency_name, power_name in (
        ("efficiency", "shaft_power"),
        ("overall_efficiency", "input_power"),
    ):
        efficiency, power = group.get(efficiency_name), group.get(power_name)
        if head is None or efficiency is None or power is None:
            continue
        liquid = density.get(head.pump, allowed.density)
        compared = _ratio(head, efficiency, power, liquid, allowed)
        if compared is None:
            continue
        ratio, u = compared
        if abs(np.log(ratio)) <= allowed.own + allowed.sigmas * u:
            continue
        yield _finding(
            "warning",
            "check.power-identity",
            power,
            f"ρgQH/(η·P) is {ratio:.3f} over the common flows, where 1.00 ± "
            f"{allowed.own + allowed.sigmas * u:.3f} is expected "
            f"for {liquid:g} kg/m³{_confusion(ratio)}: head, efficiency, power or flow is "
            "misread, or the liquid is another.",
            "Compare the axis marks in the overlay with the page; state the pump's density "
            "in the notes for another liquid.",
        )


def _ratio(
    head: Curve, efficiency: Curve, power: Curve, density: float, allowed: Tolerances
) -> tuple[float, float] | None:
    """Median of ρgQH/(ηP) and its relative standard uncertainty; None without common flows."""
    low = max(c.flow_si[0] for c in (head, efficiency, power))
    high = min(c.flow_si[-1] for c in (head, efficiency, power))
    span = max(c.flow_si[-1] for c in (head, efficiency, power))
    if high - low < 0.2 * span:
        return None
    flow = np.linspace(max(low, 0.1 * span), high, 41)
    h, e, p = (np.interp(flow, c.flow_si, c.value_si) for c in (head, efficiency, power))
    low_efficiency = min(allowed.low_efficiency, 0.5 * float(e.max()))
    good = (e > low_efficiency) & (p > 0) & (h > 0)
    if good.sum() < 5:
        return None
    flow, h, e, p = flow[good], h[good], e[good], p[good]
    ratio = density * G_N * flow * h / (e * p)
    relative = [
        np.interp(flow, c.flow_si, _uncertainty(c)) / v
        for c, v in ((head, h), (efficiency, e), (power, p))
    ]
    u = np.sqrt(np.sum(np.square(relative), axis=0))
    return float(np.median(ratio)), float(np.median(u))


def _confusion(ratio: float) -> str:
    """The unit mix-up that explains a ratio, in words; "" where none does."""
    for factor, words in _CONFUSIONS:
        if abs(abs(np.log(ratio)) - abs(np.log(factor))) < 0.02:
            return f"; a mix-up of {words} would explain it"
    return ""


# --- one family -------------------------------------------------------------------------------


def _families(curves: Sequence[Curve]) -> list[list[tuple[float, Curve]]]:
    """Head curves of one pump that differ in diameter alone, or in speed alone, by rising size."""
    by: dict[tuple[object, ...], list[tuple[float, Curve]]] = defaultdict(list)
    for c in curves:
        if c.quantity not in ("head", "differential_pressure"):
            continue
        if c.diameter_si is not None:
            by["D", c.pump, c.panel and c.panel.name, _rounded(c.speed_si)].append(
                (c.diameter_si, c)
            )
        elif c.speed_si is not None:
            by["n", c.pump, c.panel and c.panel.name].append((c.speed_si, c))
    return [sorted(f, key=lambda m: m[0]) for f in by.values() if len(f) > 1]


def _family(family: list[tuple[float, Curve]], allowed: Tolerances) -> Iterable[Finding]:
    """A larger impeller, or a faster one, gives more head: by about the square of the ratio."""
    of_speed = family[0][1].diameter_si is None
    low, high = allowed.speed if of_speed else allowed.trim
    for (small, a), (large, b) in pairwise(family):
        if small <= 0 or large / small < 1.005:
            continue
        exponent = _exponent(a, b, small, large)
        if exponent is None:
            continue
        n, doubt = exponent[0], 2.0 * exponent[1]
        if low <= n + doubt and n - doubt <= high:
            continue
        what = "speed" if of_speed else "diameter"
        yield _finding(
            "warning",
            "check.family",
            b,
            f"Between {a.label or a.name} and {b.label or b.name} the head grows with the power "
            f"{n:.1f} of the {what}; {low:g} to {high:g} is expected.",
            f"Check which label belongs to which line; give the {what} in the notes.",
        )


def _exponent(a: Curve, b: Curve, small: float, large: float) -> tuple[float, float] | None:
    """Exponent n of H₂/H₁ = (x₂/x₁)ⁿ at the smallest common relative flow, and its uncertainty."""
    at = max(a.flow_si[0] / small, b.flow_si[0] / large)
    h1 = float(np.interp(at * small, a.flow_si, a.value_si))
    h2 = float(np.interp(at * large, b.flow_si, b.value_si))
    if h1 <= 0 or h2 <= 0 or at * small > a.flow_si[-1] or at * large > b.flow_si[-1]:
        return None
    u = np.hypot(_uncertainty(a)[0] / h1, _uncertainty(b)[0] / h2)
    ratio = np.log(large / small)
    return float(np.log(h2 / h1) / ratio), float((u + 0.005) / ratio)


# --- words ------------------------------------------------------------------------------------


def _uncertainty(curve: Curve) -> Array:
    return np.zeros(len(curve.value_si)) if curve.sigma_si is None else curve.sigma_si


def _rounded(value: float | None) -> float | None:
    return None if value is None else float(f"{value:.4g}")


def _word(curve: Curve) -> str:
    return QUANTITIES[curve.quantity].title.lower()


def _finding(severity: str, code: str, curve: Curve, message: str, remedy: str) -> Finding:
    panel = curve.panel.name if curve.panel is not None else None
    where = Location(panel=panel, axis=curve.value_axis, curve=curve.name)
    return Finding(severity, code, message, where, remedy)  # type: ignore[arg-type]
