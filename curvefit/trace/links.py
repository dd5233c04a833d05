"""Pieces of line joined end to end: across gaps of dashes, crossings and labels."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.trace.fragments import End, Piece, end_of

__all__ = ["Chain", "chains"]

Array = NDArray[np.float64]
Image = NDArray[np.float32]


@dataclass(frozen=True, slots=True, eq=False)
class Chain:
    """Pieces in order: xy (n, 2) array px; ink seen [px]; parts: how many; closed: a loop."""

    xy: Array
    ink: float
    parts: int
    closed: bool = False


def chains(found: list[Piece], blank: Image, width: float, longest: float) -> list[Chain]:
    """Pieces joined into lines.

    Parameters
    ----------
    blank : (rows, cols) 0–1, paper that is seen to be empty: a link over it is dear.
    longest : the longest gap that may hide a line (a label) [px].

    Notes
    -----
    Rounds of growing reach: in each, all pairs of ends are priced by how far the link would turn
    and how that agrees with both directions, the cheapest are joined, and the directions are
    measured anew on the longer chains.
    """
    if not found:
        return []
    lengths = np.array([p.length for p in found])
    dash = float(np.median(lengths[lengths < 14 * width])) if (lengths < 14 * width).any() else 0.0
    gap = max(2.2 * dash, 3.0 * width) + 2.0
    lines = [Chain(p.xy, p.ink, 1) for p in found]
    for reach, free, limit in (
        (min(gap, 4 * width + 4), gap, 3.0),
        (gap, gap, 4.0),
        (1.6 * gap, gap, 7.0),
        (longest, gap, 9.0),
        (longest, gap, 9.0),
    ):
        lines = _joined(lines, blank, width, reach, free, limit)
    return lines


def _joined(
    lines: list[Chain], blank: Image, width: float, reach: float, free: float, limit: float
) -> list[Chain]:
    """One round of joining: the cheapest links first, every end at most once."""
    ends = [
        end
        for line in lines
        for end in (
            end_of(line.xy[::-1], width, _memory(line, width)),
            end_of(line.xy, width, _memory(line, width)),
        )
    ]
    pairs = _priced(ends, blank, reach, free, limit)
    partner: dict[int, int] = {}
    root = list(range(len(lines)))

    def top(i: int) -> int:
        while root[i] != i:
            root[i] = root[root[i]]
            i = root[i]
        return i

    closing: list[int] = []
    for a, b in pairs:
        if a in partner or b in partner:
            continue
        i, j = top(a // 2), top(b // 2)
        if i == j:
            if a // 2 == b // 2 and _is_loop(lines[a // 2], reach):
                closing.append(a // 2)
            continue
        partner[a], partner[b] = b, a
        root[i] = j
    return _rebuilt(lines, partner, closing)


def _memory(line: Chain, width: float) -> float:
    return max(40.0, 12.0 * width)


def _is_loop(line: Chain, reach: float) -> bool:
    size = np.ptp(line.xy, axis=0).max()
    return bool(size > 3 * reach and line.ink > 4 * reach)


def _priced(
    ends: list[End], blank: Image, reach: float, free: float, limit: float
) -> list[tuple[int, int]]:
    """Pairs of ends worth joining, cheapest first."""
    from scipy.spatial import cKDTree

    at = np.array([e.at for e in ends])
    pairs = cKDTree(at).query_pairs(reach, output_type="ndarray")
    if not len(pairs):
        return []
    out = np.array([e.out for e in ends])
    spread = np.array([e.spread for e in ends])
    bend = np.array([e.bend for e in ends])
    a, b = pairs[:, 0], pairs[:, 1]
    v = at[b] - at[a]
    g = np.maximum(np.hypot(*v.T), 1e-6)
    u = v / g[:, None]
    # ends that already touch have no direction of their own between them: use the mean direction
    mean = out[a] - out[b]
    mean /= np.maximum(np.hypot(*mean.T), 1e-9)[:, None]
    touch = np.clip(1.5 - g / 2.0, 0, 1)[:, None]
    u = u * (1 - touch) + mean * touch
    alpha = np.arctan2(out[a, 0] * u[:, 1] - out[a, 1] * u[:, 0], (out[a] * u).sum(1))
    beta = np.arctan2(-u[:, 0] * out[b, 1] + u[:, 1] * out[b, 0], -(u * out[b]).sum(1))
    cost = np.zeros(len(a))
    for angle, own, curvature in ((alpha, spread[a], bend[a]), (beta, spread[b], -bend[b])):
        expected = np.clip(0.5 * g * curvature, -0.6, 0.6)  # an arc leaves its chord by κg/2
        loose = 0.07 + 0.1 * np.minimum(g / free, 2.0) + 0.35 * np.abs(expected)
        noise = own**2 + loose**2 + (0.6 / np.maximum(g, 1.5)) ** 2
        cost += (angle - expected) ** 2 / noise
    cost += (np.maximum(np.abs(alpha), np.abs(beta)) / 0.8) ** 4
    for k in np.nonzero(cost < limit)[0]:
        empty = _empty(blank, at[a[k]], at[b[k]])
        cost[k] += 2.0 * (max(empty - 0.45 * free, 0.0) / (0.55 * free)) ** 2
        cost[k] += 0.5 * g[k] / free
    order = np.argsort(cost)
    return [(int(a[k]), int(b[k])) for k in order if cost[k] < limit]


def _empty(blank: Image, p: Array, q: Array) -> float:
    """Length of plainly empty paper between two points [px]."""
    n = max(int(np.hypot(*(q - p))), 2)
    at = np.round(p + np.linspace(0, 1, n)[:, None] * (q - p)).astype(int)
    rows, cols = blank.shape
    values = blank[np.clip(at[:, 1], 0, rows - 1), np.clip(at[:, 0], 0, cols - 1)]
    return float(values.mean() * np.hypot(*(q - p)))


def _rebuilt(lines: list[Chain], partner: dict[int, int], closing: list[int]) -> list[Chain]:
    """Chains walked from their free ends along the new links."""
    done: set[int] = set()
    out: list[Chain] = []
    for start in range(2 * len(lines)):
        if start // 2 in done or start in partner:
            continue
        parts: list[Chain] = []
        xy: list[Array] = []
        end = start
        while True:
            line = lines[end // 2]
            done.add(end // 2)
            parts.append(line)
            xy.append(line.xy if end % 2 == 0 else line.xy[::-1])
            other = end ^ 1
            if other not in partner:
                break
            end = partner[other]
        closed = len(parts) == 1 and (start // 2 in closing or parts[0].closed)
        out.append(
            Chain(
                np.concatenate(xy), sum(p.ink for p in parts), sum(p.parts for p in parts), closed
            )
        )
    return out
