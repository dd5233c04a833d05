"""Titles to axes: which line of text names which scale."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.rows import Column, Spot, outward
from curvefit.calibrate.titles import Title, read_title
from curvefit.records import Axis, Finding, Word

__all__ = ["name_axes"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Candidate:
    """A title in the making: one word, or two that stand together."""

    title: Title
    bounds: tuple[float, float, float, float]
    quarter: int
    height: float
    words: tuple[Word, ...]


def name_axes(
    axes: Sequence[Axis],
    columns: Sequence[Column],
    text: Sequence[Spot],
    size: tuple[float, float],
    read: Callable[[Sequence[Array]], list[str]] | None = None,
) -> tuple[list[Axis], set[int], list[Finding]]:
    """The axes with quantity and unit from the titles about the box.

    Returns
    -------
    axes, ids of the words that are titles, findings
    """
    candidates = [c for c in _candidates(text) if c.title.strength]
    chosen, used = _matched(axes, columns, candidates, size)
    named = [_named(axis, chosen.get(i), columns[i]) for i, axis in enumerate(axes)]
    if read is not None:
        named = _read_again(named, columns, text, size, read)
    return named, used, []


def _matched(
    axes: Sequence[Axis],
    columns: Sequence[Column],
    candidates: Sequence[Candidate],
    size: tuple[float, float],
) -> tuple[dict[int, Candidate], set[int]]:
    """To each axis the title that stands nearest; each word serves once."""
    offers = [
        (_cost(axis, column, c, size), i, k)
        for i, (axis, column) in enumerate(zip(axes, columns, strict=True))
        for k, c in enumerate(candidates)
    ]
    chosen: dict[int, Candidate] = {}
    used: set[int] = set()
    for cost, i, k in sorted(offers):
        c = candidates[k]
        if cost > 14 or i in chosen or any(id(w) in used for w in c.words):
            continue
        chosen[i] = c
        used |= {id(w) for w in c.words}
    return chosen, used


def _read_again(
    axes: list[Axis],
    columns: Sequence[Column],
    text: Sequence[Spot],
    size: tuple[float, float],
    read: Callable[[Sequence[Array]], list[str]],
) -> list[Axis]:
    """Axes whose title says too little, after the whole line that it stands in is read afresh."""
    out = list(axes)
    jobs: list[tuple[int, Spot, Array]] = []
    for i, (axis, column) in enumerate(zip(axes, columns, strict=True)):
        if axis.quantity is not None and axis.unit is not None:
            continue
        for spot in _beyond(column, text, size)[:2]:
            box = _whole_line(spot, column.side, size)
            jobs.append((i, spot, box))
            if spot.quarter in (1, 3) and len(spot.word.text) < 5:  # upwards or downwards?
                jobs.append((i, spot, np.roll(box, 2, axis=0)))
    texts = read([box for _, _, box in jobs]) if jobs else []
    for (i, spot, _), line in zip(jobs, texts, strict=True):
        title = read_title(line)
        before = 2 * (out[i].unit is not None) + (out[i].quantity is not None)
        if title.strength > before and _suits(out[i], title):
            c = Candidate(title, spot.bounds, spot.quarter, spot.height, (spot.word,))
            out[i] = _named(out[i], c, columns[i])
    return out


def _beyond(column: Column, text: Sequence[Spot], size: tuple[float, float]) -> list[Spot]:
    """Words outside the numbers of a side, the nearest first, longer ones before crumbs."""
    found: list[tuple[float, float, int, Spot]] = []
    flat = column.side in ("bottom", "top")
    for s in text:
        near, far = outward(s, column.side, size)
        x, y = s.middle
        along = x / size[0] if flat else 1 - y / size[1]
        beyond = -0.4 * column.height < near - column.far < 5 * column.height
        if beyond and -0.05 < along < 1.05 and any(c.isalpha() for c in s.word.text):
            crumb = 2 * column.height * (len(s.word.text) < 2)
            found.append((near + crumb, far, len(found), s))
    return [f[3] for f in sorted(found)]


def _whole_line(spot: Spot, side: str, size: tuple[float, float]) -> Array:
    """Panel px box (4, 2) of the line that a word stands in, from its own top left."""
    x0, y0, x1, y1 = spot.bounds
    reach = 14 * spot.height
    if side in ("bottom", "top"):
        m = 0.25 * (y1 - y0)
        x0, x1 = max(x0 - reach, -0.02 * size[0]), min(x1 + reach, 1.02 * size[0])
        return np.array([[x0, y0 - m], [x1, y0 - m], [x1, y1 + m], [x0, y1 + m]])
    m = 0.25 * (x1 - x0)
    y0, y1 = max(y0 - reach, -0.02 * size[1]), min(y1 + reach, 1.02 * size[1])
    box = np.array([[x0 - m, y1], [x0 - m, y0], [x1 + m, y0], [x1 + m, y1]])
    return np.roll(box, -2, axis=0) if spot.quarter == 3 else box


def _candidates(text: Sequence[Spot]) -> list[Candidate]:
    """Every word, and up to five that follow each other, as a title."""
    single = [_as_title((s,)) for s in text]
    full = {id(s) for s, c in zip(text, single, strict=True) if c.title.strength == 3}
    loose = [s for s in text if id(s) not in full]
    out = list(single)
    for first in loose:
        chain = [first]
        while len(chain) < 5:
            rest = [s for s in loose if all(s is not c for c in chain) and _next(chain[-1], s)]
            if not rest:
                break
            chain.append(min(rest, key=lambda s: _gap(chain[-1], s)))
            joined = _as_title(tuple(chain))
            if joined.title.strength > max(_as_title((s,)).title.strength for s in chain):
                out.append(joined)
    return out


def _as_title(chain: tuple[Spot, ...]) -> Candidate:
    """Words read together as one title."""
    bounds = np.array([s.bounds for s in chain])
    (x0, y0), (x1, y1) = bounds[:, :2].min(0), bounds[:, 2:].max(0)
    longest = max(chain, key=lambda s: len(s.word.text))
    title = read_title(" ".join(s.word.text for s in chain))
    around = (float(x0), float(y0), float(x1), float(y1))
    return Candidate(title, around, longest.quarter, longest.height, tuple(s.word for s in chain))


def _quarter_of(a: Spot, b: Spot) -> int:
    """How two words read together: a lone letter has no direction of its own."""
    return (a if len(a.word.text) >= len(b.word.text) else b).quarter


def _gap(a: Spot, b: Spot) -> float:
    quarter = _quarter_of(a, b)
    follows = _reading(b, quarter)[0] - _reading(a, quarter)[2]
    return follows if follows > -0.5 * a.height else 10 * a.height


def _next(a: Spot, b: Spot) -> bool:
    """Whether b follows a on the line, or starts the next line."""
    if a.quarter != b.quarter and min(len(a.word.text), len(b.word.text)) > 1:
        return False
    quarter = _quarter_of(a, b)
    h = max(a.height, b.height)
    ax0, ay0, ax1, ay1 = _reading(a, quarter)
    bx0, by0, bx1, by1 = _reading(b, quarter)
    follows = 0 <= bx0 - ax1 + 0.3 * h < 2.4 * h and abs(ay0 + ay1 - by0 - by1) < 1.2 * h
    below = 0 <= by0 - ay1 + 0.3 * h < 1.1 * h and min(ax1, bx1) > max(ax0, bx0)
    return follows or (below and a.quarter == b.quarter)


def _reading(s: Spot, quarter: int) -> tuple[float, float, float, float]:
    """Bounds in a frame of text: x along the line, y down the lines."""
    x0, y0, x1, y1 = s.bounds
    if quarter == 1:
        return -y1, x0, -y0, x1
    if quarter == 3:
        return y0, -x1, y1, -x0
    return x0, y0, x1, y1


def _cost(axis: Axis, column: Column, c: Candidate, size: tuple[float, float]) -> float:
    """Distance of a title from an axis's numbers in heights of type, and what speaks against."""
    if not _suits(axis, c.title):
        return 1e9
    w, h = size
    x0, y0, x1, y1 = c.bounds
    near, far = column.near, column.far
    pad = 1.0 * column.height
    if axis.side == "left":
        strip = (-far, -pad, -near, h + pad)
    elif axis.side == "right":
        strip = (w + near, -pad, w + far, h + pad)
    elif axis.side == "bottom":
        strip = (-pad, h + near, w + pad, h + far)
    else:
        strip = (-pad, -far, w + pad, -near)
    dx = max(strip[0] - x1, x0 - strip[2], 0.0)
    dy = max(strip[1] - y1, y0 - strip[3], 0.0)
    cost = (dx * dx + dy * dy) ** 0.5 / max(column.height, 1.0)
    inside = x0 > 0 and x1 < w and y0 > 0 and y1 < h
    inner = {
        "left": x0 > strip[2] - 0.3 * pad,
        "right": x1 < strip[0] + 0.3 * pad,
        "bottom": y1 < strip[1] + 0.3 * pad,
        "top": y0 > strip[3] - 0.3 * pad,
    }[axis.side]
    cost += 7.0 * inside + 2.0 * (inner and not inside)
    turned = c.quarter in (1, 3)
    if axis.along_flow and turned:
        cost += 10
    if not axis.along_flow and not turned and 0.15 * h < (y0 + y1) / 2 < 0.85 * h:
        cost += 1.0
    cost += {0: 20.0, 1: 3.0, 2: 1.5, 3: 0.0}[c.title.strength]
    return float(cost) + 1.0 * c.title.guessed + 0.5 * (len(c.words) - 1)


def _suits(axis: Axis, title: Title) -> bool:
    flow = title.dimension == "flow"
    if axis.along_flow != flow:
        return False
    if title.dimension == "ratio":
        return bool(axis.value(np.array([0.0, 1.0])).max() <= 200)
    return True


def _named(axis: Axis, c: Candidate | None, column: Column) -> Axis:
    suffix = _suffix(column)
    if c is None:
        title = read_title(suffix) if suffix else None
        if title is None or title.unit is None:
            return axis
    else:
        title = c.title
        if title.unit is None and suffix:
            own = read_title(suffix)
            if own.dimension == title.dimension:
                title = replace(title, unit=own.unit, printed_unit=own.printed_unit)
    title = _percent(title, axis)
    return replace(
        axis,
        quantity=title.quantity,
        unit=title.unit,
        printed_unit=title.printed_unit,
        factor=title.factor,
        title=title.text if c is not None else "",
        guessed=title.guessed,
    )


def _percent(title: Title, axis: Axis) -> Title:
    """An efficiency scale that runs to tens can only be one of per cent."""
    if title.unit is None and title.quantity in ("efficiency", "overall_efficiency"):
        top = float(max(axis.offset, axis.offset + axis.slope))
        if axis.scale == "linear" and 10 < top <= 200:
            return replace(title, unit="%", printed_unit="%")
    return title


def _suffix(column: Column) -> str:
    """A unit printed behind the numbers themselves ("80 %")."""
    found = [r.readings[0].suffix for r in column.labels if r.readings[0].suffix]
    return max(set(found), key=found.count) if found else ""
