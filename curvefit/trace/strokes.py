"""Curves of a vector page: the drawn strokes that are no frame, grid, tick, leader or letter."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import resample
from curvefit.notes import CurveNotes
from curvefit.records import BRIDGED, Panel, Stroke, Trace
from curvefit.trace.given import REACH, with_notes
from curvefit.trace.strokes_chains import Chain, Piece, joined
from curvefit.trace.strokes_outline import middle_line
from curvefit.trace.strokes_pointers import without_pointers
from curvefit.trace.strokes_smooth import smooth

__all__ = ["Settings", "has_curves", "trace_strokes"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Settings:
    """Tolerances; lengths in px at 300 to the inch, or as a share of the box's width.

    shortest : share, the shortest curve. leader : share of the diagonal up to which a straight
    line is a pointer. straight, exact : px off its chord, of few points or of many.
    hatch : so many parallel straight lines are a hatching.
    ruled : share of a closed outline along the edges that makes it a frame.
    pale : lightness from which a stroke is a halo. edge : px that a line on the frame may lie out.
    many_fills : with more filled shapes than this in the box, only long ones are looked at.
    """

    shortest: float = 0.05
    leader: float = 0.25
    straight: float = 0.3
    exact: float = 0.05
    hatch: int = 5
    ruled: float = 0.6
    pale: float = 0.93
    edge: float = 0.7
    many_fills: int = 150
    most_points: int = 1500


def has_curves(panel: Panel) -> bool:
    """Whether curves are drawn as strokes inside the plot box."""
    return bool(_curves(panel, Settings()))


def trace_strokes(
    panel: Panel, curve_notes: tuple[CurveNotes, ...] = (), settings: Settings | None = None
) -> tuple[Trace, ...]:
    """The curves of a plot box from the strokes of its page, from left to right.

    Notes
    -----
    A line that continues in another piece of the same look (subpaths, hand-made dashes, both
    sides of a label) is one curve. `Trace.sigma` holds the rounding of the file's coordinates
    and what may lie between a chord and the curve that it stands for.
    """
    s = settings or Settings()
    chains = sorted(_curves(panel, s), key=lambda c: (round(c.xy[:, 0].min() / 5), c.xy[0, 1]))
    traces = [_trace(panel, c, f"line {i}", s) for i, c in enumerate(chains, 1)]

    def follow(path: Array) -> Trace | None:
        return _along(panel, path, s)

    return with_notes(panel, traces, curve_notes, follow)


def _along(panel: Panel, path: Array, s: Settings) -> Trace | None:
    """The stretch of a drawn line, whatever else it may be, that runs along a path."""
    from scipy.spatial import cKDTree

    ends = resample(path, 4.0)
    best: tuple[float, Chain] | None = None
    for chain in joined(list(_pieces(panel, s)), _words(panel)):
        away = cKDTree(resample(chain.xy, 2.0)).query(ends)[0]
        if away.max() <= REACH and (best is None or away.mean() < best[0]):
            best = float(away.mean()), chain
    if best is None:
        return None
    trace = _trace(panel, best[1], "", s)
    index = [int(np.hypot(*(trace.flat - e).T).argmin()) for e in path[[0, -1]]]
    part = slice(min(index), max(index) + 1)
    if max(index) - min(index) < 2:
        return None
    return replace(
        trace, flat=trace.flat[part], sigma=trace.sigma[part], flags=trace.flags[part], closed=False
    )


def _curves(panel: Panel, s: Settings) -> list[Chain]:
    pieces = _without_hatching(list(_pieces(panel, s)), s)
    words = _words(panel)
    chains = [c for c in joined(pieces, words) if _is_curve(c, panel, s)]
    longest = s.leader * float(np.hypot(*panel.warp.size))
    return _without_doubles(without_pointers(chains, words, longest))


def _pieces(panel: Panel, s: Settings) -> Iterator[Piece]:
    """Strokes inside the box, cut at its sides, without what runs along it."""
    width, height = panel.warp.size
    near = _near(panel, s)
    fills = sum(stroke.fill for stroke in near)
    for stroke in near:
        xy, thick = panel.warp.to_panel(stroke.xy), stroke.width
        if stroke.fill:
            if fills > s.many_fills and np.ptp(xy, axis=0).max() < s.shortest * width:
                continue  # lettering drawn as shapes
            line = middle_line(xy)
            if line is None:
                continue
            xy, thick = line
        if _is_rule(xy, stroke, (width, height)):
            continue
        for part in _clipped(xy, (width, height), s.edge):
            yield Piece(part, thick, stroke.colour, stroke.dash)


def _near(panel: Panel, s: Settings) -> list[Stroke]:
    """Strokes that show and reach into the box."""
    low, high = panel.corners.min(0) - 2, panel.corners.max(0) + 2
    return [
        stroke
        for stroke in panel.page.strokes
        if min(stroke.colour) <= s.pale
        and not (stroke.xy.max(0) < low).any()
        and not (stroke.xy.min(0) > high).any()
    ]


def _is_rule(xy: Array, stroke: Stroke, size: tuple[float, float]) -> bool:
    """Whether a path is part of a frame, a grid or a scale: along the box and long, or a tick."""
    step = np.abs(np.diff(xy, axis=0))
    if (step.min(1) > 0.06).any():
        return False
    step = np.abs(np.diff(_corner_points(xy), axis=0))
    if (step.min(1) > 0.15).any():
        return False  # a steep or flat curve in many small steps
    extent = np.ptp(xy, axis=0)
    if len(xy) > 2 and (extent > 0.5).all():
        return True  # a rectangle, a comb of ticks
    k = int(extent[1] > extent[0])  # along x or along y
    if extent[k] > 0.5 * size[k] or stroke.dash:
        return True
    other = 1 - k
    on_side = min(abs(xy[0, other]), abs(xy[0, other] - size[other])) < 2.0
    return bool(on_side)  # a short one may be a dash where a curve begins; a tick stays alone


def _corner_points(xy: Array) -> Array:
    """The points of a polyline that it cannot do without by more than a tenth of a pixel."""
    import cv2

    if len(xy) < 3:
        return xy
    kept = cv2.approxPolyDP(xy.astype(np.float32).reshape(-1, 1, 2), 0.1, False)
    return np.asarray(kept[:, 0], float)


def _clipped(xy: Array, size: tuple[float, float], edge: float) -> Iterator[Array]:
    """The stretches of a polyline inside the box, ending on its sides."""
    low, high = np.array([-edge, -edge]), np.array(size) + edge
    if (xy >= low).all() and (xy <= high).all():
        yield xy
        return
    run: list[Array] = []
    for a, b in pairwise(xy):
        cut = _cut(a, b, low + edge, high - edge, edge)
        if cut is None:
            if len(run) > 1:
                yield np.array(run)
            run = []
            continue
        first, last = cut
        if not run or np.abs(run[-1] - first).max() > 1e-9:
            if len(run) > 1:
                yield np.array(run)
            run = [first]
        run.append(last)
    if len(run) > 1:
        yield np.array(run)


def _cut(a: Array, b: Array, low: Array, high: Array, edge: float) -> tuple[Array, Array] | None:
    """The part of a chord inside the box (Liang and Barsky); None where there is none."""
    d = b - a
    t0, t1 = 0.0, 1.0
    for k in (0, 1):
        slack = edge if abs(d[k]) < 0.05 else 0.0  # along the side: on it is inside
        for p, q in ((-d[k], a[k] - low[k] + slack), (d[k], high[k] + slack - a[k])):
            if abs(p) < 1e-12:
                if q < 0:
                    return None
            elif p < 0:
                t0 = max(t0, q / p)
            else:
                t1 = min(t1, q / p)
    if t0 >= t1:
        return None
    first = a if t0 == 0.0 else a + t0 * d
    last = b if t1 == 1.0 else a + t1 * d
    return first, last


def _without_hatching(pieces: list[Piece], s: Settings) -> list[Piece]:
    """Pieces without groups of parallel straight lines that fill an area."""
    slants: dict[tuple[object, ...], list[int]] = {}
    for i, p in enumerate(pieces):
        if len(p.xy) == 2:
            d = p.xy[1] - p.xy[0]
            if np.abs(d).min() > 0.06:
                angle = round(np.degrees(np.arctan2(d[1], d[0])) % 180 / 0.4)
                slants.setdefault((*p.style, angle), []).append(i)
    gone: set[int] = set()
    for group in slants.values():
        if len(group) >= s.hatch and not _in_line([pieces[i].xy for i in group]):
            gone.update(group)
    return [p for i, p in enumerate(pieces) if i not in gone]


def _in_line(chords: list[Array]) -> bool:
    """Whether parallel chords lie on one line (dashes of it) rather than side by side."""
    d = chords[0][1] - chords[0][0]
    normal = np.array([-d[1], d[0]]) / np.hypot(*d)
    off = np.array([c.mean(0) @ normal for c in chords])
    return bool(np.ptp(off) < 3.0 * len(chords))


def _words(panel: Panel) -> Array:
    """(n, 4) left, top, right, bottom of the words in the box [panel px]."""
    boxes = [panel.warp.to_panel(w.box) for w in panel.words]
    return np.array([[*b.min(0), *b.max(0)] for b in boxes]).reshape(-1, 4)


def _is_curve(chain: Chain, panel: Panel, s: Settings) -> bool:
    width, height = panel.warp.size
    xy = chain.xy
    extent = np.ptp(xy, axis=0)
    size = float(np.hypot(*extent))
    if size < s.shortest * width or _masked(xy, panel):
        return False
    step = np.diff(xy, axis=0)
    length = np.hypot(*step.T)
    along = np.abs(step).min(1) < 0.06
    if along.all() and extent.min() < 1.0:
        return False  # a rule, or the sample of a legend
    closed = bool(np.hypot(*(xy[0] - xy[-1])) < 1.0)
    if closed and length[along].sum() > s.ruled * length.sum():
        return False  # a frame with rounded corners
    if closed and (size < 3 * s.shortest * width or _corners(xy) > 2):
        return False  # a marker, a sign, the outline of an area
    diagonal = float(np.hypot(width, height))
    plain = chain.pieces <= 3 and not chain.first.dash
    ruled = _bow(xy) < (s.straight if len(xy) <= 4 else s.exact)
    if plain and ruled and size < s.leader * diagonal:
        return False  # a pointer to a label
    return not (length.sum() > 12 * size)  # scribble: a sign, a filled-in area


def _corners(xy: Array) -> int:
    """How often a line turns by more than 40 degrees at once."""
    d = np.diff(xy, axis=0)
    d = d[np.hypot(*d.T) > 1e-3]
    angle = np.arctan2(d[:, 1], d[:, 0])
    turn = np.abs((np.diff(angle) + np.pi) % (2 * np.pi) - np.pi)
    return int((turn > np.radians(40)).sum())


def _bow(xy: Array) -> float:
    """Largest distance from the chord between the ends [px]."""
    d = xy[-1] - xy[0]
    size = max(float(np.hypot(*d)), 1e-9)
    off = xy - xy[0]
    return float(np.abs(off[:, 0] * d[1] - off[:, 1] * d[0]).max() / size)


def _masked(xy: Array, panel: Panel) -> bool:
    """Whether most of a line lies in an area that holds no curves."""
    if not panel.masks:
        return False
    import cv2

    page = panel.warp.to_page(xy).astype(np.float32)
    for mask in panel.masks:
        outline = np.asarray(mask, np.float32).reshape(-1, 1, 2)
        inside = [cv2.pointPolygonTest(outline, (float(x), float(y)), False) >= 0 for x, y in page]
        if np.mean(inside) > 0.5:
            return True
    return False


def _without_doubles(chains: list[Chain]) -> list[Chain]:
    """Chains without lines drawn a second time, broader, under another."""
    from scipy.spatial import cKDTree

    kept: list[Chain] = []
    for chain in sorted(chains, key=lambda c: c.first.width):
        for other in kept:
            if np.abs(chain.xy.min(0) - other.xy.min(0)).max() > 2:
                continue
            if np.abs(chain.xy.max(0) - other.xy.max(0)).max() > 2:
                continue
            away = cKDTree(smooth(other.xy, other.bridged)[0]).query(chain.xy)[0]
            if away.max() < 1.5:
                break
        else:
            kept.append(chain)
    return kept


def _trace(panel: Panel, chain: Chain, name: str, s: Settings) -> Trace:
    xy, sigma, gap, spacing = smooth(chain.xy, chain.bridged)
    closed = bool(np.hypot(*(xy[0] - xy[-1])) < 1.0 and len(xy) > 8)
    path = closed or not _single_valued(xy)
    if xy[0, 0] > xy[-1, 0]:
        xy, sigma, gap = xy[::-1], sigma[::-1], gap[::-1]
    if not path:
        rise = np.r_[True, xy[1:, 0] > np.maximum.accumulate(xy[:, 0])[:-1] + 1e-6]
        rise[-1] = True
        if xy[-1, 0] <= xy[np.nonzero(rise)[0][-2], 0]:
            rise[np.nonzero(rise)[0][-2]] = False
        xy, sigma, gap = xy[rise], sigma[rise], gap[rise]
    if len(xy) > s.most_points:
        keep = np.unique(np.linspace(0, len(xy) - 1, s.most_points).round().astype(int))
        xy, sigma, gap = xy[keep], sigma[keep], gap[keep]
    return Trace(
        name,
        panel,
        xy,
        sigma,
        np.where(gap, BRIDGED, 0).astype(np.uint8),
        correlation=max(spacing, 4.0),
        width=chain.first.width,
        colour=chain.first.colour,
        dash=_dash(chain),
        path=path,
        closed=closed,
    )


def _single_valued(xy: Array) -> bool:
    """Whether the line runs from left to right throughout, and is not a steep one."""
    dx = np.diff(xy[:, 0])
    back = min(np.clip(-dx, 0, None).sum(), np.clip(dx, 0, None).sum())
    extent = np.ptp(xy, axis=0)
    return bool(back < 0.3 and extent[0] > 0.3 * extent[1])


def _dash(chain: Chain) -> str:
    """The look of the line, from its dash pattern or from the pieces that it is made of."""
    pattern = chain.first.dash
    if pattern:
        on = np.array(pattern[::2])
    elif len(chain.gaps) >= 4:
        places = np.array([p for _, p in chain.gaps])
        gaps = np.array([g for g, _ in chain.gaps])
        on = np.sort(np.diff(places) - gaps[1:])
        on = on[len(on) // 10 : len(on) - len(on) // 10]
    else:
        return "solid"
    width = max(chain.first.width, 1.0)
    if on.max() > 2.5 * max(on.min(), 0.5 * width) and on.max() > 3 * width:
        return "dash-dotted"
    return "dotted" if on.max() < 2.0 * width else "dashed"
