"""Lines that run from left to right, followed through crossings and gaps one after the other."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Track", "Tracking", "across", "best_track", "peel"]

Array = NDArray[np.float64]
Image = NDArray[np.float32]
STEP = 16  #: columns between two nodes of a track


@dataclass(frozen=True, slots=True)
class Tracking:
    """Costs and rewards of a pixel of length, in working pixels (a stroke is 2.4 of them wide)."""

    stroke: float = 2.4
    steepest: int = 36  #: rows a step of 16 columns
    bend: tuple[float, ...] = (
        0.0,
        0.8,
        3.2,
        7.2,
        12.8,
    )  #: cost of a change of slope by 0, 1 … rows
    blank: float = 0.2  #: cost of a pixel without ink
    beside: float = 0.35  #: cost of ink beside the stroke (letters, blots)


@dataclass(frozen=True, slots=True, eq=False)
class Track:
    """x, y : (n,) working px of the nodes; score: ink pixels along it less its costs."""

    x: NDArray[np.float64]
    y: NDArray[np.float64]
    score: float


def across(ink: Image, known: Image, tracking: Tracking) -> Image:
    """Reward of each working pixel for a line that runs through it from left to right."""
    from scipy.ndimage import uniform_filter1d

    # saturated, so that a steep stroke (tall in its column) is worth no more than a flat one
    core = np.clip(1.35 * (uniform_filter1d(ink, 3, axis=0) * 0.5 + ink * 0.5), 0, 1)
    gap = round(tracking.stroke * 1.2) + 1
    beside = np.zeros_like(ink)
    beside[gap:-gap] = np.minimum(ink[: -2 * gap], ink[2 * gap :])
    reward = core - tracking.blank * (1.0 - core) * known - tracking.beside * beside * core
    return np.asarray(reward, np.float32)


def _segments(reward: Image, slopes: NDArray[np.int64]) -> Image:
    """Sums of reward along all straight steps: (slope, row, step); row is where it starts."""
    rows, cols = reward.shape
    steps = cols // STEP
    reach = int(slopes.max())
    padded = np.full((rows + 2 * reach, steps * STEP), -0.5, np.float32)
    padded[reach : reach + rows] = reward[:, : steps * STEP]
    columns = np.ascontiguousarray(padded.reshape(rows + 2 * reach, steps, STEP).transpose(2, 0, 1))
    out = np.zeros((len(slopes), rows, steps), np.float32)
    for i, slope in enumerate(slopes):
        for j in range(STEP):
            drop = reach + round(slope * (j + 0.5) / STEP)
            out[i] += columns[j, drop : drop + rows]
    return out


def best_track(reward: Image, tracking: Tracking) -> Track | None:
    """The best line through the reward map: any start, any end, smooth in slope.

    Notes
    -----
    Dynamic programming over (row, slope) in steps of 16 columns. A second-order state carries a
    line straight through crossings; a blank costs little, so that gaps are bridged where the
    line goes on behind them.
    """
    slopes = np.arange(-tracking.steepest, tracking.steepest + 1)
    segments = _segments(reward, slopes)
    n, rows, steps = segments.shape
    values = np.full((steps + 1, n, rows), -1e6, np.float32)
    for step in range(steps):
        best = _before(values[step], tracking) + segments[:, :, step]
        for i, slope in enumerate(slopes):  # the value stands where the step ends
            if slope >= 0:
                values[step + 1, i, slope:] = best[i, : rows - slope]
            else:
                values[step + 1, i, :slope] = best[i, -slope:]
    last = int(values.reshape(steps + 1, -1).max(1).argmax())
    i, row = divmod(int(values[last].argmax()), rows)
    score = float(values[last, i, row])
    if score <= 0:
        return None
    xs, ys = [last * STEP - 0.5], [float(row)]
    for step in range(last - 1, -1, -1):
        row -= int(slopes[i])
        xs.append(step * STEP - 0.5)
        ys.append(float(row))
        worth, i = _came_from(values[step, :, row], i, tracking)
        if worth <= 0:
            break
    return Track(np.array(xs[::-1]), np.array(ys[::-1]), score)


def _before(value: Image, tracking: Tracking) -> Image:
    """The best value to come from, for every slope and row: 0 where the line is born here."""
    n = len(value)
    best = np.maximum(value, 0)
    room = np.empty_like(value)
    for k, cost in enumerate(tracking.bend[1:], 1):
        cheaper = np.subtract(value, np.float32(cost), out=room)
        np.maximum(best[: n - k], cheaper[k:], out=best[: n - k])
        np.maximum(best[k:], cheaper[: n - k], out=best[k:])
    return best


def _came_from(value: Image, i: int, tracking: Tracking) -> tuple[float, int]:
    """The value and slope that a step with slope number i came from."""
    near = range(max(i - len(tracking.bend) + 1, 0), min(i + len(tracking.bend), len(value)))
    return max((float(value[j]) - tracking.bend[abs(j - i)], j) for j in near)


def peel(ink: Image, known: Image, xs: Array, ys: Array, half: float) -> None:
    """Take a line's ink out of the maps, in place: it is neither ink nor blank any more."""
    rows, cols = ink.shape
    x = np.arange(max(int(np.ceil(xs.min())), 0), min(int(xs.max()) + 1, cols))
    order = np.argsort(xs, kind="stable")
    y = np.interp(x, xs[order], ys[order])
    slope = np.gradient(y) if len(y) > 1 else np.zeros_like(y)
    tall = half * np.sqrt(1.0 + slope * slope)
    for k in range(-int(tall.max()) - 1, int(tall.max()) + 2):
        at = np.round(y).astype(int) + k
        ok = (np.abs(at - y) <= tall) & (at >= 0) & (at < rows)
        ink[at[ok], x[ok]] = 0.0
        known[at[ok], x[ok]] = 0.0
