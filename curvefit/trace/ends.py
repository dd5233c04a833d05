"""Where a line really begins and ends."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import arc_length
from curvefit.trace.centre import Line, centred, trimmed
from curvefit.trace.ink import Layer

__all__ = ["settled"]

Array = NDArray[np.float64]


def settled(layer: Layer, line: Line, longest: float, kinked: bool = False) -> Line | None:
    """The line between its true ends: carried on as long as there is ink of its kind.

    Parameters
    ----------
    longest : how far the line may be carried on over one gap [px].
    kinked : whether sharp turns are allowed.
    """
    for _ in range(5):
        gap = _usual_gap(line)
        memory = float(np.clip(0.2 * len(line.xy), max(60.0, 3.0 * gap), 160.0))
        least = max(24.0 + 3 * line.width, 1.7 * gap + 8, 0.3 * longest)
        reach = min(max(least, 30 + _hidden_beyond(layer, line, longest, memory)), longest)
        rough = _extended(line.xy, reach, memory)
        longer = centred(layer.lines, layer.known, rough, line.width)
        if not kinked:
            longer = trimmed(longer, *_smoothest(longer))
        first, last = _supported(longer)
        if last - first < 12:
            return None
        start, stop = line.xy[0], line.xy[-1]
        line = trimmed(longer, first, last)
        grown = np.hypot(*(line.xy[0] - start)), np.hypot(*(line.xy[-1] - stop))
        if max(grown) < 0.4 * reach:
            break
    return line


def _hidden_beyond(layer: Layer, line: Line, longest: float, memory: float) -> int:
    """How far beyond its ends the line would run through what cannot be seen (a label) [px]."""
    most = 0
    for xy in (line.xy, line.xy[::-1]):
        at = np.round(_carry(xy, longest, memory)).astype(int)
        rows, cols = layer.known.shape
        inside = (at[:, 0] >= 0) & (at[:, 1] >= 0) & (at[:, 0] < cols) & (at[:, 1] < rows)
        hidden = np.nonzero(layer.known[at[inside, 1], at[inside, 0]] < 0.5)[0]
        if len(hidden) and hidden[0] < 12:
            breaks = np.nonzero(np.diff(hidden) > 12)[0]
            most = max(most, int(hidden[breaks[0]] if len(breaks) else hidden[-1]))
    return most


def _usual_gap(line: Line) -> float:
    """A long but not unusual gap between stretches of clean ink [px]."""
    edges = np.flatnonzero(np.diff(np.r_[0, line.good.astype(int), 0]))
    gaps = edges[2::2] - edges[1:-1:2]
    gaps = gaps[gaps > 2]
    return float(np.quantile(gaps, 0.8)) if len(gaps) > 2 else 0.0


def _extended(xy: Array, by: float, memory: float) -> Array:
    """The polyline carried on at both ends by a circle of its last `memory` px, `by` px far."""
    return np.concatenate([_carry(xy[::-1], by, memory)[::-1], xy, _carry(xy, by, memory)])


def _carry(xy: Array, by: float, memory: float) -> Array:
    n = int(min(memory, len(xy) - 1))
    steps = np.arange(1, max(int(by), 0) + 1, dtype=float)
    if n < 6 or not len(steps):
        return np.empty((0, 2))
    tail = xy[-n - 1 :]
    s = arc_length(tail)
    s -= s[-1]
    degree = 2 if s[0] < -40 else 1
    out = np.empty((len(steps), 2))
    for axis in range(2):
        relative = tail[:, axis] - tail[-1, axis]
        design = np.stack([s**k for k in range(1, degree + 1)], 1)
        c, *_ = np.linalg.lstsq(design, relative, rcond=None)
        out[:, axis] = tail[-1, axis] + sum(c[k] * steps ** (k + 1) for k in range(degree))
    return out


def _supported(line: Line) -> tuple[int, int]:
    """First and last index of the stretch that carries the line.

    Notes
    -----
    The stretch of the largest sum of a gain a px: clean ink is worth 1 − θ; thick continuous ink
    (a bundle) a little; blank paper, and ink in bits and pieces (letters), cost θ = 0.28 of the
    line's own duty cycle; what is hidden counts neither way.
    """
    from scipy.ndimage import minimum_filter1d

    clean = line.good
    inside = np.nonzero(clean)[0]
    if len(inside) < 4:
        return 0, 0
    solid = minimum_filter1d(line.ink, 13) > 0.7
    duty = float((clean | solid)[inside[0] : inside[-1] + 1].mean())
    theta = 0.28 * duty
    gain = np.where(clean, 1.0 - theta, np.where(solid, 0.15, -theta))
    hidden = (line.known < 0.6) & ~clean
    gain = np.where(hidden, np.where(line.ink > 0.45, 0.05, -0.02), gain)
    total = np.r_[0.0, np.cumsum(gain)]
    lowest = np.minimum.accumulate(total)
    last = int((total - lowest).argmax())
    first = int(total[: last + 1].argmin())
    shown = np.nonzero((line.ink > 0.5)[first:last])[0]
    if not len(shown):
        return first, max(last - 1, first)
    return first + int(shown[0]), first + int(shown[-1])


def _smoothest(line: Line, sharp: float = 0.3) -> tuple[int, int]:
    """First and last index of the longest stretch without a kink.

    Where the direction turns by `sharp` [rad] more than it does a little before and after, two
    lines were taken for one.
    """
    n, reach = len(line.xy), int(max(6 * line.width, 24))
    if n < 4 * reach:
        return 0, n - 1
    before = line.xy[reach:-reach] - line.xy[: -2 * reach]
    after = line.xy[2 * reach :] - line.xy[reach:-reach]
    cross = before[:, 0] * after[:, 1] - before[:, 1] * after[:, 0]
    turn = np.arctan2(cross, (before * after).sum(1))
    far = int(1.5 * reach)
    padded = np.pad(turn, far, mode="edge")
    excess = np.abs(turn - 0.5 * (padded[: -2 * far] + padded[2 * far :]))
    kinks = [0]
    while excess.max() > sharp:
        k = int(excess.argmax())
        kinks.append(k + reach)
        excess[max(k - 2 * reach, 0) : k + 2 * reach] = 0
    cuts = [*sorted(kinks), n - 1]
    ink = [float(line.good[a:b].sum()) for a, b in pairwise(cuts)]
    best = int(np.argmax(ink))
    pad = reach // 2
    first = cuts[best] + (pad if best else 0)
    last = cuts[best + 1] - (pad if best + 2 < len(cuts) else 0)
    return first, last
