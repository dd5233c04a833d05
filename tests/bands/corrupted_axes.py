"""Drawn axes as evidence, with the misreadings of a bad scan put in by a seeded generator."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from curvefit.calibrate.evidence import Evidence, TickRow
from curvefit.geometry import Warp
from curvefit.records import Word

HEIGHT = 26.0  # of the type [px]
WIDTH = 0.78  # from one digit to the next, in heights


@dataclass(frozen=True)
class Scale:
    """One side's scale: its ends, the numbered values and how they are printed."""

    side: str
    low: float
    high: float
    values: tuple[float, ...]
    form: str = "{:g}"
    title: str = ""
    log: bool = False
    offset: float = 0.0  # of a third scale outside the box [px]

    def at(self, value: float) -> float:
        if self.log:
            return float(np.log(value / self.low) / np.log(self.high / self.low))
        return (value - self.low) / (self.high - self.low)


def steps(
    side: str,
    low: float,
    high: float,
    step: float,
    form: str = "{:g}",
    title: str = "",
    offset: float = 0.0,
) -> Scale:
    """A linear scale numbered every step."""
    n = round((high - low) / step)
    return Scale(side, low, high, _run(low, step, n), form, title, offset=offset)


def _run(first: float, step: float, n: int) -> tuple[float, ...]:
    return tuple(round(first + step * i, 9) for i in range(n + 1))


def _width(text: str) -> float:
    """Width of the ink: a point takes half a digit's room, the ends have white about them."""
    return HEIGHT * (WIDTH * (len(text) - 0.5 * text.count(".") - 0.1 * text.count("1")) - 0.15)


def _word(text: str, x: float, y: float, quarter: int = 0, width: float | None = None) -> Word:
    w, h = max(width or _width(text), 6.0), HEIGHT
    box = np.array([[-w, -h], [w, -h], [w, h], [-w, h]]) / 2
    turn = np.array([[0, 1], [-1, 0]]) if quarter else np.eye(2)
    return Word(text, box @ turn.T + [x, y], 0.99)


def drawn(
    scales: list[Scale],
    rng: np.random.Generator,
    size: tuple[float, float] = (1200.0, 800.0),
    origin: tuple[float, float] = (300.0, 200.0),
    spoil=None,
    jitter: float = 0.05,
    ticks: bool = True,
    minor: int = 1,
    exact: bool = False,
    look=None,
) -> Evidence:
    """One plot box with these scales; `spoil(texts, rng)` misreads the numbers of each side."""
    w, h = size
    words: list[Word] = []
    rows: list[TickRow] = []
    for s in scales:
        texts = [s.form.format(v) for v in s.values]
        shown = spoil(texts, rng) if spoil else texts
        flat = s.side in ("bottom", "top")
        length = w if flat else h
        at = np.array([s.at(v) for v in s.values])
        wide = max(len(t) for t in texts) * WIDTH * HEIGHT
        for t, text, real in zip(at, shown, texts, strict=True):
            if not text:
                continue
            slip = rng.normal(0, jitter * HEIGHT)
            half = _width(real) / 2
            x = {"bottom": t * w + slip, "top": t * w + slip}.get(s.side, 0.0)
            if s.side == "left":
                x = -18 - half - s.offset
            if s.side == "right":
                x = w + 18 + half + s.offset
            y = (1 - t) * h + slip
            if flat:
                y = h + 30 + s.offset if s.side == "bottom" else -30 - s.offset
            words.append(_word(text, origin[0] + x, origin[1] + y, width=2 * half))
        if s.title:
            x, y, turned = w / 2, h + 80 + s.offset, 0
            if s.side == "top":
                y = -80 - s.offset
            if not flat:
                out = 18 + wide + 30 + s.offset
                x, y, turned = (-out if s.side == "left" else w + out), h / 2, 1
            words.append(_word(s.title, origin[0] + x, origin[1] + y, turned))
        if ticks:
            if minor > 1 and not s.log:
                low, high = at.min(), at.max()
                places = np.linspace(low, high, (len(at) - 1) * minor + 1)
            else:
                places = at
            places = np.sort(places + rng.normal(0, 0.1 / length, len(places)))
            u = np.full(len(places), 0.12 / length)
            rows.append(TickRow(s.side, "outside", places, u, np.ones(len(places)), s.offset))
    for side in ("bottom", "top", "left", "right"):
        length = w if side in ("bottom", "top") else h
        rows.append(
            TickRow(side, "end", np.array([0.0, 1.0]), np.full(2, 0.3 / length), np.ones(2))
        )
    matrix = np.array([[1.0, 0, -origin[0]], [0, 1.0, -origin[1]], [0, 0, 1]])
    corners = np.array([[0, 0], [w, 0], [w, h], [0, h]]) + origin
    return Evidence(corners, Warp(matrix, size), 0, tuple(rows), tuple(words), look, exact)


def points_lost(share: float):
    def spoil(texts, rng):
        return [t.replace(".", "") if rng.random() < share else t for t in texts]

    return spoil


def digits_changed(share: float):
    def spoil(texts, rng):
        out = []
        for t in texts:
            if t and rng.random() < share:
                k = int(rng.choice([i for i, c in enumerate(t) if c.isdigit()]))
                t = t[:k] + str(rng.integers(10)) + t[k + 1 :]
            out.append(t)
        return out

    return spoil


def characters_lost(share: float):
    def spoil(texts, rng):
        out = []
        for t in texts:
            if t and rng.random() < share:
                k = int(rng.integers(len(t)))
                t = t[:k] + t[k + 1 :]
            out.append(t)
        return out

    return spoil


def missing(share: float):
    def spoil(texts, rng):
        return ["" if rng.random() < share else t for t in texts]

    return spoil


def both(*spoilers):
    def spoil(texts, rng):
        for s in spoilers:
            texts = s(texts, rng)
        return texts

    return spoil


def last_lost(texts, rng):
    """Every number loses its last character."""
    return [t[:-1] for t in texts]


def random_scale(side: str, rng: np.random.Generator) -> Scale:
    """A scale as charts have them: a round step, 4 to 11 numbers, mostly from zero."""
    mantissa = float(rng.choice([1, 2, 2.5, 5], p=[0.3, 0.3, 0.15, 0.25]))
    power = int(rng.integers(-1, 3))
    step = round(mantissa * 10.0**power, 6)
    n = int(rng.integers(4, 11))
    first = 0 if rng.random() < 0.75 else int(rng.integers(1, 5))
    d = max(0, 1 - power) if mantissa == 2.5 else max(0, -power)
    form = "{:g}" if rng.random() < 0.5 else f"{{:.{d}f}}"
    values = tuple(round(step * (first + k), 9) for k in range(n + 1))
    return Scale(side, values[0], values[-1], values, form)
