"""Plots of fits: points, equation and band; residuals with their band; leverage of the ends.

Drawn to be told apart in black and white: by line style and marker, never by colour alone.
"""

from __future__ import annotations

import io
from typing import Any

import numpy as np
from numpy.typing import NDArray

from curvefit.records import QUANTITIES, Curve
from curvefit.units import unit
from curvefit.write.outgoing import FitOut

__all__ = ["fit_plot", "leverage"]

Array = NDArray[np.float64]

_MARKS = "osD^vPX*"
_KINDS = {
    "pointwise": "{:.4g} % confidence of the curve, at each flow",
    "simultaneous": "{:.4g} % confidence of the whole curve",
    "prediction": "{:.4g} % prediction of a new point",
}


def fit_plot(fit: FitOut, dpi: int = 120) -> bytes:
    """A PNG of one fit: above points, equation and band, then residuals, then leverage.

    Leverage is that of a polynomial's points; other fits have no such panel.

    Parameters
    ----------
    fit : in the units in which it leaves
    dpi : resolution; the figure is 7 × 7.5 inches
    """
    from matplotlib.figure import Figure

    figure = Figure(figsize=(7.0, 7.5), layout="constrained")
    levered = len(fit.fit.curves) == 1 and fit.fit.family == "polynomial"
    heights = (3.0, 1.3, 1.0) if levered else (3.0, 1.3)
    panels = figure.subplots(len(heights), 1, sharex=True, height_ratios=heights)
    top, middle, bottom = panels[0], panels[1], panels[-1]
    quantity = QUANTITIES[fit.fit.curve.quantity]
    value_unit, flow_unit = unit(fit.units.value).print, unit(fit.units.flow).print

    _curve(top, fit)
    top.set_ylabel(f"{quantity.title} [{value_unit or '–'}]")
    top.set_title(_title(fit), fontsize=10)
    _residuals(middle, fit)
    middle.set_ylabel(f"residual [{value_unit or '–'}]")
    if levered:
        _leverages(bottom, fit)
        bottom.set_ylabel("leverage")
    bottom.set_xlabel(f"Flow [{flow_unit}]")
    for axes in panels:
        axes.grid(True, color="0.85", linewidth=0.6)
        axes.set_axisbelow(True)
    picture = io.BytesIO()
    # no date and no program version: the same fit gives the same bytes
    figure.savefig(picture, format="png", dpi=dpi, metadata={"Software": None})
    return picture.getvalue()


def _title(fit: FitOut) -> str:
    what = {
        "polynomial": f"polynomial of degree {fit.fit.degree}",
        "power": "power form",
        "affinity": "one law for all its curves",
        "piecewise": "piecewise cubic",
    }[fit.fit.family]
    return f"{fit.fit.name}: {what}"


def _curve(axes: Any, fit: FitOut) -> None:
    if np.isfinite(fit.low).all():
        label = _KINDS[fit.fit.band.kind].format(100 * fit.fit.band.confidence)
        axes.fill_between(fit.flow, fit.low, fit.high, color="0.8", linewidth=0, label=label)
        for edge in (fit.low, fit.high):
            axes.plot(fit.flow, edge, color="0.3", linewidth=0.7, linestyle=(0, (4, 2)))
    for number, curve in enumerate(fit.fit.curves):
        flow, value = _points(fit, curve)
        mark = _MARKS[number % len(_MARKS)]
        name = "points" if len(fit.fit.curves) == 1 else curve.label or curve.name
        axes.plot(
            flow, value, mark, color="black", markersize=3.5, markerfacecolor="white", label=name
        )
    low, high = fit.flow_range
    inside = (fit.flow >= low - 1e-9 * abs(low)) & (fit.flow <= high + 1e-9 * abs(high))
    axes.plot(fit.flow[inside], fit.value[inside], "k-", linewidth=1.3, label="fit")
    if not inside.all():
        outside = np.where(inside, np.nan, fit.value)
        axes.plot(fit.flow, outside, "k:", linewidth=1.5, label="carried on, not confirmed")
    axes.legend(fontsize=8, loc="best")


def _residuals(axes: Any, fit: FitOut) -> None:
    """Points less fit, in the band less fit; for families none of the members is at this ratio."""
    axes.axhline(0.0, color="black", linewidth=0.8)
    if np.isfinite(fit.low).all():
        axes.fill_between(
            fit.flow, fit.low - fit.value, fit.high - fit.value, color="0.8", linewidth=0
        )
    if len(fit.fit.curves) > 1:
        axes.text(0.5, 0.6, "no curve was drawn here", transform=axes.transAxes, ha="center")
        return
    flow, value = _points(fit, fit.fit.curve)
    inside = (flow >= fit.flow[0]) & (flow <= fit.flow[-1])
    residual = value[inside] - np.interp(flow[inside], fit.flow, fit.value)
    axes.plot(flow[inside], residual, "o", color="black", markersize=2.5, markerfacecolor="white")


def _leverages(axes: Any, fit: FitOut) -> None:
    """How much the fit at each point hangs on that point alone: near one, on nothing else."""
    assert fit.fit.degree is not None
    flow, _ = _points(fit, fit.fit.curve)
    if len(np.unique(flow)) <= fit.fit.degree:
        return
    axes.vlines(flow, 0, leverage(flow, fit.fit.degree), color="black", linewidth=1.2)
    axes.set_ylim(bottom=0)


def leverage(flow: Array, degree: int) -> Array:
    """Diagonal of the hat matrix of a polynomial's least squares at flows (n,).

    Notes
    -----
    The sum is the number of terms; 2–3 times their mean marks points that pull the curve.
    """
    low, high = float(flow.min()), float(flow.max())
    t = (2 * flow - low - high) / (high - low)
    q, _ = np.linalg.qr(np.polynomial.legendre.legvander(t, degree))
    return np.asarray(np.sum(q**2, axis=1))


def _points(fit: FitOut, curve: Curve, most: int = 60) -> tuple[Array, Array]:
    """Points of a curve in the fit's units, at most so many of a traced line."""
    n = len(curve.flow_si)
    at = np.unique(np.linspace(0, n - 1, min(n, most)).round().astype(int))
    return fit.units.flows(curve.flow_si[at]), fit.units.values(curve.value_si[at])
