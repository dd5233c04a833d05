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
    bend: tuple[float, ...] = (0.0, 0.4, 1.6, 3.6, 6.4)  #: cost of a change of slope by 0, 1 … rows
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
    columns = padded.reshape(rows + 2 * reach, steps, STEP)
    out = np.zeros((len(slopes), rows, steps), np.float32)
    for i, slope in enumerate(slopes):
        for j in range(STEP):
            drop = reach + round(slope * (j + 0.5) / STEP)
            out[i] += columns[drop : drop + rows, :, j]
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
    turns = [t for k in range(len(tracking.bend)) for t in ({k, -k})]
    value = np.full((n, rows), -1e6, np.float32)
    source = np.empty((steps, n, rows), np.int8)
    ends = np.empty(steps, np.float32)
    ends_at = np.empty(steps, np.int64)
    for step in range(steps):
        best = np.zeros((n, rows), np.float32)
        turn_of = np.full((n, rows), 127, np.int8)
        for t in turns:
            low, high = max(0, -t), n - max(0, t)
            candidate = value[low + t : high + t] - np.float32(tracking.bend[abs(t)])
            better = candidate > best[low:high]
            np.copyto(best[low:high], candidate, where=better)
            np.copyto(turn_of[low:high], np.int8(t), where=better)
        value = np.full((n, rows), -1e6, np.float32)
        best += segments[:, :, step]
        for i, slope in enumerate(slopes):  # the value stands where the step ends
            if slope >= 0:
                value[i, slope:] = best[i, : rows - slope]
                source[step, i, slope:] = turn_of[i, : rows - slope]
            else:
                value[i, :slope] = best[i, -slope:]
                source[step, i, :slope] = turn_of[i, -slope:]
        ends_at[step] = int(value.argmax())
        ends[step] = value.flat[ends_at[step]]
    last = int(ends.argmax())
    if ends[last] <= 0:
        return None
    i, row = divmod(int(ends_at[last]), rows)
    xs, ys = [(last + 1) * STEP - 0.5], [float(row)]
    for step in range(last, -1, -1):
        turn = int(source[step, i, row])
        row -= int(slopes[i])
        xs.append(step * STEP - 0.5)
        ys.append(float(row))
        if turn == 127:
            break
        i += turn
    return Track(np.array(xs[::-1]), np.array(ys[::-1]), float(ends[last]))


def peel(reward: Image, xs: Array, ys: Array, half: float, worth: float = 0.0) -> None:
    """Take a line's ink out of the reward map, in place: it is worth `worth` a pixel."""
    rows, cols = reward.shape
    x = np.arange(max(int(np.ceil(xs.min())), 0), min(int(xs.max()) + 1, cols))
    order = np.argsort(xs, kind="stable")
    y = np.interp(x, xs[order], ys[order])
    slope = np.gradient(y) if len(y) > 1 else np.zeros_like(y)
    tall = half * np.sqrt(1.0 + slope * slope)
    for k in range(-int(tall.max()) - 1, int(tall.max()) + 2):
        at = np.round(y).astype(int) + k
        ok = (np.abs(at - y) <= tall) & (at >= 0) & (at < rows)
        reward[at[ok], x[ok]] = np.minimum(reward[at[ok], x[ok]], worth)
