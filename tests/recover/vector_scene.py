"""Vector charts drawn by plain PDF operators in the many ways in which programs draw them.

scene = Scene(width=420, height=300)         # page points
scene.axes(box, …); scene.curve(points, how="pieces"); scene.write(path)
"""

from __future__ import annotations

from itertools import pairwise
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from pdf_bytes import page

__all__ = ["K", "Scene", "curve_between"]

Array = NDArray[np.float64]
K = 300 / 72
LEFT, BOTTOM, RIGHT, TOP = 60.0, 50.0, 380.0, 270.0  # the plot box [pt]


def curve_between(start: float, stop: float, rise: float = 0.0, n: int = 160) -> Array:
    """A falling curve in box fractions, (n, 2)."""
    t = np.linspace(start, stop, n)
    return np.column_stack([t, 0.85 - rise - 0.12 * t - 0.45 * t**2.3 + 0.03 * np.sin(5 * t)])


class Scene:
    """One page with one plot box; curves in box fractions."""

    def __init__(self, decimals: int = 3, size: tuple[float, float] = (440, 320)) -> None:
        self.size, self.decimals = size, decimals
        self.ops: list[str] = []

    def points(self, fractions: Array) -> Array:
        """Page points of box fractions."""
        low, high = np.array([LEFT, BOTTOM]), np.array([RIGHT, TOP])
        return np.asarray(low + np.asarray(fractions) * (high - low))

    def path(self, points: Array, end: str = "S") -> str:
        """One polyline."""
        d = self.decimals
        first, *rest = [f"{x:.{d}f} {y:.{d}f}" for x, y in points]
        return f"{first} m " + " ".join(f"{p} l" for p in rest) + f" {end}"

    def draw(self, operators: str, points: Array, end: str = "S") -> None:
        """A polyline after some operators, in a graphics state of its own."""
        self.ops.append(f"q {operators} {self.path(points, end)} Q")

    def line(self, x0: float, y0: float, x1: float, y1: float, look: str = "0.8 w") -> None:
        """A line in page points."""
        self.draw(look, np.array([[x0, y0], [x1, y1]]))

    def text(self, x: float, y: float, text: str, size: float = 9, turn: str = "1 0 0 1") -> None:
        """A text whose base line starts at a page point."""
        self.ops.append(f"BT /F1 {size} Tf {turn} {x:.3f} {y:.3f} Tm ({text}) Tj ET")

    def axes(self, frame: str = "rectangle", grid: str = "", numbers: bool = True) -> None:
        """Frame "rectangle", "lines", "L" or "areas"; grid "", "lines" or "dashes"."""
        for k in range(9):
            x, y = LEFT + 40 * k, BOTTOM + 27.5 * k
            if grid and 0 < k < 8:
                self._rule(x, BOTTOM, x, TOP, grid)
                self._rule(LEFT, y, RIGHT, y, grid)
            if numbers:
                self.text(x - 5, BOTTOM - 16, f"{10 * k}")
                self.text(LEFT - 20, y - 3, f"{5 * k}")
            tick = -5 if frame != "areas" else 5
            self.line(x, BOTTOM, x, BOTTOM + tick)
            self.line(LEFT, y, LEFT + tick, y)
        corners = np.array([[LEFT, BOTTOM], [RIGHT, BOTTOM], [RIGHT, TOP], [LEFT, TOP]])
        if frame == "rectangle":
            self.draw("1 w", corners, "s")
        elif frame == "lines":
            for a, b in zip(corners, np.roll(corners, -1, 0), strict=True):
                self.draw("1 w", np.array([a, b]))
        elif frame == "L":
            self.line(LEFT, TOP, LEFT, BOTTOM)
            self.line(LEFT, BOTTOM, RIGHT, BOTTOM)
        elif frame == "areas":  # lines as thin filled rectangles
            for x, y, w, h in (
                (LEFT, BOTTOM - 0.4, RIGHT - LEFT, 0.8),
                (LEFT, TOP - 0.4, RIGHT - LEFT, 0.8),
                (LEFT - 0.4, BOTTOM, 0.8, TOP - BOTTOM),
                (RIGHT - 0.4, BOTTOM, 0.8, TOP - BOTTOM),
            ):
                self.ops.append(f"{x:.3f} {y:.3f} {w:.3f} {h:.3f} re f")

    def _rule(self, x0: float, y0: float, x1: float, y1: float, how: str) -> None:
        look = "0.4 w 0.6 G"
        if how == "lines":
            self.line(x0, y0, x1, y1, look)
            return
        t = np.arange(0, 1, 1 / 40)
        for a in t:
            b = a + 0.5 / 40
            self.line(
                x0 + a * (x1 - x0), y0 + a * (y1 - y0), x0 + b * (x1 - x0), y0 + b * (y1 - y0), look
            )

    def curve(self, fractions: Array, how: str = "line", look: str = "1.5 w 0 0 1 RG") -> None:
        """A curve: "line", "pieces", "subpaths", "dashes", "dashed" or "outline"."""
        p = self.points(fractions)
        if how == "line":
            self.draw(look, p)
        elif how == "dashed":
            self.draw(look + " [6 3] 0 d", p)
        elif how == "pieces":
            for a, b in pairwise(p):
                self.draw(look, np.array([a, b]))
        elif how == "subpaths":
            parts = [self.path(p[i : i + 12], "") for i in range(0, len(p) - 1, 11)]
            self.ops.append(f"q {look} {' '.join(parts)} S Q")
        elif how == "dashes":
            for part in self._dashes(p, 7.0, 4.0):
                self.draw(look, part)
        elif how == "outline":
            d = np.gradient(p, axis=0)
            normal = np.column_stack([-d[:, 1], d[:, 0]]) / np.hypot(*d.T)[:, None]
            ring = np.vstack([p + 0.7 * normal, (p - 0.7 * normal)[::-1]])
            self.draw("0 0 1 rg", ring, "h f")

    @staticmethod
    def _dashes(p: Array, on: float, off: float) -> list[Array]:
        s = np.r_[0, np.cumsum(np.hypot(*np.diff(p, axis=0).T))]
        parts = []
        for a in np.arange(0, s[-1] - 1, on + off):
            at = np.linspace(a, min(a + on, s[-1]), 5)
            parts.append(np.column_stack([np.interp(at, s, p[:, k]) for k in (0, 1)]))
        return parts

    def write(self, path: Path, entries: str = "") -> Path:
        """The file."""
        path.write_bytes(page("\n".join(self.ops), self.size, entries))
        return path
