"""Candidate ticks along the sides of a straightened plot box."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.evidence import TickRow
from curvefit.geometry import Warp

__all__ = ["FARTHEST", "Flat", "Side", "flatten", "tick_bars", "tick_rows"]

Array = NDArray[np.float64]
Image = NDArray[np.uint8]
Side = Literal["bottom", "top", "left", "right"]

SIDES: tuple[Side, ...] = ("bottom", "top", "left", "right")

_SNAP = 0.35  # [px]: programs that draw on whole pixels put a line up to half a pixel off
_OPEN = 1.0  # [px]: the end of a line is less certain than where two cross
_FAINT = 40  # ink above this counts no more in a grid profile: a pale grid weighs as a dark curve
FARTHEST = 0.34  # a scale of its own line stands no further outside than this share of the box


@dataclass(frozen=True, slots=True, eq=False)
class Flat:
    """The ink of a plot box made straight, with `margin` px of its surroundings on each side."""

    ink: Image
    margin: int
    size: tuple[float, float]

    def facing(self, side: Side) -> NDArray[np.float32]:
        """The ink seen from one side: row 0 farthest outside, columns along the side.

        Columns run left to right or bottom to top, `margin` columns before its start.
        """
        image = self.ink.astype(np.float32)
        if side == "bottom":
            return image[::-1]
        if side == "top":
            return image
        if side == "left":
            return image.T[:, ::-1]
        return image.T[::-1, ::-1]

    def span(self, side: Side) -> tuple[float, float]:
        """(length along the side, depth of the box behind it) [px]."""
        w, h = self.size
        return (w, h) if side in ("bottom", "top") else (h, w)


def flatten(ink: Image, warp: Warp, margin: int) -> Flat:
    """The surroundings of a plot box, straightened by its warp at scale 1."""
    import cv2

    w, h = warp.size
    size = (round(w) + 2 * margin + 1, round(h) + 2 * margin + 1)
    if warp.bend is None:
        shift = np.array([[1.0, 0, margin], [0, 1.0, margin], [0, 0, 1.0]])
        return Flat(cv2.warpPerspective(ink, shift @ warp.matrix, size), margin, warp.size)
    step = 8  # the bow is smooth: the map is worked out on a coarse mesh
    gx, gy = np.arange(0, size[0] + step, step), np.arange(0, size[1] + step, step)
    mesh = np.stack(np.meshgrid(gx, gy), -1).reshape(-1, 2) - margin
    page = warp.to_page(mesh).reshape(len(gy), len(gx), 2).astype(np.float32)
    full = [_enlarged(page[..., k], step)[: size[1], : size[0]] for k in (0, 1)]
    return Flat(cv2.remap(ink, full[0], full[1], cv2.INTER_LINEAR), margin, warp.size)


def _enlarged(values: NDArray[np.float32], step: int) -> NDArray[np.float32]:
    """A mesh of values every `step` px, bilinear between its nodes."""
    rows, cols = values.shape
    x = np.arange((cols - 1) * step + 1) / step
    i = np.minimum(x.astype(int), cols - 2)
    wide = values[:, i] + (values[:, i + 1] - values[:, i]) * (x - i).astype(np.float32)
    y = np.arange((rows - 1) * step + 1) / step
    j = np.minimum(y.astype(int), rows - 2)
    return np.asarray(wide[j] + (wide[j + 1] - wide[j]) * (y - j)[:, None], np.float32)


def tick_rows(
    flat: Flat, seen: tuple[bool, bool, bool, bool], spines: dict[Side, list[float]]
) -> tuple[TickRow, ...]:
    """The candidate ticks of each side, by kind.

    Parameters
    ----------
    seen : whether top, right, bottom, left are drawn.
    spines : per side, how far outside further scale lines stand [px].

    Notes
    -----
    Each kind is a profile along the side: ink of short strips just outside or inside it, or of
    the whole depth of the box (a line across counts by the share of the depth that it covers, so
    that curves hardly show). Peaks are placed by the centroid of their ink. The standard
    uncertainty holds a floor of 0.35 px for drawing that snaps to whole pixels.
    """
    drawn = dict(zip(("top", "right", "bottom", "left"), seen, strict=True))
    rows: list[TickRow] = []
    for side in SIDES:
        length, depth = flat.span(side)
        view = flat.facing(side)
        m = flat.margin
        half = _half_width(view, m) if drawn[side] else 0
        reach = max(3, round(0.0025 * max(length, depth)))
        inner = view[m + half + 2 : m + half + 2 + reach]
        outer = view[max(m - half - 1 - reach, 0) : m - half - 1]
        floor = max(14.0, 0.15 * float(np.median(view[m])))
        rows += _row(side, "inside", inner.mean(0), m, length, floor)
        rows += _row(side, "outside", outer.mean(0), m, length, floor)
        if side in ("bottom", "left"):
            box = view[m + round(0.02 * depth) : m + round(0.98 * depth)]
            for other in (side, "top" if side == "bottom" else "right"):
                rows += _grid(other, box, m, length)
        beside = ("left", "right") if side in ("bottom", "top") else ("bottom", "top")
        ends = [(_SNAP if drawn[s] else _OPEN) / length for s in beside]
        rows.append(_tick_row(side, "end", [0.0, 1.0], ends, [1.0, 1.0]))
        for offset in spines.get(side, []):
            at = _line_near(view, m - round(offset))
            if at - reach - 8 < 0:
                continue
            thick = _half_width(view, at)
            for kind, strip in (
                ("outside", view[at - thick - 1 - reach : at - thick - 1]),
                ("inside", view[at + thick + 2 : at + thick + 2 + reach]),
            ):
                rows += _row(side, kind, strip.mean(0), m, length, 14.0, float(m - at))
    return tuple(rows)


def _line_near(view: NDArray[np.float32], row: int) -> int:
    """The darkest row within 4 px of one."""
    lo = max(row - 4, 0)
    return lo + int(np.argmax(np.median(view[lo : row + 5], axis=1))) if row > 0 else row


def tick_bars(flat: Flat, rows: tuple[TickRow, ...]) -> list[Array]:
    """Outlines (4, 2), straightened px, of the ticks that stand outside the box.

    No tick is taken for longer than most are, so that a number that touches its tick is spared.
    """
    bars = []
    for row in rows:
        if row.kind != "outside" or row.offset:
            continue
        length, depth = flat.span(row.side)
        view, m = flat.facing(row.side), flat.margin
        first = m - _half_width(view, m) - 1
        far = min(first, round(0.03 * max(length, depth)))
        columns = [round(t * length) + m for t in row.at]
        ink = np.array([view[first - far : first + 1, c - 1 : c + 2].max(1)[::-1] for c in columns])
        usual = _tick_end(np.median(ink, axis=0))
        for t, run in zip(row.at, ink, strict=True):
            own = _tick_end(run)
            reach = (own if usual < own <= 2.2 * usual else usual) + m - first
            bars.append(_bar(row.side, t, flat.size, reach - 0.5))
    return bars


def _tick_end(ink: NDArray[np.float32]) -> int:
    """Pixels from its foot to where a tick's ink fades, or dips before a number close by."""
    level = max(float(ink[:3].max()), 30.0)
    faded = np.flatnonzero(ink < 0.5 * level)
    dips = np.flatnonzero(
        (ink[1:-1] < 0.85 * level) & (ink[1:-1] < ink[2:]) & (ink[1:-1] <= ink[:-2])
    )
    return int(min([*faded[:1], *(dips[:1] + 1), len(ink)]))


def _bar(side: Side, t: float, size: tuple[float, float], reach: float) -> Array:
    """A tick of length `reach` and 6 px wide, outwards from fraction t of a side."""
    w, h = size
    foot = {
        "bottom": (t * w, h),
        "top": (t * w, 0),
        "left": (0, h - t * h),
        "right": (w, h - t * h),
    }
    way = {"bottom": (0, 1), "top": (0, -1), "left": (-1, 0), "right": (1, 0)}
    start, out = np.array(foot[side], float), np.array(way[side], float)
    across = 3.0 * out[::-1]
    tip = start + reach * out
    return np.array([start - across, tip - across, tip + across, start + across])


def _half_width(view: NDArray[np.float32], at: int) -> int:
    """Half the thickness of the line of ink at row `at` [px], rounded up."""
    lo = max(at - 8, 0)
    profile = np.median(view[lo : at + 9], axis=1)
    if profile.size == 0 or profile.max() < 10:
        return 1
    wide = np.flatnonzero(profile > 0.3 * profile.max()) + lo - at
    wide = wide[np.abs(wide) <= 6]
    return int(np.abs(wide).max()) if wide.size else 1


def _row(
    side: Side,
    kind: str,
    profile: NDArray[np.float32],
    margin: int,
    length: float,
    floor: float,
    offset: float = 0.0,
) -> list[TickRow]:
    """The peaks of a strip's profile as a row of ticks; none if there are fewer than two."""
    at, weight, width = _peaks(profile.astype(float), floor, 0.2)
    return _kept(side, kind, at - margin, weight, width, length, offset)


def _grid(side: Side, box: NDArray[np.float32], margin: int, length: float) -> list[TickRow]:
    share = np.minimum(box, _FAINT).mean(0) / _FAINT
    # dark curves and words cover little of the depth, the neighbouring columns tell how much
    at, weight, width = _peaks(share.astype(float), 0.07, 0.12)
    return _kept(side, "grid", at - margin, weight, width, length, 0.0)


def _kept(
    side: Side, kind: str, at: Array, weight: Array, width: Array, length: float, offset: float
) -> list[TickRow]:
    if side in ("left", "right"):  # seen from below: the image ends at a whole pixel, the box not
        at = at - (round(length) - length)
    inside = (at > -3) & (at < length + 3)
    at, weight, width = at[inside], weight[inside], width[inside]
    if len(at) < 2:
        return []
    u = np.hypot(_SNAP, 0.08 * width) / length
    return [_tick_row(side, kind, at / length, u, weight, offset)]


def _tick_row(
    side: Side, kind: str, at: object, u: object, weight: object, offset: float = 0.0
) -> TickRow:
    return TickRow(
        side,
        kind,  # type: ignore[arg-type]
        np.asarray(at, float),
        np.asarray(u, float),
        np.asarray(weight, float),
        offset,
    )


def _peaks(profile: Array, floor: float, share: float) -> tuple[Array, Array, Array]:
    """Places (sub-pixel), strengths 0–1 and widths [px] of the narrow peaks of a profile."""
    from scipy.ndimage import median_filter
    from scipy.signal import find_peaks, peak_widths

    smooth = np.convolve(profile, [0.25, 0.5, 0.25], "same")
    base = median_filter(smooth, 31, mode="nearest")
    rise = np.clip(smooth - base, 0, None)
    top = np.percentile(rise[rise > floor], 90) if (rise > floor).any() else 0.0
    level = max(floor, share * top, 6 * float(np.median(np.abs(smooth - base))))
    found, _ = find_peaks(rise, height=level, prominence=0.6 * level)
    if not len(found):
        return np.zeros(0), np.zeros(0), np.zeros(0)
    width = peak_widths(rise, found, rel_height=0.5)[0]
    thin = width < 3 * max(float(np.median(width)), 2.0)
    found, width = found[thin], width[thin]
    places = np.array(
        [_centroid(rise, int(f), float(w)) for f, w in zip(found, width, strict=True)]
    )
    return places, np.clip(rise[found] / max(top, level), 0, 1), width


def _centroid(rise: Array, peak: int, width: float) -> float:
    r = max(2, round(0.9 * width))
    lo, hi = max(peak - r, 0), min(peak + r + 1, len(rise))
    w = np.clip(rise[lo:hi] - 0.15 * rise[peak], 0, None)
    return float((w * np.arange(lo, hi)).sum() / w.sum())
