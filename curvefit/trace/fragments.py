"""Pieces of line in any direction: dashes, and what is left between crossings."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import arc_length

__all__ = ["End", "Piece", "end_of", "pieces"]

Array = NDArray[np.float64]
Image = NDArray[np.float32]


@dataclass(frozen=True, slots=True, eq=False)
class Piece:
    """xy : (n, 2) array px along the middle, ordered; ink : length of line seen [px]."""

    xy: Array
    ink: float

    @property
    def length(self) -> float:
        """[px]"""
        return float(arc_length(self.xy)[-1])


@dataclass(frozen=True, slots=True, eq=False)
class End:
    """at, out : (2,) place and outward direction; bend : curvature outward [1/px], left positive;
    spread : standard uncertainty of the direction [rad]."""

    at: Array
    out: Array
    bend: float
    spread: float


def pieces(ink: Image, width: float) -> list[Piece]:
    """The pieces of line in an image that holds no found lines and no letters any more."""
    import cv2
    from skimage.morphology import skeletonize

    mask = (ink > 0.35).astype(np.uint8)
    count, labels, stats, _ = cv2.connectedComponentsWithStats(mask, connectivity=8)
    found: list[Piece] = []
    for i in range(1, count):
        x, y, w, h, area = (int(v) for v in stats[i])
        if area < max(0.5 * width * width, 3):
            continue
        shape = np.pad(labels[y : y + h, x : x + w] == i, 1)
        if max(w, h) < 3.5 * width + 2:
            found.append(_dash(shape, width, x - 1, y - 1))
            continue
        skeleton = skeletonize(shape)
        for path in _branches(skeleton, width):
            xy = path[:, ::-1] + [x - 1.0, y - 1.0]
            xy = _lengthened(_rounded(xy), 0.5 * width)
            found.append(Piece(xy, float(arc_length(xy)[-1])))
    return found


def _dash(shape: NDArray[np.bool_], width: float, left: int, top: int) -> Piece:
    """A short piece as the line between its ends, by its principal axis."""
    points = np.argwhere(shape)[:, ::-1].astype(float)
    middle = points.mean(0)
    spread, axes = np.linalg.eigh(np.cov((points - middle).T) + 1e-9 * np.eye(2))
    along = axes[:, 1]
    half = np.sqrt(3.0 * max(spread[1], 0.1))  # a uniform bar: length = √12 · sd
    n = max(int(2 * half) + 1, 3)
    xy = middle + np.linspace(-half, half, n)[:, None] * along + [left, top]
    return Piece(xy, float(2 * half))


def _branches(skeleton: NDArray[np.bool_], width: float) -> list[Array]:
    """Ordered pixel paths of a skeleton, cut at junctions, spurs left out."""
    import cv2

    inside = skeleton.astype(np.uint8)
    kernel = np.ones((3, 3), np.float32)
    around = cv2.filter2D(inside, -1, kernel, borderType=cv2.BORDER_CONSTANT) - inside
    junction = (inside > 0) & (around >= 3)
    open_paths = inside.copy()
    open_paths[junction] = 0
    count, labels = cv2.connectedComponents(open_paths, connectivity=8)
    paths = [_ordered(np.argwhere(labels == i)) for i in range(1, count)]
    least = 1.5 * width + 2
    return [p for p in paths if p is not None and (len(p) >= least or not junction.any())]


def _ordered(pixels: NDArray[np.int64]) -> Array | None:
    """The pixels of an unbranched path from one end to the other."""
    if len(pixels) < 3:
        return None
    places = {(int(r), int(c)): k for k, (r, c) in enumerate(pixels)}
    steps = [(0, 1), (1, 0), (0, -1), (-1, 0), (1, 1), (1, -1), (-1, 1), (-1, -1)]
    near = [[places[q] for dr, dc in steps if (q := (r + dr, c + dc)) in places] for r, c in places]
    start = min(range(len(near)), key=lambda k: len(near[k]))
    order, seen = [start], {start}
    while True:
        following = next((k for k in near[order[-1]] if k not in seen), None)
        if following is None:
            return np.asarray(pixels[order], float)
        order.append(following)
        seen.add(following)


def _rounded(xy: Array) -> Array:
    from scipy.ndimage import gaussian_filter1d

    if len(xy) < 8:
        return xy
    before = 2 * xy[:1] - xy[1:8][::-1]
    after = 2 * xy[-1:] - xy[-8:-1][::-1]
    smoothed = gaussian_filter1d(np.concatenate([before, xy, after]), 2.0, axis=0)
    return np.asarray(smoothed[len(before) : len(before) + len(xy)])


def _lengthened(xy: Array, by: float) -> Array:
    """A skeleton ends half a stroke before the stroke does."""
    n = min(len(xy) - 1, 8)
    a, b = xy[0] - xy[n], xy[-1] - xy[-1 - n]
    a, b = a / max(np.hypot(*a), 1e-9), b / max(np.hypot(*b), 1e-9)
    return np.concatenate([xy[:1] + by * a, xy, xy[-1:] + by * b])


def end_of(xy: Array, width: float, memory: float) -> End:
    """The end of a chain of pieces at its last point, as it would go on."""
    s = arc_length(xy)
    tail = xy[s >= s[-1] - memory]
    if len(tail) < 3:
        tail = xy[-3:]
    s = arc_length(tail) - arc_length(tail)[-1]
    length = max(float(-s[0]), 1.0)
    bent = length > 12 * width + 10
    design = np.stack([s, s * s], 1) if bent else s[:, None]
    weight = np.ones(len(s))
    first, *rest = np.linalg.lstsq(
        np.c_[np.ones(len(s)), design] * weight[:, None], tail * weight[:, None], rcond=None
    )[0][1:]
    out = first / max(np.hypot(*first), 1e-9)
    bend = 0.0
    if bent:
        second = 2.0 * rest[0]
        bend = float(out[0] * second[1] - out[1] * second[0]) / max(float(first @ first), 0.25)
    spread = float(np.clip((0.35 + 0.1 * width) / length * (2.0 if bent else 1.4), 0.02, 0.8))
    return End(tail[-1], out, bend, spread)
