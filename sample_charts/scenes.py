"""What a chart shows, before anyone draws it: axes, lines, labels. All of it invented.

The scenario: the waterworks of the Orlen valley keep a binder of pump charts from forty years.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from sample_charts.pumps import InventedPump, invent

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
PRINTED = {
    "m3/h": ("m³/h", "m3/h", "m³/h"),
    "L/s": ("l/s", "L/s"),
    "[gal_us]/min": ("US gpm", "gpm (US)"),
    "m": ("m",),
    "[ft_i]": ("ft",),
    "kW": ("kW",),
    "[HP]": ("hp", "HP"),
    "%": ("%",),
}
WORDS = {
    "en": {"flow": ("Flow", "Capacity", "Q"), "head": ("Head", "Total head", "H"),
           "efficiency": ("Efficiency", "Pump efficiency", "η"),
           "shaft_power": ("Shaft power", "Power input P2"), "npsh_required": ("NPSHr", "NPSH required")},
    "de": {"flow": ("Förderstrom Q",), "head": ("Förderhöhe H",), "efficiency": ("Wirkungsgrad η",),
           "shaft_power": ("Leistungsbedarf P",), "npsh_required": ("NPSH erf.",)},
    "fr": {"flow": ("Débit Q",), "head": ("Hauteur H",), "efficiency": ("Rendement η",),
           "shaft_power": ("Puissance absorbée P",), "npsh_required": ("NPSH requis",)},
    "es": {"flow": ("Caudal Q",), "head": ("Altura H",), "efficiency": ("Rendimiento η",),
           "shaft_power": ("Potencia P",), "npsh_required": ("NPSH requerido",)},
    "it": {"flow": ("Portata Q",), "head": ("Prevalenza H",), "efficiency": ("Rendimento η",),
           "shaft_power": ("Potenza P",), "npsh_required": ("NPSH richiesto",)},
    "pt": {"flow": ("Vazão Q",), "head": ("Altura manométrica H",), "efficiency": ("Rendimento η",),
           "shaft_power": ("Potência P",), "npsh_required": ("NPSH requerido",)},
}  # fmt: skip
SERIES = ("Orlen ZK", "Tarnbrook QV", "Vessmar DU", "Holmwick 7E", "Quellried SN")


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
    """A whole chart. `comma`: decimal comma; `text`: lines that stand under the chart."""

    kind: str
    panels: tuple[PanelSpec, ...]
    heading: tuple[str, ...]
    speed: float | None
    comma: bool = False
    source: str = "invented"
    text: tuple[str, ...] = ()
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


class _Writer:
    """Turns a pump into printed lines and axes, in one system of units and one language."""

    def __init__(self, pump: InventedPump, rng: np.random.Generator, units: str, language: str):
        self.pump, self.rng, self.language = pump, rng, language
        metric_flow = "L/s" if units == "l/s" else "m3/h"
        us = units == "us"
        self.unit = {
            "flow": "[gal_us]/min" if us else metric_flow,
            "head": "[ft_i]" if us else "m",
            "npsh_required": "[ft_i]" if us else "m",
            "efficiency": "%",
            "shaft_power": "[HP]" if us else "kW",
        }
        self.bracket = str(rng.choice(["[{}]", "({})", "{}", "in {}", ", {}"]))
        if language != "en" and self.bracket == "in {}":
            self.bracket = "[{}]"

    def title(self, quantity: str, unit: str) -> str:
        word = str(self.rng.choice(WORDS[self.language][quantity]))
        printed = self.bracket.format(self.rng.choice(PRINTED[unit]))
        return f"{word}{printed}" if printed.startswith(",") else f"{word} {printed}"

    def line(
        self, quantity: str, axis: str, to: float, n: int = 240, start: float = 0.0,
        diameter: float | None = None, ratio: float = 1.0, **more: object,
    ) -> LineSpec:  # fmt: skip
        """A curve from `start` to `to` times the best flow of that diameter and speed."""
        cut = (diameter or self.pump.diameter) / self.pump.diameter
        q = np.linspace(start, to, n) * self.pump.flow_best * ratio * cut**self.pump.trim_flow
        function: Callable[..., Array] = {
            "head": self.pump.head,
            "efficiency": self.pump.efficiency,
            "shaft_power": self.pump.power,
            "npsh_required": self.pump.npsh,
        }[quantity]
        value = function(q, diameter, ratio) / SI[self.unit[quantity]]
        return LineSpec(quantity, axis, q / SI[self.unit["flow"]], value, **more)  # type: ignore[arg-type]

    def axis(
        self, side: str, quantity: str, lines: tuple[LineSpec, ...] | list[LineSpec],
        about: int = 6, zero: bool = True, scale: str = "linear", room: float = 1.04,
    ) -> AxisSpec:  # fmt: skip
        """An axis that spans those lines."""
        flow = quantity == "flow"
        values = np.concatenate([line.flow if flow else line.value for line in lines])
        lo, hi = float(values.min()), float(values.max())
        if scale == "log":
            ends = logarithmic(lo, hi)
        elif zero:
            ends = nice(0.0, hi * room, about)
        else:
            ends = nice(lo - 0.03 * (hi - lo), hi + 0.03 * (hi - lo), about)
        unit = self.unit[quantity]
        minor = int(self.rng.choice([1, 2, 5]))
        return AxisSpec(side, quantity, unit, self.title(quantity, unit), *ends, minor, scale)


def _diameters(pump: InventedPump, rng: np.random.Generator, n: int) -> list[float]:
    step = max(5.0, 5.0 * round(pump.diameter * float(rng.uniform(0.035, 0.06)) / 5.0))
    return [pump.diameter - k * step for k in range(n)]


def _heading(pump: InventedPump, rng: np.random.Generator) -> tuple[str, ...]:
    name = f"{rng.choice(SERIES)} {int(rng.integers(4, 30)) * 5}-{int(pump.diameter)}"
    return name, f"n = {pump.speed:.0f} 1/min"


def single(w: _Writer) -> tuple[PanelSpec, ...]:
    """One head curve."""
    line = w.line("head", "left", float(w.rng.uniform(1.2, 1.45)))
    return (PanelSpec((w.axis("bottom", "flow", [line]), w.axis("left", "head", [line])), (line,)),)


def family(w: _Writer, n: int = 4) -> tuple[PanelSpec, ...]:
    """Heads of several impeller diameters."""
    prefix, suffix = [("Ø", ""), ("", " mm"), ("Ø ", " mm"), ("D", ""), ("", "")][
        int(w.rng.integers(5))
    ]
    lines = tuple(
        w.line("head", "left", 1.35, diameter=d, label=f"{prefix}{d:.0f}{suffix}")
        for d in _diameters(w.pump, w.rng, n)
    )
    lines = tuple(
        replace(line, diameter=d) for line, d in zip(lines, _diameters_of(lines), strict=True)
    )
    return (PanelSpec((w.axis("bottom", "flow", lines), w.axis("left", "head", lines)), lines),)


def _diameters_of(lines: tuple[LineSpec, ...]) -> list[float]:
    return [float("".join(c for c in line.label if c.isdigit())) for line in lines]


def twin(w: _Writer) -> tuple[PanelSpec, ...]:
    """Head on the left axis, efficiency on the right one."""
    to = float(w.rng.uniform(1.25, 1.4))
    head = w.line("head", "left", to, label="H")
    eta = w.line("efficiency", "right", to, label="η")
    axes = (
        w.axis("bottom", "flow", [head]),
        w.axis("left", "head", [head]),
        w.axis("right", "efficiency", [eta], 5),
    )
    return (PanelSpec(axes, (head, eta)),)


def stacked(w: _Writer) -> tuple[PanelSpec, ...]:
    """Head, efficiency, power and NPSH one under the other, on the same flow axis."""
    to = float(w.rng.uniform(1.25, 1.4))
    panels = []
    flow = None
    for quantity, height in (
        ("head", 1.6), ("efficiency", 1.0), ("shaft_power", 1.0), ("npsh_required", 0.9),
    ):  # fmt: skip
        line = w.line(quantity, "left", to)
        flow = flow or w.axis("bottom", "flow", [line])
        about = 5 if quantity == "head" else 4
        panels.append(PanelSpec((flow, w.axis("left", quantity, [line], about)), (line,), height))
    return tuple(panels)


_KINDS: dict[str, Callable[..., tuple[PanelSpec, ...]]] = {
    "single": single,
    "family": family,
    "twin": twin,
    "stacked": stacked,
}
KINDS = tuple(_KINDS)


def scene(
    kind: str, rng: np.random.Generator, units: str | None = None, language: str | None = None,
    comma: bool | None = None, **choices: object,
) -> Scene:  # fmt: skip
    """A scene of that kind around an invented pump.

    units : "m3/h", "l/s" or "us"; language of the titles; decimal `comma`.
    """
    if units is None:
        units = str(rng.choice(["m3/h", "l/s", "us"], p=[0.5, 0.25, 0.25]))
    if language is None:
        language = "en" if units == "us" else str(rng.choice(list(WORDS), p=[0.5] + [0.1] * 5))
    pump = invent(rng)
    panels = _KINDS[kind](_Writer(pump, rng, units, language), **choices)
    comma = language != "en" if comma is None else comma
    return Scene(kind, panels, _heading(pump, rng), pump.speed, comma)
