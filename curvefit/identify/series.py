"""The printed series of efficiency levels: what is off it, out of order or missing is mended."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

__all__ = ["Settings", "series_step", "settle", "unimodal"]


@dataclass(frozen=True, slots=True)
class Settings:
    """Costs: a level off the series, one character misread, no level, one that no text says.

    outer : a level off the series and not near its top; apart : one more than 2.5 steps from all
    others.
    disorder : a head line along which the levels do not rise to one peak and fall behind it.
    """

    off_series: float = 0.4
    outer: float = 1.3
    apart: float = 1.5
    misread: float = 1.2
    unknown: float = 2.0
    silent: float = 1.6
    disorder: float = 3.0


def unimodal(values: Sequence[float | None]) -> bool:
    """Whether known values rise strictly to a peak and fall strictly behind it.

    The two values next to the peak may be equal: the two branches of one level.

    Examples
    --------
    >>> unimodal([0.6, 0.7, None, 0.75, 0.75, 0.7]), unimodal([0.6, 0.1, 0.7])
    (True, False)
    """
    known = [v for v in values if v is not None]
    steps = np.sign(np.diff(known))
    flat = np.flatnonzero(steps == 0)
    if len(flat) > 1:
        return False
    if len(flat) == 1:
        k = int(flat[0])
        return bool((steps[:k] > 0).all() and (steps[k + 1 :] < 0).all())
    falls = np.flatnonzero(steps < 0)
    return bool(not len(falls) or (steps[falls[0] :] < 0).all())


def series_step(known: Sequence[float]) -> float | None:
    """The step of the series that most levels are multiples of; None where there is none.

    Examples
    --------
    >>> series_step([0.7, 0.75, 0.8, 0.83])
    0.05
    """
    per_mille = np.rint(np.unique(np.asarray(known, float)) * 1000).astype(int)
    if len(per_mille) < 3:
        return None
    for step in (100, 50, 25, 20, 10):
        on = int((per_mille % step == 0).sum())
        if on >= max(len(per_mille) - max(1, len(per_mille) // 3), 2):
            return step / 1000
    return None


def settle(
    values: Sequence[float | None],
    texts: Sequence[str],
    rows: Sequence[Sequence[int]],
    settings: Settings | None = None,
) -> list[float | None]:
    """The levels of iso lines such that they are in order along every head line.

    Parameters
    ----------
    values : levels as read, fractions; texts : their labels, "" where there is none.
    rows : for each head line the lines that meet it, from left to right.

    Returns
    -------
    list : a level that contradicts the others replaced by the one of the series that fits its
        place and differs from its text by a single character; a missing one filled in where only
        one fits; None where several would.

    Notes
    -----
    The change of one level that saves most is made until none saves anything; a level that
    another one could replace at no cost counts as not known.
    """
    settings = settings or Settings()
    known = [v for v in values if v is not None]
    step = series_step(known)
    if len(known) < 2 or not rows:
        return list(values)
    low, high = min(k for k in known if k > 0.5 * max(known)), max(known)
    usual = step or 0.05
    series = [k * usual for k in range(1, int(0.96 / usual) + 1)]
    series = [s for s in series if low - 2 * usual <= s <= high + 2 * usual]
    options: list[dict[float | None, float]] = []
    for i, (value, text) in enumerate(zip(values, texts, strict=True)):
        costs: dict[float | None, float] = {None: settings.unknown}
        for level in series:
            level = round(level, 6)
            if text and _misread(text, level):
                costs[level] = settings.misread
            elif not text and step is not None and _bracketed(i, level, step, values, rows):
                costs[level] = settings.silent
        if value is not None:
            off = step is not None and not _on(value, step)
            outer = off and value < high - 1.5 * (step or 0)  # extra levels stand about the peak
            costs[value] = settings.outer if outer else settings.off_series * off
            others = [abs(value - k) for k in known if abs(value - k) > 1e-9]
            if others and min(others) > max(2.5 * usual, 0.12):
                costs[value] = settings.apart
        options.append(costs)
    chosen = list(values)
    for _ in range(2 * len(chosen)):
        change = _best_change(chosen, options, rows, settings)
        if change is None:
            break
        chosen[change[0]] = change[1]
    return [
        None if v is not None and _tied(i, chosen, options[i], rows, settings) else v
        for i, v in enumerate(chosen)
    ]


def _bracketed(
    i: int,
    level: float,
    step: float,
    values: Sequence[float | None],
    rows: Sequence[Sequence[int]],
) -> bool:
    """Whether a line's neighbours along some head line are one step below and one above."""
    for row in rows:
        for before, own, after in zip(row, row[1:], row[2:], strict=False):
            sides = sorted(v for v in (values[before], values[after]) if v is not None)
            if own == i and len(sides) == 2 and np.allclose(sides, [level - step, level + step]):
                return True
    return False


def _on(value: float, step: float) -> bool:
    return abs(value / step - round(value / step)) < 1e-6


def _disorder(values: Sequence[float | None], rows: Sequence[Sequence[int]]) -> int:
    return sum(not unimodal([values[i] for i in row]) for row in rows)


def _total(
    i: int,
    level: float | None,
    values: Sequence[float | None],
    costs: dict[float | None, float],
    rows: Sequence[Sequence[int]],
    settings: Settings,
) -> float:
    """Cost of one line having a level while the others stand."""
    trial = [level if k == i else v for k, v in enumerate(values)]
    return costs[level] + settings.disorder * _disorder(trial, rows)


def _best_change(
    values: Sequence[float | None],
    options: Sequence[dict[float | None, float]],
    rows: Sequence[Sequence[int]],
    settings: Settings,
) -> tuple[int, float | None] | None:
    """The one change of a level that saves most; None where none saves anything."""
    best: tuple[float, int, float | None] | None = None
    for i, costs in enumerate(options):
        now = _total(i, values[i], values, costs, rows, settings)
        for level in costs:
            saved = now - _total(i, level, values, costs, rows, settings)
            if saved > 1e-9 and (best is None or saved > best[0] + 1e-9):
                best = saved, i, level
    return None if best is None else (best[1], best[2])


def _tied(
    i: int,
    values: Sequence[float | None],
    costs: dict[float | None, float],
    rows: Sequence[Sequence[int]],
    settings: Settings,
) -> bool:
    """Whether another level would do for a line just as well."""
    own = _total(i, values[i], values, costs, rows, settings)
    return any(
        abs(_total(i, level, values, costs, rows, settings) - own) < 1e-9
        for level in costs
        if level is not None and level != values[i]
    )


def _misread(text: str, level: float) -> bool:
    """Whether a text could be this level with one character misread or lost."""
    digits = "".join(c for c in text if c.isdigit())
    right = f"{100 * level:g}".replace(".", "")
    if len(digits) > len(right) == 2:
        digits = digits[:2]  # what follows was the sign
    if len(digits) == len(right):
        return sum(a != b for a, b in zip(digits, right, strict=True)) <= 1
    return len(digits) + 1 == len(right) and (right.startswith(digits) or right.endswith(digits))
