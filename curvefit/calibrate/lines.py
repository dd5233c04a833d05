"""Long straight lines along the two directions of a straightened page."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Line", "long_lines"]


@dataclass(frozen=True, slots=True)
class Line:
    """A line of ink along x (or along y): `at` across, from `lo` to `hi` along [px].

    weight : how dark it is, 0–255.
    """

    at: float
    lo: float
    hi: float
    weight: float

    @property
    def length(self) -> float:
        return self.hi - self.lo


def long_lines(ink: NDArray[np.uint8], along_x: bool, shortest: int) -> list[Line]:
    """The lines of ink along x (or y) longer than `shortest` [px], collinear pieces joined.

    Parameters
    ----------
    ink : array of shape (height, width), uint8
        Ink of the straightened page.
    """
    import cv2

    image = ink if along_x else np.ascontiguousarray(ink.T)
    gap = max(5, shortest // 12)
    # across a line the ink falls off on both sides: what is wide across is no line
    wide = cv2.morphologyEx(image, cv2.MORPH_OPEN, np.ones((max(9, shortest // 7), 1), np.uint8))
    thin = cv2.subtract(image, wide)
    dark = thin > _threshold(thin)
    if dark.mean() > 0.5:  # speckle, no drawing
        return []
    band = cv2.dilate(dark.astype(np.uint8), np.ones((3, 1), np.uint8))
    band = cv2.morphologyEx(band, cv2.MORPH_CLOSE, np.ones((1, gap), np.uint8))
    band = cv2.morphologyEx(band, cv2.MORPH_OPEN, np.ones((1, shortest), np.uint8))
    count, label, box, centre = cv2.connectedComponentsWithStats(band, connectivity=8)
    pieces = []
    for i in range(1, count):
        x, y, w, h = (int(v) for v in box[i, :4])
        if h > max(12, 0.03 * w):  # several lines run together, or a slanted one
            pieces += _rows(label[y : y + h, x : x + w] == i, thin[y : y + h, x : x + w], x, y)
            continue
        inked = dark[y : y + h, x : x + w].any(0)
        first, last = _trimmed(inked)
        strength = float(thin[y : y + h, x : x + w].max(0).mean())
        pieces.append(Line(float(centre[i, 1]), float(x + first), float(x + last), strength))
    return _joined(pieces, 3 * gap)


def _trimmed(inked: NDArray[np.bool_]) -> tuple[int, int]:
    """First and last place of a line without the crumbs (of a number, say) beyond its ends.

    A crumb is short, and stands off by more than the line's own gaps.
    """
    edge = np.flatnonzero(np.diff(np.r_[0, inked.astype(np.int8), 0]))
    start, stop = edge[::2], edge[1::2]
    gap = start[1:] - stop[:-1]
    usual = max(2.5, 2.0 * float(np.median(gap))) if len(gap) > 8 else 2.5
    lo, hi = 0, len(start) - 1
    while lo < hi and stop[lo] - start[lo] < 24 and gap[lo] > usual:
        lo += 1
    while hi > lo and stop[hi] - start[hi] < 24 and gap[hi - 1] > usual:
        hi -= 1
    return int(start[lo]), int(stop[hi] - 1)


def _threshold(thin: NDArray[np.uint8]) -> float:
    some = thin[thin > 10]
    return float(max(14.0, 0.2 * np.percentile(some, 90))) if some.size else 255.0


def _rows(mask: NDArray[np.bool_], thin: NDArray[np.uint8], x: int, y: int) -> list[Line]:
    """A component with several lines in it, taken apart at the peaks of its row sums."""
    from scipy.signal import find_peaks

    weight = (thin * mask).sum(1).astype(float)
    peaks = find_peaks(np.r_[0, weight, 0], height=0.3 * weight.max(), distance=4)[0] - 1
    lines = []
    for p in peaks:
        near = mask[max(p - 1, 0) : p + 2].any(0)
        on = np.flatnonzero(near)
        if len(on) > 0.5 * mask.shape[1]:
            strength = float(thin[max(p - 1, 0) : p + 2].max(0)[on].mean())
            lines.append(Line(float(y + p), float(x + on[0]), float(x + on[-1]), strength))
    return lines


def _joined(pieces: list[Line], gap: float) -> list[Line]:
    """Pieces of one line made one: alike across to 3 px and a short gap along."""
    lines: list[Line] = []
    for piece in sorted(pieces, key=lambda p: p.lo):
        for i, line in enumerate(lines):
            if abs(line.at - piece.at) <= 3 and piece.lo - line.hi <= gap:
                a, b = line.length + 1, piece.length + 1
                lines[i] = Line(
                    (line.at * a + piece.at * b) / (a + b),
                    line.lo,
                    max(line.hi, piece.hi),
                    (line.weight * a + piece.weight * b) / (a + b),
                )
                break
        else:
            lines.append(piece)
    return sorted(lines, key=lambda p: p.at)
