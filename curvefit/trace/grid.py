"""Straight lines of the paper (frame, grid) taken out of the ink, curves that lie on them kept."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

__all__ = ["Inked", "without_lines"]

Image = NDArray[np.float32]
Ruled = tuple[NDArray[np.float64], float]  # centre row at every column, thickness


@dataclass(frozen=True, slots=True, eq=False)
class Inked:
    """What is left when the paper's lines are gone.

    ink : (rows, cols) 0–1; known : (rows, cols) 0–1, 0 where a line hides whether there is ink.
    rows, cols : array px of the lines found, with their thickness, (n, 2).
    """

    ink: Image
    known: Image
    rows: NDArray[np.float64]
    cols: NDArray[np.float64]


def without_lines(dark: Image, margin: int) -> Inked:
    """The ink of the drawing without horizontal and vertical lines.

    Notes
    -----
    A line pale against the curves is subtracted with its running median along itself, capped at
    1.25 × its global median + 0.03: a flat curve that lies on it for a while stays. A line as
    dark as curves is not erased but made unknown, except where the ink across it is thicker
    than the line alone by 1.6 px.
    """
    ink, known = dark.copy(), np.ones_like(dark)
    level, upright = _find_lines(dark, margin), _find_lines(dark.T, margin)
    curves = _curve_darkness(dark, level, upright)
    for lines, source, target, seen in (
        (level, dark, ink, known),
        (upright, dark.T, ink.T, known.T),
    ):
        for centre, thickness in lines:
            _take_out(source, target, seen, centre, thickness, curves)
    rows, cols = (
        np.array([(c.mean(), t) for c, t in lines]).reshape(-1, 2) for lines in (level, upright)
    )
    return Inked(ink, known, rows, cols)


def _curve_darkness(dark: Image, level: list[Ruled], upright: list[Ruled]) -> float:
    """How dark curves are: of all ink, or of that beside the lines where these are many."""
    strong = dark[dark > 0.25]
    darkness = float(np.quantile(strong, 0.85)) if strong.size > 50 else 0.8
    beside = dark.copy()
    for lines, image in ((level, beside), (upright, beside.T)):
        for centre, thickness in lines:
            at, across, _ = _strip(image, centre, thickness)
            image[at, across] = 0.0
    strong = beside[beside > 0.25]
    if strong.size < 0.001 * dark.size:
        return darkness
    return max(darkness, float(np.quantile(strong, 0.85)))


def _strip(
    dark: Image, centre: NDArray[np.float64], thickness: float
) -> tuple[NDArray[np.int64], NDArray[np.int64], int]:
    """Rows (offset, column) and columns of the pixels along a line; half their number."""
    half = int(np.ceil(thickness / 2 + 1.0))
    offsets = np.arange(-half, half + 1)[:, None]
    at = np.clip(np.round(centre).astype(int) + offsets, 0, len(dark) - 1)
    return at, np.arange(dark.shape[1])[None, :], half


def _find_lines(dark: Image, margin: int) -> list[Ruled]:
    """Horizontal lines: their centre row at every column, and thickness [px]."""
    rows, cols = dark.shape
    sag = _sag(dark, margin)
    level = _levelled(dark, sag, margin)
    edges = np.linspace(margin, cols - margin, 13).astype(int)
    mean = np.stack([level[:, a:b].mean(1) for a, b in pairwise(edges)], 1)
    typical = np.sort(mean, axis=1)[:, 3:6].mean(1)  # present in the lower-middle blocks
    base = _local_base(typical, 12)
    excess = np.clip(typical - base, 0, None)
    found: list[Ruled] = []
    used = np.zeros(rows, bool)
    for row in np.argsort(-excess):
        if excess[row] < 0.045:
            break
        if used[row]:
            continue
        low, high = _extent(excess, int(row))
        used[max(low - 1, 0) : high + 2] = True
        thickness = float(excess[low : high + 1].sum() / excess[low : high + 1].max())
        if high - low > 0.02 * rows + 8:
            continue
        centre = _follow(mean, edges, float(row), max(thickness, 1.0), cols)
        centre = centre + sag[int(row)] * _arch(cols, margin)
        found.append((centre, max(thickness, 1.0)))
    return found


def _arch(n: int, margin: int) -> NDArray[np.float64]:
    """A parabola over n places: 1 in the middle, 0 at `margin` from both ends."""
    u = (2.0 * np.arange(n) - (n - 1)) / (n - 1 - 2 * margin)
    return np.asarray(1.0 - u * u)


def _sag(dark: Image, margin: int) -> NDArray[np.float64]:
    """How far horizontal lines hang in their middle at every row [px], from both frame sides.

    Notes
    -----
    A side hangs if 1.6 times as much ink lies along an arch through its corners as
    along the straight line. Lines between the sides hang by something between.
    """
    rows, cols = dark.shape
    trials = np.arange(-(margin - 1.0), margin + 3.0)
    across = np.arange(margin, cols - margin)
    arch = _arch(cols, margin)[across]
    sags = []
    for side in (margin, rows - 1 - margin):
        at = np.round(side + trials[:, None] * arch).astype(int)
        seen = [dark[np.clip(at + k, 0, rows - 1), across] for k in (-1, 0, 1)]
        ink = np.max(seen, axis=0).mean(1)
        straight = ink[np.abs(trials) < 0.5].max()
        best = trials[ink > 0.97 * ink.max()].mean()  # a broad line fits several
        sags.append(float(best) if ink.max() > max(1.6 * straight, 0.35) else 0.0)
    return np.interp(np.arange(rows), [margin, rows - 1 - margin], sags)


def _levelled(dark: Image, sag: NDArray[np.float64], margin: int) -> Image:
    """The image with its horizontal lines made straight."""
    import cv2

    if not sag.any():
        return dark
    rows, cols = dark.shape
    x, y = np.meshgrid(np.arange(cols, dtype=np.float32), np.arange(rows, dtype=np.float32))
    y = y + (sag[:, None] * _arch(cols, margin)).astype(np.float32)
    return np.asarray(cv2.remap(dark, x, y, cv2.INTER_LINEAR, borderMode=cv2.BORDER_REPLICATE))


def _local_base(profile: NDArray[np.float32], reach: int) -> NDArray[np.float32]:
    """Running lower quartile: the ink level between lines."""
    from scipy.ndimage import percentile_filter

    return np.asarray(percentile_filter(profile, 30, size=2 * reach + 1, mode="nearest"))


def _extent(excess: NDArray[np.float32], row: int) -> tuple[int, int]:
    low = high = row
    floor = max(0.25 * float(excess[row]), 0.02)
    while low > 0 and excess[low - 1] > floor and excess[low - 1] <= excess[low] * 1.1:
        low -= 1
    while high < len(excess) - 1 and excess[high + 1] > floor:
        if excess[high + 1] > excess[high] * 1.1:
            break
        high += 1
    return low, high


def _follow(
    mean: Image, edges: NDArray[np.int64], row: float, thickness: float, cols: int
) -> NDArray[np.float64]:
    """Centre row of a line at every column: a robust parabola through its place in each block."""
    reach = int(np.ceil(thickness / 2 + 2))
    near = np.arange(max(int(row) - reach, 0), min(int(row) + reach + 1, len(mean)))
    weight = np.clip(mean[near] - mean[near].min(0), 0, None)
    centre = (weight * near[:, None]).sum(0) / np.maximum(weight.sum(0), 1e-6)
    middle = (edges[:-1] + edges[1:]) / 2.0
    trust = (weight.max(0) > 0.03).astype(float)
    u = 2.0 * middle / cols - 1.0
    design = np.stack([np.ones_like(u), u, u * u], 1)
    fit = np.array([row, 0.0, 0.0])
    for _ in range(4):
        away = np.abs(centre - design @ fit)
        w = trust * np.exp(-((away / 1.0) ** 2))
        a = design * w[:, None]
        fit = np.linalg.solve(a.T @ a + np.diag([1e-6, 0.3, 0.3]), a.T @ (w * centre) + [0, 0, 0])
    full = 2.0 * np.arange(cols) / cols - 1.0
    return np.asarray(fit[0] + fit[1] * full + fit[2] * full * full)


def _take_out(
    dark: Image,
    ink: Image,
    known: Image,
    centre: NDArray[np.float64],
    thickness: float,
    curves: float,
) -> None:
    """Take one horizontal line out of `ink`, in place."""
    from scipy.ndimage import uniform_filter1d

    cols = dark.shape[1]
    at, across, half = _strip(dark, centre, thickness)
    strip = dark[at, across]
    typical = np.median(strip, axis=1)
    if typical.max() > 0.62 * curves or strip.max() < 0.01:
        _hide(dark, ink, known, at, across, half)
        return
    local = _running_median(strip, max(cols // 14, 31))
    cap = 1.25 * typical[:, None] + 0.03
    line = np.minimum(uniform_filter1d(local, 9, axis=1), cap).astype(np.float32)
    # an opaque curve over the line: line + coverage × (curve − line)
    rest = np.clip((strip - line) / np.maximum(1.0 - line / max(curves, 0.2), 0.35), 0, 1)
    rest[rest < 0.12] = 0.0
    ink[at, across] = np.minimum(ink[at, across], rest)
    sure = 1.0 - np.clip(line / max(curves, 0.2), 0, 1) * 0.6
    known[at, across] = np.minimum(known[at, across], sure)


def _running_median(strip: Image, window: int) -> Image:
    """Running median along the strip on a coarse raster, interpolated."""
    cols = strip.shape[1]
    centres = np.arange(0, cols + window // 3, max(window // 3, 1))
    values = np.stack(
        [
            np.median(strip[:, max(c - window // 2, 0) : c + window // 2 + 1], axis=1)
            for c in np.minimum(centres, cols - 1)
        ],
        1,
    )
    return np.stack([np.interp(np.arange(cols), centres, v) for v in values]).astype(np.float32)


def _hide(
    dark: Image,
    ink: Image,
    known: Image,
    at: NDArray[np.int64],
    across: NDArray[np.int64],
    half: int,
) -> None:
    """Make a dark line unknown, except where the ink across it is thicker than the line."""
    rows = len(dark)
    wide = np.clip(at[half] + np.arange(-half - 6, half + 7)[:, None], 0, rows - 1)
    column = dark[wide, across]
    middle = len(column) // 2
    run = np.zeros(column.shape[1], np.float32)
    for direction in (1, -1):
        alive = np.ones(column.shape[1], np.float32)
        start = middle if direction == 1 else middle - 1
        stop = len(column) if direction == 1 else -1
        for k in range(start, stop, direction):
            alive = alive * (column[k] > 0.3)
            run += alive * column[k]
    alone = np.median(run[run > 0.5]) if (run > 0.5).any() else 0.0
    # a run through the whole window is the other set of lines, or a steep curve: a short loss
    thicker = (run > alone + 1.6) & (run < 0.9 * len(column))
    keep = np.broadcast_to(thicker, at.shape)
    ink[at, across] = np.where(keep, ink[at, across], 0.0)
    # what is kept is a stroke and a line together: good enough to follow, not to measure
    known[at, across] = np.where(keep, np.minimum(known[at, across], 0.55), 0.0)
