"""The sides of a plot box to a fraction of a pixel, and the warp that makes the box straight."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import Warp, homography

__all__ = ["follow", "meeting", "side_lines", "straight", "warp_of"]

Array = NDArray[np.float64]

_STATIONS = 96


def follow(
    ink: NDArray[np.uint8], start: Array, end: Array, reach: float = 5.0, stations: int = _STATIONS
) -> tuple[Array, Array]:
    """Sub-pixel centres of the line of ink near the chord from `start` to `end`.

    Parameters
    ----------
    ink : array of shape (height, width), uint8
    start, end : arrays of shape (2,), page px
    reach : how far from the chord the line may lie [px].

    Returns
    -------
    xy : array of shape (n, 2), page px, the centres along the line (its doubtful parts left out)
    weight : array of shape (n,), ink found at each, 0–255

    Notes
    -----
    The strip along the chord is cut into stations; in each the median along the line (which
    passes over curves, ticks and breaks) gives a profile across, whose centroid about its peak is
    the centre. Stations off the smooth course of the rest are dropped.
    """
    import cv2

    span = float(np.hypot(*(end - start)))
    per = int(np.clip(span / stations, 3, 24))
    t = (np.arange(stations * per) + 0.5) / (stations * per)
    step = (end - start) / max(span, 1e-9)
    normal = np.array([-step[1], step[0]])
    offset = np.arange(-reach - 3, reach + 3.01, 0.5)
    grid = (start + t[:, None] * (end - start))[None] + offset[:, None, None] * normal
    strip = cv2.remap(
        ink, grid[..., 0].astype(np.float32), grid[..., 1].astype(np.float32), cv2.INTER_LINEAR
    ).astype(np.float32)
    profile = np.median(strip.reshape(len(offset), stations, per), axis=2)
    centre, weight = _centres(profile, offset, reach)
    tm = (np.arange(stations) + 0.5) / stations
    good = _smooth(tm, centre, weight)
    xy = start + tm[good, None] * (end - start) + centre[good, None] * normal
    return xy, weight[good]


def _centres(profile: NDArray[np.float32], offset: Array, reach: float) -> tuple[Array, Array]:
    """Per station: centroid of the ink about the ridge that most stations agree on."""
    inside = np.abs(offset) <= reach
    ridge = np.where(inside, profile.mean(1), -1.0)
    first = offset[int(np.argmax(ridge))]
    course = np.full(profile.shape[1], first)
    for width in (4.0, 2.5, 2.0):
        near = np.abs(offset[:, None] - course) <= width
        w = np.where(near, np.clip(profile - 0.25 * profile.max(0), 0, None), 0.0)
        total = w.sum(0)
        centre = np.where(total > 0, (w * offset[:, None]).sum(0) / np.maximum(total, 1e-9), course)
        t = np.linspace(-1, 1, len(centre))
        if (total > 0).sum() > 12:
            course = _robust(t, centre, np.where(total > 0, 1.0, 0.0), 3)
        else:
            course = centre
    peak = np.where(np.abs(offset[:, None] - course) <= 2.0, profile, 0.0).max(0)
    return centre, peak


def _robust(t: Array, y: Array, weight: Array, degree: int) -> Array:
    """Values at t of a polynomial fitted to y by reweighted least squares."""
    basis = np.polynomial.legendre.legvander(t, degree)
    w = weight.copy()
    fit = y
    for _ in range(6):
        k = np.sqrt(w)[:, None]
        fit = basis @ np.linalg.lstsq(basis * k, y * k[:, 0], rcond=None)[0]
        off = np.abs(y - fit)
        scale = max(1.5 * float(np.median(off[weight > 0])), 0.05)
        w = weight / (1 + (off / scale) ** 2) ** 2
    return np.asarray(fit)


def _smooth(t: Array, centre: Array, weight: Array) -> NDArray[np.bool_]:
    inked = weight > max(6.0, 0.25 * float(np.median(weight)))
    if inked.sum() < 6:
        return inked
    fit = _robust(2 * t - 1, centre, inked.astype(float), 3)
    off = np.abs(centre - fit)
    scale = max(4.5 * float(np.median(off[inked])), 0.25)
    return np.asarray(inked & (off < scale))


def straight(xy: Array) -> Array:
    """The line a·x + b·y = c nearest to points, (3,); a, b are its unit normal."""
    middle = xy.mean(0)
    normal = np.linalg.svd(xy - middle, full_matrices=False)[2][1]
    return np.asarray(np.r_[normal, normal @ middle])


def meeting(first: Array, second: Array) -> Array:
    """The point where two lines a·x + b·y = c meet, (2,)."""
    return np.asarray(np.linalg.solve(np.vstack([first[:2], second[:2]]), [first[2], second[2]]))


def warp_of(corners: Array) -> Warp:
    """The homography that makes a box with these corners straight at its own scale."""
    side = np.hypot(*(np.roll(corners, -1, 0) - corners).T)
    w, h = float(side[[0, 2]].mean()), float(side[[1, 3]].mean())
    target = np.array([[0, 0], [w, 0], [w, h], [0, h]], float)
    return Warp(homography(corners, target), (w, h))


def side_lines(
    ink: NDArray[np.uint8], corners: Array, seen: tuple[bool, bool, bool, bool], reach: float
) -> tuple[Array, list[Array]]:
    """Corners moved to where the drawn sides meet, and the four sides a·x + b·y = c.

    corners : (4, 2) page px, clockwise from the top left. seen : top, right, bottom, left; the
    course of a side that is not drawn stays as it was.
    """
    lines = []
    for i in range(4):
        a, b = corners[i], corners[(i + 1) % 4]
        chord = straight(np.vstack([a, b]))
        if seen[i]:
            inset = 0.01 * (b - a)
            xy = follow(ink, a + inset, b - inset, reach)[0]
            if len(xy) >= 12:
                chord = straight(xy)
        lines.append(chord)
    moved = np.array([meeting(lines[i - 1], lines[i]) for i in range(4)])
    return moved, lines
