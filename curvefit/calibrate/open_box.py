"""Axes drawn without a frame: the corners and the perspective that no side shows."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.sides import meeting
from curvefit.geometry import project

__all__ = ["closed", "skew_px", "tilted"]

Array = NDArray[np.float64]
Seen = tuple[bool, bool, bool, bool]


def closed(
    ink: NDArray[np.uint8],
    corners: Array,
    lines: list[Array],
    seen: Seen,
    known: tuple[bool, bool],
) -> Array:
    """Corners (4, 2), page px, with those of sides that are not drawn.

    Parameters
    ----------
    corners, lines : of the sides top, right, bottom, left, clockwise from the top left; those
        not drawn as the other lines of the page let them run.
    known : whether other lines of the page tell how lines across and upright run there.

    Notes
    -----
    A side that is not drawn begins and ends where those beside it end. Where two meet that are
    not drawn, each runs as the page's other lines do if those are known, else as the side that
    faces it.
    """
    out = corners.copy()
    for i in range(4):
        if seen[i] == seen[i - 1]:
            continue
        # one of the two sides that meet in corner i is drawn: the corner is its end
        k, other = (i, (i + 1) % 4) if seen[i] else (i - 1, (i - 1) % 4)
        end = _drawn_end(ink, corners[other], corners[i], lines[k])
        if end is not None:
            out[i] = end
    for i in range(4):
        if seen[i] or seen[i - 1]:
            continue
        through = []
        for k, point in ((i - 1, out[i - 1]), (i, out[(i + 1) % 4])):
            normal = lines[k if known[k % 2] else k - 2][:2]
            through.append(np.r_[normal, normal @ point])
        out[i] = meeting(through[0], through[1])
    return out


def _drawn_end(ink: NDArray[np.uint8], start: Array, end: Array, line: Array) -> Array | None:
    """Where the ink of a line ends near the point `end`, (2,); None where it is not clear."""
    import cv2

    a, b = (p - (line[:2] @ p - line[2]) * line[:2] for p in (start, end))
    span = float(np.hypot(*(b - a)))
    t = np.arange(0.85 * span, 1.12 * span, 0.5)
    across = np.arange(-6.0, 6.1, 0.5)
    xy = a + t[:, None] * (b - a) / span
    grid = xy[:, None] + across[:, None] * line[:2]
    strip = cv2.remap(
        ink, grid[..., 0].astype(np.float32), grid[..., 1].astype(np.float32), cv2.INTER_LINEAR
    )
    profile = np.median(strip[t < 0.95 * span], axis=0)
    ridge = strip[:, np.abs(across) <= 1.5].max(1)
    level = float(np.median(ridge[t < 0.95 * span]))
    white = np.convolve(ridge < 0.5 * level, np.ones(12), "valid") > 11.5  # 6 px without ink
    gaps = np.flatnonzero(white)
    if level < 20 or not len(gaps) or abs(t[gaps[0]] - span) > 0.08 * span:
        return None
    # the middle of a tick on the very end lies half a thickness back, a blunt end does not
    back = 0.125 * float((profile > 0.5 * level).sum())
    return np.asarray(xy[max(gaps[0] - 1, 0)] - back * (b - a) / span)


def tilted(corners: Array, seen: Seen, ticks: dict[str, list[Array]]) -> Array | None:
    """Corners that make the ticks of the two drawn sides even; None where ticks do not tell.

    Parameters
    ----------
    ticks : per side, rows of places as fractions of the side under an affine warp.

    Notes
    -----
    Even ticks seen in perspective stand at t with τ = t / (t + m (1 − t)) even, one m a side. The
    two m give the homography that takes the parallelogram to the box:
    (x/mₓ, y/m_y) / (1 + x (1/mₓ − 1) + y (1/m_y − 1)), from the corner where the sides meet.
    """
    foot = next((i for i in range(4) if seen[i] and seen[i - 1]), None)
    if foot is None or sum(seen) != 2:
        return None
    names = ("top", "right", "bottom", "left")
    first, second = names[foot], names[foot - 1]  # from the foot on, and up to it
    m = []
    for name, place in ((first, foot), (second, foot - 1)):
        # fractions run left to right and bottom to top, the sides clockwise
        backwards = names[place % 4] in ("right", "bottom")
        if place == foot - 1:
            backwards = not backwards
        found = [_unevenness(1 - t[::-1] if backwards else t) for t in ticks.get(name, [])]
        told = [x for x in found if x is not None]
        if not told:
            return None
        m.append(told[0])
    matrix = np.array([[1 / m[0], 0, 0], [0, 1 / m[1], 0], [1 / m[0] - 1, 1 / m[1] - 1, 1]])
    x, y = project(np.linalg.inv(matrix), [[1.0, 1.0]])[0]
    out = corners.copy()
    along, up = corners[(foot + 1) % 4] - corners[foot], corners[foot - 1] - corners[foot]
    out[(foot + 2) % 4] = corners[foot] + x * along + y * up
    return out


def _unevenness(t: Array) -> float | None:
    """The m that makes a row of ticks even, from 4 ticks on that leave no doubt.

    One of them may be a curve that ends on the side.
    """
    t = t[(t > -0.004) & (t < 1.004)]
    found = _one_unevenness(t)
    for k in range(len(t)):
        found = found if found is not None else _one_unevenness(np.delete(t, k))
    return found


def _one_unevenness(t: Array) -> float | None:
    gaps = np.diff(t)
    if len(t) < 4 or t[0] > 0.3 or t[-1] < 0.7 or np.ptp(gaps) > 0.3 * gaps.mean():
        return None
    k = np.arange(len(t))
    # t = (a + b k) / (1 + c k), linear in a, b, c
    design = np.c_[np.ones(len(t)), k, -k * t]
    a, b, c = np.linalg.lstsq(design, t, rcond=None)[0]
    off = (a + b * k) / (1 + c * k) - t
    if np.abs(off).max() > 0.0015:
        return None
    scatter = max(float(np.sqrt((off**2).sum() / max(len(t) - 3, 1))), 0.0002)
    if abs(c) < 3 * scatter * float(np.sqrt(np.linalg.inv(design.T @ design)[2, 2])):
        return 1.0  # even within their scatter: no perspective is seen
    start, middle, end = ((x - a) / (b - c * x) for x in (0.0, 0.5, 1.0))
    half = (middle - start) / (end - start)
    return float((1 - half) / half)


def skew_px(corners: Array) -> tuple[float, float]:
    """How far [px], along x and y, the far corner of a box on two axes may lie off.

    Axes of a flat scan stand square; those in perspective hardly ever do, so the angle between
    them, over the box, is a standard uncertainty of what the perspective does there.
    """
    x, y = corners[2] - corners[3], corners[0] - corners[3]
    wide, tall = float(np.hypot(*x)), float(np.hypot(*y))
    cosine = abs(float(x @ y)) / (wide * tall)
    return cosine * tall, cosine * wide
