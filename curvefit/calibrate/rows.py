"""The words about a plot box, seen from the box: rows and columns of numbers, and other text."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.consensus import Label
from curvefit.calibrate.labels import numeric, parts, row_readings
from curvefit.geometry import Warp
from curvefit.records import Word
from curvefit.records.base import Side

__all__ = ["SIDES", "Column", "Spot", "columns", "outward", "spots"]

Array = NDArray[np.float64]
SIDES: tuple[Side, ...] = ("bottom", "left", "right", "top")


@dataclass(frozen=True, slots=True, eq=False)
class Spot:
    """A word in panel px: its bounds x0, y0, x1, y1, the height of its type, how it reads.

    quarter : 0 to the right, 1 upwards, 2 upside down, 3 downwards.
    """

    word: Word
    bounds: tuple[float, float, float, float]
    height: float
    quarter: int

    @property
    def middle(self) -> tuple[float, float]:
        """(x, y) panel px."""
        x0, y0, x1, y1 = self.bounds
        return (x0 + x1) / 2, (y0 + y1) / 2


@dataclass(frozen=True, slots=True, eq=False)
class Column:
    """Numbers in one row along a side. near, far : its edges, distances outside the side [px].

    order : 1 for the column next to the box, 2 for the next one outside.
    """

    side: Side
    labels: tuple[Label, ...]
    near: float
    far: float
    height: float
    order: int = 1


def spots(words: Sequence[Word], warp: Warp) -> list[Spot]:
    """The words as seen from the box."""
    out = []
    for word in words:
        flat = warp.to_panel(word.box)
        if not np.isfinite(flat).all():
            continue
        along = flat[1] - flat[0]
        quarter = round(float(np.degrees(np.arctan2(-along[1], along[0]))) / 90) % 4
        height = float(np.hypot(*(flat[3] - flat[0])))
        x0, y0 = flat.min(0)
        x1, y1 = flat.max(0)
        bounds = (float(x0), float(y0), float(x1), float(y1))
        out.append(Spot(word, bounds, max(height, 1.0), quarter))
    return out


def columns(all_spots: Sequence[Spot], size: tuple[float, float]) -> list[Column]:
    """Every row of two or more numbers along a side of the box, the nearest of each side first."""
    numbers = [s for s in all_spots if numeric(s.word.text) or len(parts(s.word.text)) > 1]
    numbers = [s for s in numbers if any(c.isdigit() for c in s.word.text) or len(s.word.text) <= 3]
    if not numbers:
        return []
    height = float(np.median([s.height for s in numbers]))
    out: list[Column] = []
    for side in SIDES:
        beside = [s for s in numbers if _beside(s, side, size, height)]
        groups = sorted(_groups(beside, side, size), key=lambda g: min(o for o, _, _ in g))
        order = 0
        for group in groups:
            column = _column(group, side, size, order + 1)
            if column is not None:
                order += 1
                out.append(column)
    return out


def outward(s: Spot, side: Side, size: tuple[float, float]) -> tuple[float, float]:
    """The word's edges as distances outside the side."""
    x0, y0, x1, y1 = s.bounds
    w, h = size
    if side == "left":
        return -x1, -x0
    if side == "right":
        return x0 - w, x1 - w
    return (y0 - h, y1 - h) if side == "bottom" else (-y1, -y0)


def _along(s: Spot, side: Side, size: tuple[float, float]) -> float:
    x, y = s.middle
    return x / size[0] if side in ("bottom", "top") else 1.0 - y / size[1]


def _beside(s: Spot, side: Side, size: tuple[float, float], height: float) -> bool:
    near, _ = outward(s, side, size)
    length = size[0] if side in ("bottom", "top") else size[1]
    depth = size[1] if side in ("bottom", "top") else size[0]
    slack = (1.5 if side in ("bottom", "top") else 0.9) * height / length
    far = max(9 * height, (0.12 if side in ("bottom", "top") else 0.4) * depth)
    if not -0.45 * s.height < near < far or not 0.4 * height < s.height < 2.4 * height:
        return False
    return -slack < _along(s, side, size) < 1 + slack


def _groups(
    beside: Sequence[Spot], side: Side, size: tuple[float, float]
) -> list[list[tuple[float, float, Spot]]]:
    """Words whose outward stretches overlap."""
    stretches = sorted(
        ((*outward(s, side, size), s) for s in beside), key=lambda x: (x[0] + x[1], x[0])
    )
    groups: list[list[tuple[float, float, Spot]]] = []
    for near, far, s in sorted(stretches, key=lambda x: x[0]):
        slack = 0.15 * s.height
        if groups and near < max(f for _, f, _ in groups[-1]) - slack:
            groups[-1].append((near, far, s))
        else:
            groups.append([(near, far, s)])
    return groups


def _column(
    group: list[tuple[float, float, Spot]], side: Side, size: tuple[float, float], order: int
) -> Column | None:
    flat = side in ("bottom", "top")
    length = size[0] if flat else size[1]
    pieces: list[tuple[float, str, Word, bool, float]] = []
    for _, _, s in group:
        split = parts(s.word.text)
        for part in split:
            at = _along(s, side, size)
            if len(split) > 1:
                if not flat or s.quarter != 0:
                    continue
                x0, _, x1, _ = s.bounds
                at = (x0 + (x1 - x0) * (part.start + part.end) / 2) / size[0]
            pieces.append((at, part.text, s.word, len(split) == 1, s.height))
    if len(pieces) < 2:
        return None
    pieces.sort(key=lambda p: p[0])
    height = float(np.median([p[4] for p in pieces]))
    read = row_readings([p[1] for p in pieces])
    labels = tuple(
        Label(at, height / length, text, r, word, firm and 0.55 * height < h < 1.7 * height)
        for (at, text, word, firm, h), r in zip(pieces, read, strict=True)
        if r
    )
    if len(labels) < 2:
        return None
    near = min(n for n, _, _ in group)
    return Column(side, labels, near, max(f for _, f, _ in group), height, order)
