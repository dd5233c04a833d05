"""The centre of a stroke to a fraction of a pixel, measured on its normals."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import arc_length, resample
from curvefit.trace.spline import smooth

__all__ = ["Line", "Profile", "centred", "normals", "profile", "trimmed", "width_along"]

Array = NDArray[np.float64]
Image = NDArray[np.float32]


@dataclass(frozen=True, slots=True, eq=False)
class Profile:
    """What lies across a line at each of its points.

    offset : centroid of the stroke's ink from the line [px]; mass : ink across it [px];
    side : mean ink just beside it (0–1); known : share of the cut that is not hidden.
    """

    offset: Array
    mass: Array
    side: Array
    known: Array


@dataclass(frozen=True, slots=True, eq=False)
class Line:
    """A line at sub-pixel precision, a point a pixel, in array px.

    sigma : of the fit alone; good : clean ink was seen there; ink : 0–1 coverage along it.
    """

    xy: Array
    sigma: Array
    good: NDArray[np.bool_]
    ink: Array
    known: Array
    side: Array
    width: float
    scatter: float


def normals(xy: Array) -> Array:
    """Unit normals of a dense polyline, (n, 2)."""
    tangent = np.gradient(xy, axis=0)
    if len(xy) > 9:
        kernel = np.ones(7) / 7
        padded = np.pad(tangent, ((3, 3), (0, 0)), mode="edge")
        tangent = np.stack([np.convolve(padded[:, i], kernel, "valid") for i in range(2)], 1)
    length = np.maximum(np.hypot(*tangent.T), 1e-9)
    return np.asarray(np.stack([-tangent[:, 1], tangent[:, 0]], 1) / length[:, None])


def cut(image: Image, xy: Array, normal: Array, offsets: Array) -> Image:
    """Image values on the normals, (n, len(offsets))."""
    import cv2

    x = (xy[:, :1] + normal[:, :1] * offsets).astype(np.float32)
    y = (xy[:, 1:] + normal[:, 1:] * offsets).astype(np.float32)
    return np.asarray(cv2.remap(image, x, y, cv2.INTER_LINEAR, borderMode=cv2.BORDER_CONSTANT))


def width_along(ink: Image, known: Image, xy: Array, at_most: float) -> float:
    """Width of a roughly known line [px]: the run of ink across it, where nothing hides a part."""
    from scipy.ndimage import maximum_filter1d

    offsets = np.arange(-at_most, at_most + 0.01, 0.5)
    normal = normals(xy)
    strip = cut(ink, xy, normal, offsets)
    run = _run(strip, offsets, np.zeros(len(xy)), at_most)
    mass = (strip * run).sum(1) * 0.5
    seen = (mass > 0.5) & ~run[:, 0] & ~run[:, -1]
    hidden = cut(known, xy, normal, offsets) < 0.5
    whole = seen & ~(hidden & maximum_filter1d(run, 5, axis=1)).any(1)
    seen = whole if whole.sum() > 20 else seen
    peak = strip.max(1)
    seen &= peak > 0.85 * np.quantile(peak[seen], 0.6) if seen.any() else False
    if seen.sum() <= 4:
        return float("nan")
    # stretches that run together with a neighbour are wider, hardly any are narrower
    thin, usual = np.quantile(mass[seen], [0.12, 0.35])
    return float(usual if usual < 1.45 * thin + 0.3 else 1.05 * thin)


def _run(strip: Image, offsets: Array, near: Array, reach: float) -> NDArray[np.bool_]:
    """The contiguous run of ink around the strongest place near `near` in each cut."""
    close = np.abs(offsets - near[:, None]) <= max(0.35 * reach, 1.0)
    start = np.where(close, strip, -1.0).argmax(1)
    rows = np.arange(len(strip))
    peak = strip[rows, start]
    above = strip > np.maximum(0.12, 0.2 * peak)[:, None]
    index = np.arange(strip.shape[1])
    gap_left = np.where(~above & (index <= start[:, None]), index, -1).max(1)
    gap_right = np.where(~above & (index >= start[:, None]), index, strip.shape[1]).min(1)
    return np.asarray((index > gap_left[:, None]) & (index < gap_right[:, None]))


def profile(
    ink: Image, known: Image, xy: Array, normal: Array, width: float, slack: float
) -> Profile:
    """Stroke centroid, ink, side ink and visibility across each point of a line.

    slack : how far from the line the stroke may lie [px].
    """
    reach = width / 2 + slack + 3.0
    offsets = np.arange(-np.ceil(reach * 2) / 2, reach + 0.26, 0.5)
    strip = cut(ink, xy, normal, offsets)
    seen = cut(known, xy, normal, offsets)
    window = np.exp(-((np.abs(offsets) / (slack + 0.75)) ** 4))
    smoothed = _box(strip, width)
    start = offsets[(smoothed * window).argmax(1)]
    for _ in range(2):  # centroid in a window centred on itself
        away = offsets - start[:, None]
        inside = np.clip(width / 2 + 1.6 - np.abs(away), 0, 1) * strip
        mass = inside.sum(1)
        start = np.where(mass > 0.2, (inside * offsets).sum(1) / np.maximum(mass, 1e-6), start)
    away = np.abs(offsets - start[:, None])
    beyond = (away > width / 2 + 1.2) & (away <= width / 2 + 3.0)
    side = np.where(beyond, strip, 0).max(1)
    near = away <= width / 2 + 1.0
    visible = np.where(near, seen, 1.0).min(1)
    return Profile(start, mass * 0.5, side.astype(float), visible.astype(float))


def _box(strip: Image, width: float) -> Image:
    from scipy.ndimage import uniform_filter1d

    return np.asarray(uniform_filter1d(strip, max(round(width * 2), 1), axis=1, mode="constant"))


def centred(ink: Image, known: Image, rough: Array, width: float, slack: float = 2.5) -> Line:
    """The line through the middle of the stroke that runs along a rough polyline.

    Parameters
    ----------
    rough : (n, 2) array px; its ends are kept.
    width : of the stroke [px].
    slack : how far the rough line may be off [px].

    Notes
    -----
    Three rounds: centroids on the normals where the cut shows one clean stroke (right width,
    nothing beside it, nothing hidden), a robust smoothing spline through them, new normals.
    """
    xy = _steady(resample(rough, 1.0), width)
    for turn, reach in enumerate((slack, 0.6 * slack, 0.35 * slack + 0.3)):
        normal = normals(xy)
        seen = profile(ink, known, xy, normal, width, reach)
        weight = _cleanness(seen, width, strict=turn > 0)
        s = arc_length(xy)
        fit = smooth(s, seen.offset, weight, spacing=max(14.0, 3.0 * width), apart=3.0)
        value = _held(fit.value, weight, reach)
        xy = xy + normal * value[:, None]
        if turn < 2:
            xy = resample(xy, 1.0)
    good = (weight > 0.3) & (np.abs(seen.offset - fit.value) < max(4 * fit.scatter, 0.8))
    ink_along = np.clip(seen.mass / width, 0, 1.5)
    return Line(xy, fit.sigma, good, ink_along, seen.known, seen.side, width, fit.scatter)


def _steady(xy: Array, width: float) -> Array:
    """A rough polyline with its corners rounded."""
    from scipy.ndimage import gaussian_filter1d

    sigma = min(4.0 + width, len(xy) / 8)
    if sigma < 1:
        return xy
    smoothed = gaussian_filter1d(xy, sigma, axis=0, mode="nearest")
    # odd reflection keeps the ends where they are
    padded = np.concatenate([2 * xy[:1] - xy[1:40][::-1], xy, 2 * xy[-1:] - xy[-40:-1][::-1]])
    before = len(xy[1:40])
    smoothed = gaussian_filter1d(padded, sigma, axis=0)[before : before + len(xy)]
    return np.asarray(smoothed)


def _cleanness(seen: Profile, width: float, strict: bool) -> Array:
    low, high = (0.72, 1.3) if strict else (0.5, 1.6)
    fits = (seen.mass > low * width) & (seen.mass < high * width + 0.3)
    clear = seen.side < (0.25 if strict else 0.5)
    weight = (fits & clear & (seen.known > 0.6)).astype(float)
    if weight.sum() < 0.15 * len(weight):  # nothing is clean here: take what there is
        weight = np.maximum(weight, 0.2 * fits)
    return weight


def _held(value: Array, weight: Array, reach: float) -> Array:
    return np.asarray(np.clip(value, -2.0 * reach, 2.0 * reach))


def trimmed(line: Line, first: int, last: int) -> Line:
    """The line between two of its points, both kept."""
    part = slice(first, last + 1)
    return Line(
        line.xy[part],
        line.sigma[part],
        line.good[part],
        line.ink[part],
        line.known[part],
        line.side[part],
        line.width,
        line.scatter,
    )
