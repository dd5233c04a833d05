"""Panels, traces and words of known charts, without drawing them: what `identify` is given.

scene = Scene()
box = scene.box(left=("head", "m", 0, 50), right=("efficiency", "%", 0, 100))
box.line(lambda q: 40 - 0.001 * q**2, label="H")
box.line(lambda q: 75 - 0.01 * (q - 90) ** 2, axis="right", label="η")
curves, pumps, findings = scene.read()
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import Warp
from curvefit.identify import identify
from curvefit.notes import Notes
from curvefit.records import Axis, Curve, Finding, Page, Panel, Pump, Trace, Word

__all__ = ["HEIGHT", "Box", "ModelPump", "Scene", "family"]

Array = NDArray[np.float64]
AxisSpec = tuple[str | None, str | None, float, float]
WIDTH, DEPTH, HEIGHT = 800.0, 500.0, 16.0  # of a plot box and of its text [px]
BLACK = (0.0, 0.0, 0.0)


@dataclass
class Box:
    """One plot box: lines are added to it in printed units."""

    name: str
    top: float
    axes: dict[str, Axis]
    page: Page
    words: list[Word] = field(default_factory=list)
    lines: list[dict[str, Any]] = field(default_factory=list)
    masks: list[Array] = field(default_factory=list)

    def line(
        self, f: Callable[[Array], Array] | Array, flow: tuple[float, float] | Array = (0.0, 180.0),
        axis: str = "left", label: str = "", place: str = "end", colour: tuple[float, ...] = BLACK,
        dash: str = "solid", path: bool = False, width: float = 2.0, shift: Any = (0, 0),
    ) -> None:  # fmt: skip
        """A line as a function of printed flow, or as arrays of flow and value."""
        if callable(f):
            q = np.linspace(*flow, 400)
            v = np.asarray(f(q), float)
        else:
            q, v = np.asarray(flow, float), np.asarray(f, float)
        flat = self.flat(q, v, axis)
        inside = (flat >= -0.5).all(1) & (flat <= np.array([WIDTH, DEPTH]) + 0.5).all(1)
        flat = flat[inside]
        self.lines.append(
            {"flat": flat, "colour": colour, "dash": dash, "path": path, "width": width}
        )
        if label:
            at = flat[-1] + [8, 0] if place == "end" else flat[len(flat) // 20] + [0, -14]
            self.word(label, *(at + np.array(shift)))

    def flat(self, q: Array, v: Array, axis: str = "left") -> Array:
        """Straightened box pixels of printed values."""
        across = self.axes["bottom"].fraction(q)
        return np.c_[across * WIDTH, (1 - self.axes[axis].fraction(v)) * DEPTH]

    def word(self, text: str, x: float, y: float, upright: bool = False) -> None:
        """A text that starts at (x, y) of the box, y its middle."""
        x, y = x + 100, y + self.top
        w = 0.55 * HEIGHT * len(text)
        if upright:
            box = [[x, y], [x, y - w], [x + HEIGHT, y - w], [x + HEIGHT, y]]
        else:
            box = [[x, y - 8], [x + w, y - 8], [x + w, y + 8], [x, y + 8]]
        self.words.append(Word(text, np.array(box, float)))


@dataclass
class Scene:
    """A page with plot boxes one above the other."""

    boxes: list[Box] = field(default_factory=list)
    pixels: NDArray[np.uint8] = field(
        default_factory=lambda: np.full((2600, 1200, 3), 255, np.uint8)
    )

    def box(
        self, left: AxisSpec, right: AxisSpec | None = None, flow: AxisSpec | None = None,
        title: str = "", scale: str = "linear", u: float = 2e-4, **more: AxisSpec,
    ) -> Box:  # fmt: skip
        """A new box; each axis is (quantity, unit, low, high)."""
        name = chr(ord("A") + len(self.boxes))
        page = Page("scene.png", "0", 1, self.pixels, (1200, 2600))
        specs = {"bottom": flow or ("flow", "m3/h", 0.0, 200.0), "left": left, **more}
        if right is not None:
            specs["right"] = right
        axes = {}
        for side, (quantity, unit, low, high) in specs.items():
            how = scale if side == "left" else "linear"
            a, b = np.log10([low, high]) if how == "log" else (low, high)
            c = np.array([[1.0, -1.0], [-1.0, 2.0]]) * (u * (b - a)) ** 2
            axes[side] = Axis(f"{name}.{side}", side.partition(".")[0], quantity, unit, unit or "",
                              how, float(a), float(b - a), c)  # type: ignore[arg-type]  # fmt: skip
        made = Box(name, 100.0 + 620.0 * len(self.boxes), axes, page)
        if title:
            made.word(title, 250, -60)
        self.boxes.append(made)
        return made

    def records(self) -> tuple[Page, tuple[Panel, ...], tuple[Trace, ...]]:
        """The page, its panels and its traces."""
        panels, traces = [], []
        page = Page("scene.png", "0", 1, self.pixels, (1200, 2600))
        for b in self.boxes:
            corners = np.array([[0, 0], [WIDTH, 0], [WIDTH, DEPTH], [0, DEPTH]], float)
            corners += np.array([100, b.top])
            warp = Warp(np.array([[1, 0, -100], [0, 1, -b.top], [0, 0, 1.0]]), (WIDTH, DEPTH))
            panel = Panel(b.name, page, corners, warp, tuple(b.axes.values()), tuple(b.words),
                          masks=tuple(b.masks))  # fmt: skip
            panels.append(panel)
            for spec in b.lines:
                n = len(spec["flat"])
                traces.append(
                    Trace(
                        f"line {len(traces) + 1}",
                        panel,
                        spec["flat"],
                        np.full(n, 0.1),
                        np.zeros(n, np.uint8),
                        20.0,
                        spec["width"],
                        spec["colour"],
                        spec["dash"],
                        spec["path"],
                    )
                )
        return page, tuple(panels), tuple(traces)

    def read(
        self, notes: Notes | None = None
    ) -> tuple[tuple[Curve, ...], tuple[Pump, ...], tuple[Finding, ...]]:
        """What identify makes of it; findings with those of the curves."""
        curves, pumps, said = identify(*self.records(), notes)
        return curves, pumps, said + tuple(f for c in curves for f in c.findings)


@dataclass(frozen=True)
class ModelPump:
    """An invented pump that obeys the affinity laws, in m³/h, m, kW and %; ratio of diameters."""

    ratio: float = 1.0

    def head(self, q: Array) -> Array:
        return 42 * self.ratio**2 - 0.0009 * q**2

    def efficiency(self, q: Array) -> Array:
        x = q / (110 * self.ratio)
        return 76 * x * (2 - x) * (1 - 0.1 * (1 - x) ** 2)

    def power(self, q: Array) -> Array:
        """From the other two, and its limit at shut-off."""
        q = np.maximum(q, 1e-3)
        return 998.2 * 9.80665 * q / 3600 * self.head(q) / (self.efficiency(q) / 100) / 1000

    def npsh(self, q: Array) -> Array:
        return 1.8 + 4.5 * (q / (180 * self.ratio)) ** 2.4

    @property
    def reach(self) -> tuple[float, float]:
        return 0.0, 180.0 * self.ratio


def family(
    box: Box, labels: list[str], ratios: list[float], what: str = "head", **how: Any
) -> None:
    """Lines of one quantity for several impellers."""
    for label, ratio in zip(labels, ratios, strict=True):
        pump = ModelPump(ratio)
        box.line(getattr(pump, what), pump.reach, label=label, **how)


def without_words(scene: Scene) -> Scene:
    """The same scene with every text gone."""
    return Scene([replace(b, words=[]) for b in scene.boxes], scene.pixels)
