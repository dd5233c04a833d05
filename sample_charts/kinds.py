"""The kinds of charts: which lines of an invented pump stand in which boxes on which axes."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from sample_charts.pumps import InventedPump, invent, iso_efficiency
from sample_charts.scenes import SI, AxisSpec, LineSpec, PanelSpec, Scene, logarithmic, nice

Array = NDArray[np.float64]

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
           "shaft_power": ("Shaft power", "Power P2"),
           "npsh_required": ("NPSHr", "NPSH required")},
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
        diameter: float | None = None, ratio: float = 1.0, named: bool = False, **more: object,
    ) -> LineSpec:  # fmt: skip
        """A curve from `start` to `to` times the best flow of that diameter and speed.

        `named`: the label tells the diameter, so the truth holds it.
        """
        cut = (diameter or self.pump.diameter) / self.pump.diameter
        q = np.linspace(start, to, n) * self.pump.flow_best * ratio * cut**self.pump.trim_flow
        function: Callable[..., Array] = {
            "head": self.pump.head,
            "efficiency": self.pump.efficiency,
            "shaft_power": self.pump.power,
            "npsh_required": self.pump.npsh,
        }[quantity]
        value = function(q, diameter, ratio) / SI[self.unit[quantity]]
        known = {"diameter": diameter} if named else {}
        flow = q / SI[self.unit["flow"]]
        return LineSpec(quantity, axis, flow, value, **known, **more)  # type: ignore[arg-type]

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


def single(w: _Writer) -> tuple[PanelSpec, ...]:
    """One head curve."""
    line = w.line("head", "left", float(w.rng.uniform(1.2, 1.45)))
    return (PanelSpec((w.axis("bottom", "flow", [line]), w.axis("left", "head", [line])), (line,)),)


def offset(w: _Writer) -> tuple[PanelSpec, ...]:
    """One head curve on axes that do not start at zero."""
    line = w.line("head", "left", 1.3, start=0.4)
    axes = (
        w.axis("bottom", "flow", [line], zero=False),
        w.axis("left", "head", [line], zero=False),
    )
    return (PanelSpec(axes, (line,)),)


def logs(w: _Writer) -> tuple[PanelSpec, ...]:
    """Two diameters on logarithmic axes."""
    lines = tuple(
        w.line("head", "left", 1.45, start=0.08, diameter=d, label=f"{d:.0f} mm", named=True)
        for d in _diameters(w.pump, w.rng, 3)[::2]
    )
    axes = (
        w.axis("bottom", "flow", lines, scale="log"),
        w.axis("left", "head", lines, scale="log"),
    )
    return (PanelSpec(axes, lines),)


def family(w: _Writer, n: int = 4) -> tuple[PanelSpec, ...]:
    """Heads of several impeller diameters."""
    marks = [("Ø", ""), ("", " mm"), ("Ø ", " mm"), ("D", " mm")]
    prefix, suffix = marks[int(w.rng.integers(len(marks)))]
    lines = tuple(
        w.line("head", "left", 1.35, diameter=d, label=f"{prefix}{d:.0f}{suffix}", named=True)
        for d in _diameters(w.pump, w.rng, n)
    )
    axes = (w.axis("bottom", "flow", lines, room=1.12), w.axis("left", "head", lines))
    return (PanelSpec(axes, lines),)


def inches(w: _Writer, n: int = 4) -> tuple[PanelSpec, ...]:
    """Heads of several impeller diameters in inches, with fractions."""
    largest = Fraction(int(w.rng.integers(26, 50)), 4)
    w.pump = replace(w.pump, diameter=float(largest))
    step = Fraction(int(w.rng.integers(1, 3)), 2 if largest > 9 else 4)
    sizes = [largest - k * step for k in range(n)]
    lines = tuple(
        w.line("head", "left", 1.3, diameter=float(d), label=_inches(d), named=True,
               diameter_unit="[in_i]")
        for d in sizes
    )  # fmt: skip
    axes = (w.axis("bottom", "flow", lines, room=1.15), w.axis("left", "head", lines))
    return (PanelSpec(axes, lines),)


def _inches(size: Fraction) -> str:
    whole, part = divmod(size, 1)
    return f'{whole} {part}"' if part else f'{whole}"'


def speeds(w: _Writer, n: int = 4, hertz: bool | None = None) -> tuple[PanelSpec, ...]:
    """Heads at several speeds, which follow the affinity laws."""
    hertz = bool(w.rng.random() < 0.5) if hertz is None else hertz
    full = 50.0 if hertz else w.pump.speed
    step = 5.0 if hertz else 50.0 * round(full * 0.1 / 50.0)
    lines = tuple(
        w.line("head", "left", 1.3, ratio=(full - k * step) / full, speed=full - k * step,
               speed_unit="Hz" if hertz else "/min",
               label=f"{full - k * step:.0f} {'Hz' if hertz else 'rpm'}")
        for k in range(n)
    )  # fmt: skip
    axes = (w.axis("bottom", "flow", lines, room=1.18), w.axis("left", "head", lines))
    return (PanelSpec(axes, lines),)


def twin(w: _Writer, points: bool = False) -> tuple[PanelSpec, ...]:
    """Head on the left axis, efficiency on the right one; test points and a shaded range too."""
    to = float(w.rng.uniform(1.25, 1.4))
    head = w.line("head", "left", to, label="H")
    eta = w.line("efficiency", "right", to, label="η")
    axes = (
        w.axis("bottom", "flow", [head], room=1.1),
        w.axis("left", "head", [head]),
        w.axis("right", "efficiency", [eta], 5),
    )
    if not points:
        return (PanelSpec(axes, (head, eta)),)
    some = slice(10, None, 38)
    head, eta = (replace(c, points=(c.flow[some], c.value[some])) for c in (head, eta))
    best = w.pump.flow_best / SI[w.unit["flow"]]
    return (PanelSpec(axes, (head, eta), shaded=(0.7 * best, 1.2 * best)),)


def top(w: _Writer) -> tuple[PanelSpec, ...]:
    """Head and NPSH with a second flow axis in US gpm on top."""
    head = w.line("head", "left", 1.3, label="H")
    npsh = w.line("npsh_required", "right", 1.3, label="NPSH")
    bottom = w.axis("bottom", "flow", [head], room=1.1)
    factor = SI[bottom.unit] / SI["[gal_us]/min"]
    _, _, ticks = nice(0.0, bottom.hi * factor)
    inside = tuple(t for t in ticks if t <= bottom.hi * factor)
    gpm = AxisSpec("top", "flow", "[gal_us]/min", w.title("flow", "[gal_us]/min"), 0.0,
                   bottom.hi * factor, inside)  # fmt: skip
    axes = (bottom, gpm, w.axis("left", "head", [head]),
            w.axis("right", "npsh_required", [npsh], 5, room=2.2))  # fmt: skip
    return (PanelSpec(axes, (head, npsh)),)


def feet(w: _Writer) -> tuple[PanelSpec, ...]:
    """Two diameters, the head in metres on the left and in feet on the right."""
    lines = tuple(
        w.line("head", "left", 1.3, diameter=d, label=f"{d:.0f} mm", named=True)
        for d in _diameters(w.pump, w.rng, 2)
    )
    left = w.axis("left", "head", lines)
    other = "m" if left.unit == "[ft_i]" else "[ft_i]"
    factor = SI[left.unit] / SI[other]
    _, _, ticks = nice(0.0, left.hi * factor)
    inside = tuple(t for t in ticks if t <= left.hi * factor)
    right = AxisSpec("right", "head", other, w.title("head", other), 0.0, left.hi * factor, inside)
    return (PanelSpec((w.axis("bottom", "flow", lines, room=1.15), left, right), lines),)


def letters(w: _Writer, n: int = 3) -> tuple[PanelSpec, ...]:
    """Trims named by letters that nearly meet at shut-off: a letter is no diameter."""
    lines = []
    for k in range(n):
        trim = replace(w.pump, flow_best=w.pump.flow_best * (1 - 0.13 * k),
                       head_best=w.pump.head_best * (1 - 0.01 * k))  # fmt: skip
        writer = _Writer(trim, w.rng, "m3/h", w.language)
        writer.unit = w.unit
        lines.append(writer.line("head", "left", 1.35, label="ABCDEFG"[k]))
    axes = (w.axis("bottom", "flow", lines, room=1.1), w.axis("left", "head", lines))
    return (PanelSpec(axes, tuple(lines)),)


def quad(w: _Writer) -> tuple[PanelSpec, ...]:
    """Four curves in one box on four value axes."""
    to = 1.3
    head = w.line("head", "left", to, label="H")
    eta = w.line("efficiency", "right", to, label="η")
    power = w.line("shaft_power", "right.2", to, label="P")
    npsh = w.line("npsh_required", "left.2", to, label="NPSH")
    axes = (
        w.axis("bottom", "flow", [head], room=1.1),
        w.axis("left", "head", [head], room=1.05),
        w.axis("left.2", "npsh_required", [npsh], 4, room=2.6),
        w.axis("right", "efficiency", [eta], 5),
        w.axis("right.2", "shaft_power", [power], 5, room=1.9),
    )
    return (PanelSpec(axes, (head, eta, power, npsh)),)


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


def hill(w: _Writer, n: int = 4) -> tuple[PanelSpec, ...]:
    """Heads of several diameters crossed by lines of equal efficiency."""
    lines = list(family(w, n)[0].lines)
    sizes = [line.diameter or 0.0 for line in lines]
    flow = np.linspace(0.5, 1.4, 400) * w.pump.flow_best
    best = float(w.pump.efficiency(flow).max())
    levels = [np.floor(best * 50 - 0.3) / 50]
    levels += [float(np.floor(levels[0] * 20 - 0.4 - k) / 20) for k in range(3)]
    for level in dict.fromkeys(round(float(v), 3) for v in levels):
        for q, h in iso_efficiency(w.pump, level, (sizes[-1], sizes[0]), (0.15, 1.34)):
            lines.append(
                LineSpec("iso_efficiency", "left", q / SI[w.unit["flow"]], h / SI[w.unit["head"]],
                         label=f"{100 * level:.0f}%", level=round(100 * level, 3), path=True)
            )  # fmt: skip
    axes = (
        w.axis("bottom", "flow", lines, room=1.12),
        w.axis("left", "head", lines, zero=False),
    )
    return (PanelSpec(axes, tuple(lines), shaded=None),)


def published(w: _Writer) -> tuple[PanelSpec, ...]:
    """The pump test of a textbook: head, efficiency and power through its published points."""
    from scipy.interpolate import CubicSpline

    q = np.array([0, 500, 800, 1000, 1100, 1200, 1400, 1500.0])
    table = {
        "head": [123.37, 112.76, 100.32, 89.18, 80.93, 69.82, 42.85, 25.49],
        "efficiency": [0, 64.75, 77.90, 79.16, 76.10, 69.45, 47.50, 29.50],
        "shaft_power": [15.139, 22.036, 26.073, 28.512, 29.606, 30.531, 31.961, 32.802],
    }
    flow = np.linspace(0, 1500, 301)
    lines = [
        LineSpec(quantity, side, flow, CubicSpline(q, table[quantity])(flow), label=label,
                 points=(q, np.array(table[quantity])))
        for quantity, side, label in (
            ("head", "left", "H"), ("efficiency", "right", "η"), ("shaft_power", "right.2", "P"))
    ]  # fmt: skip
    axes = (
        w.axis("bottom", "flow", lines[:1], 8),
        w.axis("left", "head", lines[:1], 7),
        w.axis("right", "efficiency", lines[1:2], 5),
        w.axis("right.2", "shaft_power", lines[2:], 5, room=1.3),
    )
    return (PanelSpec(axes, tuple(lines)),)


def _diameters(pump: InventedPump, rng: np.random.Generator, n: int) -> list[float]:
    step = max(5.0, 5.0 * round(pump.diameter * float(rng.uniform(0.035, 0.06)) / 5.0))
    return [pump.diameter - k * step for k in range(n)]


def _heading(pump: InventedPump, rng: np.random.Generator, speed: bool) -> tuple[str, ...]:
    name = f"Pump {rng.choice(list('BDFKRW'))} {int(rng.integers(4, 30)) * 5}-{pump.diameter:.0f}"
    return (f"{name} (invented)", *([f"n = {pump.speed:.0f} 1/min"] if speed else []))


_KINDS: dict[str, Callable[..., tuple[PanelSpec, ...]]] = {
    f.__name__: f
    for f in (
        single, family, twin, stacked, quad, hill, top, logs, offset, speeds, inches, published,
        feet, letters,
    )
}  # fmt: skip
KINDS = tuple(_KINDS)
SOURCE = (
    "Fox, R. W. and McDonald, A. T., Introduction to Fluid Mechanics, Example 10.3: data of a "
    "pump test; the lines between the published points are a cubic spline"
)


def scene(
    kind: str, rng: np.random.Generator, units: str | None = None, language: str | None = None,
    comma: bool | None = None, numbers: bool = True, **choices: object,
) -> Scene:  # fmt: skip
    """A scene of that kind around an invented pump.

    units : "m3/h", "l/s" or "us"; language of the titles; decimal `comma`; `numbers` False
    paints the tick numbers over.
    """
    if kind in ("inches", "published"):
        units, language = "us", "en"
    if units is None:
        units = str(rng.choice(["m3/h", "l/s", "us"], p=[0.5, 0.25, 0.25]))
    if language is None:
        language = "en" if units == "us" else str(rng.choice(list(WORDS), p=[0.5] + [0.1] * 5))
    writer = _Writer(invent(rng), rng, units, language)
    panels = _KINDS[kind](writer, **choices)
    comma = language != "en" if comma is None else comma
    if kind == "published":
        points = {c.quantity: [p.tolist() for p in c.points or ()] for c in panels[0].lines}
        heading = ("Pump test (published textbook data)",)
        return Scene(kind, panels, heading, None, comma, numbers, SOURCE, {"points": points})
    speed = None if kind == "speeds" else writer.pump.speed
    heading = _heading(writer.pump, rng, speed is not None)
    return Scene(kind, panels, heading, speed, comma, numbers)
