"""Lines that run together: who goes on as whom, and where each one is inside the common ink."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from curvefit.trace.centre import Line
from curvefit.trace.column import Run, columns_of, run_around, slope_of
from curvefit.trace.dashes import dash_of
from curvefit.trace.ink import Layer
from curvefit.trace.pairing import Arm, Zone, bent, paired, with_far_side

__all__ = ["Member", "untangled"]

Array = NDArray[np.float64]
Bool = NDArray[np.bool_]


@dataclass(frozen=True, slots=True, eq=False)
class Member:
    """One line of a bundle; merged : (n,) where it shares its ink; inner : (n,) where it shows no
    edge of its own; spread : (n,) [px], how far apart the bundle is there; margin : of the pairing
    against the next best, 1 is certain."""

    line: Line
    merged: Bool
    inner: Bool
    spread: Array
    margin: float


@dataclass(frozen=True, slots=True, eq=False)
class _Strand:
    """A tracked line by columns, with the run of ink around it; blank: between two dashes."""

    x: Array
    y: Array
    slope: Array
    run: Run
    clean: Bool
    blank: Bool


def untangled(lines: list[Line], layer: Layer, least: float) -> tuple[list[Line], list[Member]]:
    """Lines that stand alone as they are, and the members of bundles told apart.

    Parameters
    ----------
    lines : single-valued lines of one ink.
    least : contact of two lines that makes a bundle [px].

    Notes
    -----
    Stretches of clean single strokes (arms) are kept. Between them, in common ink, arms of the
    left and of the right are paired so that quartics through both fit the arms and the edges
    of the common ink best. Inside, the upper edge belongs to the upper line and the lower edge
    to the lower one; what lies between is left to smoothness.
    """
    alone: list[Line] = []
    members: list[Member] = []
    for group in _groups(lines, least):
        if len(group) == 1:
            alone.append(lines[group[0]])
            continue
        told = _told_apart([lines[i] for i in group], layer)
        if told:
            members += [_inked(member, [lines[i] for i in group]) for member in told]
        else:
            alone += [lines[i] for i in group]
    return alone, members


def _inked(member: Member, lines: list[Line]) -> Member:
    """The member with the ink that was seen along the line nearest to it: its dashes."""
    at, height = member.line.xy.T

    def away(line: Line) -> float:
        x, y = columns_of(line)
        apart = np.abs(np.interp(at, x, y, left=np.nan, right=np.nan) - height)
        return float(np.nanmedian(apart)) if np.isfinite(apart).any() else np.inf

    source = min(lines, key=away)
    order = np.argsort(source.xy[:, 0], kind="stable")
    columns = source.xy[order, 0]
    seen = {k: np.interp(at, columns, getattr(source, k)[order]) for k in ("ink", "known", "side")}
    return replace(member, line=replace(member.line, **seen))


def _groups(lines: list[Line], least: float) -> list[list[int]]:
    """Indices of lines that touch for a while, or of which one ends on the other."""
    group = list(range(len(lines)))
    shapes = [columns_of(line) for line in lines]
    slopes = [slope_of(x, y) for x, y in shapes]
    for i in range(len(lines)):
        for j in range(i):
            if _touch(shapes[i], slopes[i], shapes[j], slopes[j], lines[i].width, least):
                old, new = group[i], group[j]
                group = [new if g == old else g for g in group]
    return [[i for i, g in enumerate(group) if g == k] for k in sorted(set(group))]


def _touch(
    a: tuple[Array, Array], sa: Array, b: tuple[Array, Array], sb: Array, width: float, least: float
) -> bool:
    low, high = max(a[0][0], b[0][0]), min(a[0][-1], b[0][-1])
    if high - low >= least:
        x = np.arange(low, high + 1)
        apart = np.abs(np.interp(x, *a) - np.interp(x, *b))
        steep = np.sqrt(1 + np.interp(x, a[0], sa) ** 2)
        if (apart < 1.5 * width * steep).sum() > least:
            return True
    for (x, y), s, (ox, oy), os in ((a, sa, b, sb), (b, sb, a, sa)):
        for end in (0, -1):
            inside = ox[0] - 12 <= x[end] <= ox[-1] + 12
            inner = min(12, len(x) - 1) * (1 if end == 0 else -1) + end
            turn = abs(s[inner] - float(np.interp(x[end], ox, os)))
            near = abs(y[end] - float(np.interp(x[end], ox, oy)))
            if inside and near < 2.5 * width * np.hypot(1, s[inner]) and turn < 0.25:
                return True
    return False


def _told_apart(lines: list[Line], layer: Layer) -> list[Member]:
    width = float(np.median([line.width for line in lines]))
    strands, edge_width = _strands(lines, layer, width)
    for _ in range(3):  # a clean bit inside common ink would split it: it joins the common ink
        arms, zones = _arms_and_zones(strands, layer.lines.shape, width)
        inner = [arms[i] for z in zones for i in set(z.left) & set(z.right)]
        ported = {i for z in zones for i in z.left} & {i for z in zones for i in z.right}
        inner += [arms[i] for i in ported if len(arms[i].x) < max(25, 4 * width)]
        if not inner:
            break
        for strand in strands:
            for arm in inner:
                strand.clean[np.isin(strand.x, arm.x) & (_away(strand, arm) < width)] = False
    if not arms or not zones:
        return []
    measured = len(arms)
    follows: dict[int, list[int]] = {i: [] for i in range(len(arms))}
    margin = dict.fromkeys(range(len(arms)), 1.0)
    for k, zone in enumerate(zones):
        if not zone.left and len(zone.right) > 1:
            zone = zones[k] = with_far_side(zone, arms, edge_width, len(zone.right))
            follows |= {i: [] for i in zone.left}
            margin |= dict.fromkeys(zone.left, 1.0)
        pairs, sure = paired(zone, arms, edge_width)
        for a, b in pairs:
            if bent(arms[a], arms[b]) > 0.35:
                a = min(range(len(arms)), key=lambda i: bent(arms[i], arms[b]))
            if bent(arms[a], arms[b]) < 2.0:
                follows[b].append(a)
                margin[b] = min(margin[b], sure)
    made = {i for i in follows if i >= measured}
    last = [
        i for i in follows if i < measured and not any(i in before for before in follows.values())
    ]
    out = []
    for end in last:
        chain, sure = [end], margin[end]
        while follows[chain[0]] and follows[chain[0]][0] not in chain:
            before = follows[chain[0]][0]
            sure = min(sure, margin[before])
            chain.insert(0, before)
        out.append((chain, sure))
    return _placed(out, arms, zones, made, edge_width, width)


def _strands(lines: list[Line], layer: Layer, width: float) -> tuple[list[_Strand], float]:
    """Every line by columns, and the width of a stroke as its edges show it."""
    from scipy.ndimage import median_filter

    shapes = [columns_of(line) for line in lines]
    slopes = [slope_of(x, y) for x, y in shapes]
    runs = [run_around(layer, x, y, 4 * width + 6) for x, y in shapes]
    across = [run.height / np.sqrt(1 + s * s) for run, s in zip(runs, slopes, strict=True)]
    every = np.concatenate(across)
    every = every[np.isfinite(every)]
    edge_width = float(np.quantile(every, 0.15)) if len(every) > 20 else width
    found = []
    for k, (x, y) in enumerate(shapes):
        steep = np.sqrt(1 + slopes[k] ** 2)
        usual = median_filter(np.nan_to_num(across[k], nan=99.0), 9, mode="nearest")
        single = np.isfinite(across[k]) & (np.abs(usual - edge_width) < 0.15 * edge_width + 0.4)
        single &= np.abs(0.5 * (runs[k].top + runs[k].bottom) - y) < 0.6 * width * steep
        for j, (ox, oy) in enumerate(shapes):
            if j != k:
                other = np.interp(x, ox, oy, left=np.inf, right=np.inf)
                single &= np.abs(other - y) > 1.25 * width * steep
        found.append(_Strand(x, y, slopes[k], runs[k], single, _blank(lines[k], x, width)))
    return found, edge_width


def _blank(line: Line, x: Array, width: float) -> Bool:
    """Columns of a dashed line without ink, the rounded ends of its dashes with them."""
    from scipy.ndimage import binary_dilation

    if dash_of(line) == "solid":
        return np.zeros(len(x), bool)
    order = np.argsort(line.xy[:, 0], kind="stable")
    ink = np.interp(x, line.xy[order, 0], line.ink[order])
    return np.asarray(binary_dilation(ink < 0.3, iterations=round(width)), bool)


def _arms_and_zones(
    strands: list[_Strand], shape: tuple[int, ...], width: float
) -> tuple[list[Arm], list[Zone]]:
    """Clean stretches, and the connected areas of common ink between them."""
    import cv2

    mask = np.zeros(shape, np.uint8)
    arms: list[Arm] = []
    least = int(max(15, 3 * width))
    for s in strands:
        alone = _without_short(s.clean | s.blank, least)
        edges = np.flatnonzero(np.diff(np.r_[0, alone.astype(int), 0]))
        for a, b in zip(edges[::2], edges[1::2], strict=True):
            keep = s.clean[a:b]
            if keep.sum() < min(least, 15):
                alone[a:b] = False
                continue
            centre = 0.5 * (s.run.top[a:b] + s.run.bottom[a:b])
            arms.append(Arm(s.x[a:b][keep], centre[keep]))
        for k in np.nonzero(~alone & np.isfinite(s.run.top))[0]:
            column = int(s.x[k])
            mask[int(s.run.top[k]) : int(s.run.bottom[k]) + 1, max(column - 8, 0) : column + 9] = 1
    count, labels = cv2.connectedComponents(mask, connectivity=4)
    zones = []
    for zone in range(1, count):
        left = tuple(i for i, arm in enumerate(arms) if _at(labels, arm, -1, zone, width))
        right = tuple(i for i, arm in enumerate(arms) if _at(labels, arm, 0, zone, width))
        columns = np.nonzero((labels == zone).any(0))[0]
        if len(left) + len(right) < 2 or not len(columns):
            continue
        x, top, bottom = _edges_inside(strands, arms, labels, zone, width)
        if len(x) < 4:
            x, top, bottom = _edges_inside(strands, [], labels, zone, width)
        if len(x) > 3:
            zones.append(Zone(x, top, bottom, left, right))
    return arms, zones


def _away(strand: _Strand, arm: Arm) -> Array:
    """Vertical distance of a strand from an arm, infinite beside it."""
    return np.abs(strand.y - np.interp(strand.x, arm.x, arm.y, left=np.inf, right=np.inf))


def _without_short(clean: Bool, least: int) -> Bool:
    """Clean stretches of at least `least` columns, small holes in them closed."""
    out = clean.copy()
    for value, limit in ((False, 8), (True, least)):
        edges = np.flatnonzero(np.diff(np.r_[not value, out == value, not value].astype(int)))
        for a, b in zip(edges[::2], edges[1::2], strict=False):
            inner = a > 0 and b < len(out)
            if b - a < limit and (value or inner):
                out[a:b] = not value
    return out


def _at(labels: NDArray[np.int32], arm: Arm, end: int, zone: int, width: float) -> bool:
    """Whether an arm's end (0 its left, −1 its right) lies at a zone."""
    x, y = int(arm.x[end]), round(arm.y[end])
    beyond = slice(x, x + 14) if end else slice(max(x - 13, 0), x + 1)
    reach = int(width) + 2
    return bool((labels[max(y - reach, 0) : y + reach + 1, beyond] == zone).any())


def _edges_inside(
    strands: list[_Strand],
    arms: list[Arm],
    labels: NDArray[np.int32],
    zone: int,
    width: float,
) -> tuple[Array, Array, Array]:
    """Upper and lower edge of the common ink in each column of a zone."""
    edges: dict[int, tuple[float, float]] = {}
    for s in strands:
        rows = np.clip(np.round(s.y).astype(int), 0, labels.shape[0] - 1)
        inside = (labels[rows, s.x.astype(int)] == zone) & np.isfinite(s.run.top)
        for arm in arms:  # who stands alone here has no part in the common ink
            inside &= (_away(s, arm) > width) | ~np.isin(s.x, arm.x)
        for x, top, bottom in zip(
            s.x[inside], s.run.top[inside], s.run.bottom[inside], strict=True
        ):
            old = edges.get(int(x), (np.inf, -np.inf))
            edges[int(x)] = (min(old[0], top), max(old[1], bottom))
    x = np.array(sorted(edges), float)
    return x, np.array([edges[int(k)][0] for k in x]), np.array([edges[int(k)][1] for k in x])


def _placed(
    chains: list[tuple[list[int], float]],
    arms: list[Arm],
    zones: list[Zone],
    made: set[int],
    edge_width: float,
    width: float,
) -> list[Member]:
    """Every member over its whole length: arms as measured, common ink by its edges."""
    parts = []
    for chain, sure in chains:
        x = np.concatenate([arms[i].x for i in chain])
        y = np.concatenate([arms[i].y for i in chain])
        ends = [chain[0], chain[-1]]
        own = [z for z in zones if set(chain) & (set(z.left) | set(z.right))]
        low = min([x[0], *[z.x[0] for z in own if ends[0] in z.right or ends[0] in made]])
        high = max([x[-1], *[z.x[-1] for z in own if ends[1] in z.left]])
        parts.append((x, y, own, low, high, sure))
    curves = [_Curve(x, y, low, high, width) for x, y, _, low, high, _ in parts]
    for _ in range(6):
        wanted = [[(c.x, c.y, 1.0)] for c in curves]
        for zone in zones:
            inside = [k for k, p in enumerate(parts) if any(z is zone for z in p[2])]
            _share_edges(zone, inside, curves, edge_width, wanted)
        for curve, data in zip(curves, wanted, strict=True):
            curve.fit(data)
    return [
        _member(k, curves, parts[k][2], parts[k][5], edge_width, width) for k in range(len(parts))
    ]


class _Curve:
    """A smooth height over columns, fitted to points."""

    def __init__(self, x: Array, y: Array, low: float, high: float, width: float) -> None:
        self.x, self.y, self.width = x, y, width
        self.at = np.arange(np.ceil(low), np.floor(high) + 1)
        self.height = np.interp(self.at, x, y)
        self.sigma = np.ones_like(self.at)
        self.seen = np.zeros(len(self.at), bool)
        self.scatter = 0.1
        self.fit([(x, y, 1.0)])

    def fit(self, data: list[tuple[Array, Array, float]]) -> None:
        """Smooth through the weighted mean of the points in each column."""
        from curvefit.trace.spline import smooth

        x = np.concatenate([d[0] for d in data])
        y = np.concatenate([d[1] for d in data])
        weight = np.concatenate([np.full(len(d[0]), d[2]) for d in data])
        column = np.round(x - self.at[0]).astype(int)
        ok = (column >= 0) & (column < len(self.at)) & np.isfinite(y)
        n = len(self.at)
        total = np.bincount(column[ok], weight[ok], minlength=n)
        mean = np.bincount(column[ok], (weight * y)[ok], minlength=n) / np.maximum(total, 1e-9)
        self.seen = total > 0.5
        fitted = smooth(self.at, mean, np.minimum(total, 1.0), max(20.0, 4 * self.width), 4.0)
        self.height, self.sigma, self.scatter = fitted.value, fitted.sigma, fitted.scatter

    def value(self, x: Array) -> Array:
        """Height at columns, NaN outside."""
        return np.asarray(np.interp(x, self.at, self.height, left=np.nan, right=np.nan))

    def half(self, x: Array, edge_width: float) -> Array:
        """Half of the stroke's vertical extent at columns [px]."""
        slope = np.gradient(self.height)
        return np.asarray(0.5 * edge_width * np.sqrt(1 + np.interp(x, self.at, slope) ** 2))


def _share_edges(
    zone: Zone,
    inside: list[int],
    curves: list[_Curve],
    edge_width: float,
    wanted: list[list[tuple[Array, Array, float]]],
) -> None:
    """Give the zone's upper edge to its upper line in each column, the lower edge to the lower."""
    if not inside:
        return
    heights = np.array([curves[k].value(zone.x) for k in inside])
    for row, k in enumerate(inside):  # who stands alone in a column has no part in its edges
        heights[row, np.isin(zone.x, curves[k].x)] = np.nan
    present = np.isfinite(heights)
    some = present.any(0)
    upper = np.where(present, heights, np.inf).argmin(0)
    lower = np.where(present, heights, -np.inf).argmax(0)
    for row, k in enumerate(inside):
        half = curves[k].half(zone.x, edge_width)
        for owner, y in ((upper, zone.top + half), (lower, zone.bottom - half)):
            mine = some & (owner == row)
            wanted[k].append((zone.x[mine], y[mine], 1.0))
        between = present[row] & (upper != row) & (lower != row)
        wanted[k].append((zone.x[between], 0.5 * (zone.top + zone.bottom)[between], 0.01))


def _member(
    k: int, curves: list[_Curve], own: list[Zone], sure: float, edge_width: float, width: float
) -> Member:
    curve = curves[k]
    at = curve.at
    merged, inner = np.zeros(len(at), bool), np.zeros(len(at), bool)
    spread = np.zeros(len(at))
    others = np.array([c.value(at) for j, c in enumerate(curves) if j != k])
    between = (others < curve.height).any(0) & (others > curve.height).any(0)
    for zone in own:
        inside = (at >= zone.x[0]) & (at <= zone.x[-1]) & ~np.isin(at, curve.x)
        merged |= inside
        inner |= inside & between
        height = np.interp(at, zone.x, zone.bottom - zone.top)
        free = np.maximum(height - 2 * curve.half(at, edge_width), 0)
        spread = np.where(inside, free, spread)
    slope = np.gradient(curve.height)
    steep = np.sqrt(1 + slope * slope)
    n = len(curve.at)
    line = Line(
        np.stack([curve.at, curve.height], 1),
        curve.sigma / steep,
        curve.seen & ~merged,
        np.ones(n),
        np.ones(n),
        np.zeros(n),
        width,
        curve.scatter,
    )
    return Member(line, merged, inner, spread, sure)
