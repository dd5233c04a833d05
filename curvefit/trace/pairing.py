"""Who goes on as whom through common ink: pairing by how smooth curves would run."""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import permutations, product

import numpy as np
from numpy.typing import NDArray

__all__ = ["Arm", "Zone", "bent", "paired", "with_far_side"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Arm:
    """A stretch of a strand that stands alone."""

    x: Array
    y: Array


@dataclass(frozen=True, slots=True, eq=False)
class Zone:
    """A stretch of common ink: columns, edges; arms that come in from the left and go on right."""

    x: Array
    top: Array
    bottom: Array
    left: tuple[int, ...]
    right: tuple[int, ...]


def paired(zone: Zone, arms: list[Arm], edge_width: float) -> tuple[list[tuple[int, int]], float]:
    """Arms of the left with arms of the right, and how sure that is (0–1)."""
    left, right = zone.left, zone.right
    if not left or not right:
        return [], 1.0
    if len(right) > 4 or len(left) > 4:
        return [(a, b) for a, b in zip(left, right, strict=False)], 0.0
    trials = [
        (_misfit(zone, arms, choice, edge_width), choice)
        for choice in _choices(left, right)
        if all(arms[a].x[-1] < arms[b].x[0] + 15 for a, b in choice)
    ]
    if not trials:
        return [], 0.0
    trials.sort(key=lambda t: t[0])
    best = trials[0]
    if len(trials) == 1:
        return best[1], 1.0
    margin = 1.0 - best[0] / max(trials[1][0], 1e-9)
    return best[1], float(margin)


def bent(a: Arm, b: Arm) -> float:
    """How badly one cubic runs through two arms, one after the other [px²]."""
    if a.x[-1] > b.x[0] + 15:
        return float("inf")
    window = 1.2 * abs(b.x[0] - a.x[-1]) + 60.0
    before, after = a.x > a.x[-1] - window, b.x < b.x[0] + window
    x, y = np.r_[a.x[before], b.x[after]], np.r_[a.y[before], b.y[after]]
    if len(x) < 8:
        return float("inf")
    fit = np.polynomial.Polynomial.fit(x, y, 3)
    # among equals the nearest
    return float(((fit(x) - y) ** 2).mean() + 1e-4 * max(b.x[0] - a.x[-1], 0))


def with_far_side(zone: Zone, arms: list[Arm], edge_width: float, count: int) -> Zone:
    """The zone with arms made from its edges where it is wide again beyond its narrowest place.

    Lines that run together from their start on may cross inside the common ink: it is then wide,
    narrow, and wide again. The edges of the far part are an upper and a lower arm.
    """
    from scipy.ndimage import gaussian_filter1d

    slope = np.gradient(gaussian_filter1d(0.5 * (zone.top + zone.bottom), 6.0), zone.x)
    steep = np.sqrt(1 + slope * slope)
    spread = gaussian_filter1d(zone.bottom - zone.top - edge_width * steep, 5.0)
    narrow = int(spread[len(spread) // 4 :].argmin()) + len(spread) // 4
    wide = (np.arange(len(spread)) < narrow) & (spread > 0.6 * spread[:narrow].max(initial=0))
    if wide.sum() < 30 or spread[wide].mean() < 0.35 * edge_width + 2 * max(spread[narrow], 0.3):
        return zone
    x, half = zone.x[wide], 0.5 * edge_width * steep[wide]
    upper, lower = zone.top[wide] + half, zone.bottom[wide] - half
    first = len(arms)
    for share in np.linspace(0, 1, count):
        arms.append(Arm(x, upper + share * (lower - upper)))
    return replace(zone, left=tuple(range(first, len(arms))))


def _choices(left: tuple[int, ...], right: tuple[int, ...]) -> list[list[tuple[int, int]]]:
    """All ways to let every arm on the right come from one on the left, or the other way round."""
    if len(left) >= len(right):
        return [list(zip(order, right, strict=True)) for order in permutations(left, len(right))]
    short = [[*pick] for pick in _products(left, len(right)) if set(pick) == set(left)]
    return [list(zip(pick, right, strict=True)) for pick in short]


def _products(items: tuple[int, ...], count: int) -> list[tuple[int, ...]]:
    return list(product(items, repeat=count))


def _misfit(zone: Zone, arms: list[Arm], pairs: list[tuple[int, int]], edge_width: float) -> float:
    """Mean squared distance [px²] of quartics from the paired arms and the zone's edges."""
    centre, scale = zone.x.mean(), max(np.ptp(zone.x), 40.0)
    window = 1.2 * np.ptp(zone.x) + 60.0
    heights, total, count = [], 0.0, 0
    for a, b in pairs:
        before = arms[a].x > zone.x[0] - window
        after = arms[b].x < zone.x[-1] + window
        x = np.r_[arms[a].x[before], arms[b].x[after]]
        y = np.r_[arms[a].y[before], arms[b].y[after]]
        if len(x) < 8:
            return 1e6
        fit = np.polynomial.Polynomial.fit((x - centre) / scale, y, 4)
        total += float(((fit((x - centre) / scale) - y) ** 2).sum())
        count += len(x)
        heights.append((fit((zone.x - centre) / scale), fit.deriv()((zone.x - centre) / scale)))
    half = [0.5 * edge_width * np.sqrt(1 + (d / scale) ** 2) for _, d in heights]
    top = np.min([h - k for (h, _), k in zip(heights, half, strict=True)], axis=0)
    bottom = np.max([h + k for (h, _), k in zip(heights, half, strict=True)], axis=0)
    off = np.minimum((top - zone.top) ** 2, 6) + np.minimum((bottom - zone.bottom) ** 2, 6)
    return total / count + float(off.mean()) + 0.01
