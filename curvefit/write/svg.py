"""Plots as inline SVG: a curve with its equation and band, and what is left over.

Colours come from the page's style sheet (light, dark, print); without one the plots are black.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from html import escape

import numpy as np
from numpy.typing import NDArray

from curvefit.write.outgoing import Z95, CurveOut, FitOut

__all__ = ["Frame", "curve_plot", "nice_ticks", "residual_plot"]

Array = NDArray[np.float64]


def curve_plot(curve: CurveOut, fit: FitOut | None, flow: str, value: str) -> str:
    """The SVG of a curve's points with its equation and band.

    Parameters
    ----------
    flow, value : titles of the axes, with units.
    """
    high = [curve.value, *([fit.value, _finite(fit.high)] if fit is not None else [])]
    low = [curve.value, *([fit.value, _finite(fit.low)] if fit is not None else [])]
    frame = Frame(_span([curve.flow]), _span([*low, *high], zero=True), 640, 330)
    parts = [frame.axes(flow, value)]
    if fit is not None:
        parts += [frame.band(fit.flow, fit.low, fit.high), frame.line(fit.flow, fit.value, "fit")]
    bridged = np.array(["bridged" in f for f in curve.flags])
    keep = _thin(len(curve.flow), 160)
    solid, gap = keep[~bridged[keep]], keep[bridged[keep]]
    parts += [frame.dots(curve.flow[solid], curve.value[solid], "dot")]
    parts += [frame.dots(curve.flow[gap], curve.value[gap], "gap")]
    text = f"{curve.curve.name}: {value} against {flow}, {len(curve.flow)} points"
    return frame.whole(parts, text + (" with fitted curve and band" if fit is not None else ""))


def residual_plot(curve: CurveOut, fit: FitOut, flow: str, unit: str) -> str:
    """The SVG of points minus equation, the points' own uncertainty and the equation's band."""
    inside = (curve.flow >= fit.flow[0]) & (curve.flow <= fit.flow[-1])
    x = curve.flow[inside]
    left = curve.value[inside] - fit.at(x)
    u = Z95 * curve.trace_u[inside]
    low, high = fit.low - fit.value, fit.high - fit.value
    reach = [left, _finite(u), _finite(-u), _finite(low), _finite(high)]
    frame = Frame(_span([curve.flow]), _span(reach), 640, 200)
    parts = [frame.axes(flow, f"point − equation [{unit}]")]
    parts += [frame.band(fit.flow, low, high)]
    parts += [frame.line(x, u, "own"), frame.line(x, -u, "own")]
    parts += [frame.line(np.array(frame.x), np.zeros(2), "zero")]
    keep = _thin(len(x), 300)
    parts += [frame.dots(x[keep], left[keep], "dot")]
    rms = float(np.sqrt(np.mean(left**2))) if len(left) else math.nan
    text = f"{curve.curve.name}: points minus equation, root mean square {rms:.3g} {unit}"
    return frame.whole(parts, text)


def nice_ticks(low: float, high: float, about: int = 6) -> list[float]:
    """Round numbers from low to high, steps of 1, 2, 2.5 or 5 times a power of ten."""
    if not high > low:
        return [low]
    raw = (high - low) / about
    power = 10.0 ** math.floor(math.log10(raw))
    step = next(s * power for s in (1, 2, 2.5, 5, 10) if s * power >= raw * 0.999)
    first = math.ceil(low / step - 1e-9)
    last = math.floor(high / step + 1e-9)
    return [float(f"{k * step:.12g}") for k in range(first, last + 1)]


def _finite(values: Array) -> Array:
    return values[np.isfinite(values)]


def _span(groups: Sequence[Array], zero: bool = False) -> tuple[float, float]:
    """The range of all numbers with a margin; down to zero where that wastes little."""
    values = np.concatenate([np.asarray(g, float).ravel() for g in groups])
    values = values[np.isfinite(values)]
    low, high = (float(values.min()), float(values.max())) if len(values) else (0.0, 1.0)
    if zero and 0 < low < 0.6 * high:
        low = 0.0
    margin = 0.04 * (high - low) or 0.04 * abs(high) or 1.0
    return (low if zero and low == 0 else low - margin), high + margin


def _thin(n: int, most: int) -> NDArray[np.intp]:
    return (
        np.unique(np.linspace(0, n - 1, min(n, most)).round().astype(int))
        if n
        else np.zeros(0, int)
    )


@dataclass(frozen=True, slots=True)
class Frame:
    """The map from numbers to a drawing of width × height."""

    x: tuple[float, float]
    y: tuple[float, float]
    width: float
    height: float
    left: float = 66
    right: float = 12
    top: float = 10
    bottom: float = 44

    def at(self, x: Array, y: Array) -> list[tuple[float, float]]:
        w, h = self.width - self.left - self.right, self.height - self.top - self.bottom
        px = self.left + (np.asarray(x) - self.x[0]) / (self.x[1] - self.x[0]) * w
        py = self.top + (self.y[1] - np.asarray(y)) / (self.y[1] - self.y[0]) * h
        return [(float(a), float(b)) for a, b in zip(px, py, strict=True)]

    def axes(self, x_title: str, y_title: str) -> str:
        """Box, grid, numbers and titles."""
        right, bottom = self.width - self.right, self.height - self.bottom
        parts = []
        for v in nice_ticks(*self.x, about=8):
            ((px, _),) = self.at(np.array([v]), np.array([self.y[0]]))
            parts.append(f'<path class="grid" d="M{px:.1f} {self.top:.1f}V{bottom:.1f}"/>')
            parts.append(
                f'<text x="{px:.1f}" y="{bottom + 15:.1f}" text-anchor="middle">{_num(v)}</text>'
            )
        for v in nice_ticks(*self.y, about=5):
            ((_, py),) = self.at(np.array([self.x[0]]), np.array([v]))
            parts.append(f'<path class="grid" d="M{self.left:.1f} {py:.1f}H{right:.1f}"/>')
            parts.append(
                f'<text x="{self.left - 6:.1f}" y="{py + 4:.1f}" text-anchor="end">{_num(v)}</text>'
            )
        w, h = right - self.left, bottom - self.top
        parts.append(
            f'<rect class="box" x="{self.left}" y="{self.top}" width="{w:.1f}" height="{h:.1f}"/>'
        )
        parts.append(
            f'<text x="{self.left + w / 2:.1f}" y="{self.height - 8}" text-anchor="middle">'
            f"{escape(x_title)}</text>"
        )
        parts.append(
            f'<text transform="translate(14 {self.top + h / 2:.1f}) rotate(-90)" '
            f'text-anchor="middle">{escape(y_title)}</text>'
        )
        return "".join(parts)

    def line(self, x: Array, y: Array, kind: str) -> str:
        """A line through points; unknown ones are left out."""
        known = np.isfinite(y)
        points = self.at(x[known], y[known])
        if len(points) < 2:
            return ""
        return f'<path class="{kind}" d="M{"L".join(f"{a:.1f} {b:.1f}" for a, b in points)}"/>'

    def band(self, x: Array, low: Array, high: Array) -> str:
        """The area between two lines."""
        known = np.isfinite(low) & np.isfinite(high)
        if known.sum() < 2:
            return ""
        there = self.at(x[known], high[known])
        back = self.at(x[known][::-1], low[known][::-1])
        path = "L".join(f"{a:.1f} {b:.1f}" for a, b in [*there, *back])
        return f'<path class="band" d="M{path}Z"/>'

    def dots(self, x: Array, y: Array, kind: str) -> str:
        """Small points."""
        return "".join(
            f'<circle class="{kind}" cx="{a:.1f}" cy="{b:.1f}" r="1.8"/>' for a, b in self.at(x, y)
        )

    def whole(self, parts: list[str], text: str) -> str:
        """The drawing with its description."""
        return (
            f'<svg role="img" viewBox="0 0 {self.width:g} {self.height:g}" '
            f'xmlns="http://www.w3.org/2000/svg"><title>{escape(text)}</title>'
            f"{''.join(parts)}</svg>"
        )


def _num(value: float) -> str:
    return f"{value:.6g}".replace("-", "−")
