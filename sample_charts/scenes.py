"""What a chart shows, before anyone draws it: axes, lines, labels. All of it invented.

The scenario: the waterworks of an invented valley keep a binder of pump charts from forty years.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

# UCUM code → SI per unit
SI = {
    "m3/h": 1 / 3600,
    "L/s": 1e-3,
    "[gal_us]/min": 231 * 0.0254**3 / 60,
    "m": 1.0,
    "[ft_i]": 0.3048,
    "kW": 1e3,
    "[HP]": 745.69987158227022,
    "%": 0.01,
}


@dataclass(frozen=True)
class AxisSpec:
    """One printed scale. `unit` is a UCUM code; lo and hi are printed values at the box's ends."""

    side: str
    quantity: str
    unit: str
    title: str
    lo: float
    hi: float
    ticks: tuple[float, ...]
    minor: int = 1
    scale: str = "linear"

    def fraction(self, value: Array) -> Array:
        """Place along the box side, 0 at the left or bottom end."""
        f = np.log10 if self.scale == "log" else np.asarray
        return np.asarray((f(value) - f(self.lo)) / (f(self.hi) - f(self.lo)))


@dataclass(frozen=True)
class LineSpec:
    """One printed line, in the printed units of its axes."""

    quantity: str
    axis: str
    flow: Array
    value: Array
    label: str = ""
    diameter: float | None = None  # in diameter_unit
    diameter_unit: str = "mm"
    speed: float | None = None
    speed_unit: str = "/min"
    level: float | None = None
    path: bool = False
    points: tuple[Array, Array] | None = None  # test points drawn as markers
    flow_axis: str = "bottom"


@dataclass(frozen=True)
class PanelSpec:
    """One plot box; height is its share of the chart."""

    axes: tuple[AxisSpec, ...]
    lines: tuple[LineSpec, ...]
    height: float = 1.0
    shaded: tuple[float, float] | None = None  # flows of a shaded operating range

    def axis(self, side: str) -> AxisSpec:
        """The axis on that side."""
        return next(a for a in self.axes if a.side == side)


@dataclass(frozen=True)
class Scene:
    """A whole chart.

    comma : decimal comma; numbers : False where the tick numbers are painted over; facts : what
    else its truth should hold.
    """

    kind: str
    panels: tuple[PanelSpec, ...]
    heading: tuple[str, ...]
    speed: float | None
    comma: bool = False
    numbers: bool = True
    source: str = "invented"
    facts: dict[str, object] = field(default_factory=dict)


def nice(lo: float, hi: float, about: int = 6) -> tuple[float, float, tuple[float, ...]]:
    """(lo, hi, ticks) with a step of 1, 2, 2.5 or 5 that spans the data."""
    raw = (hi - lo) / about
    power = 10.0 ** np.floor(np.log10(raw))
    step = power * min((s for s in (1, 2, 2.5, 5, 10) if s * power >= raw * 0.999), default=10)
    first, last = np.floor(lo / step + 1e-9), np.ceil(hi / step - 1e-9)
    ticks = tuple(float(np.round(k * step, 10)) for k in range(int(first), int(last) + 1))
    return ticks[0], ticks[-1], ticks


def logarithmic(lo: float, hi: float) -> tuple[float, float, tuple[float, ...]]:
    """(lo, hi, ticks) of a log axis with numbers at 1, 2 and 5 of each decade."""
    grid = [m * 10.0**e for e in range(-2, 6) for m in (1, 2, 5)]
    first = max(g for g in grid if g <= lo * 1.0001)
    last = min(g for g in grid if g >= hi * 0.9999)
    return first, last, tuple(g for g in grid if first <= g <= last)
