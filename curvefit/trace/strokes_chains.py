"""Drawn pieces of one line joined: subpaths, hand-made dashes, both sides of a label."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import arc_length

__all__ = ["Chain", "Piece", "joined"]

Array = NDArray[np.float64]
TOUCH = 0.6  #: px between ends that are one point
DASH_GAP = 2.2  #: longest gap in units of the dashes on both sides
LONGEST_GAP = 70.0  #: px
LONGEST_DASH = 140.0  #: px
LABEL_GAP = 260.0  #: px, where a word stands in the gap
BENT = 28.0  #: degrees by which a line may turn over a gap
ARC = 80.0  #: … where a label stands in the gap and both ends bend alike
CORNER = 50.0  #: … and where its pieces touch


@dataclass(frozen=True, slots=True, eq=False)
class Piece:
    """One subpath inside the plot box: xy (n, 2) panel px, and how it is drawn."""

    xy: Array
    width: float
    colour: tuple[float, float, float]
    dash: tuple[float, ...] = ()

    @property
    def length(self) -> float:
        """px."""
        return float(arc_length(self.xy)[-1])

    @property
    def style(self) -> tuple[object, ...]:
        """Pieces of one line have it in common."""
        return tuple(round(c, 2) for c in self.colour), round(self.width, 1), bool(self.dash)


@dataclass(slots=True, eq=False)
class Chain:
    """Pieces that are one line: its points, and between which of them nothing is drawn."""

    xy: Array
    first: Piece
    pieces: int = 1
    gaps: list[tuple[float, float]] = field(default_factory=list)  #: (length, place) of each gap
    bridged: NDArray[np.bool_] = field(default_factory=lambda: np.zeros(0, bool))


@dataclass(frozen=True, slots=True)
class End:
    """One end of a piece: its place and the direction in which the line would go on."""

    piece: int
    last: bool
    at: Array
    ahead: Array


def joined(pieces: Sequence[Piece], words: Array) -> list[Chain]:
    """Lines made of pieces of like look that continue each other.

    Parameters
    ----------
    words : array of shape (n, 4), left, top, right, bottom of each word [panel px]
    """
    groups: dict[tuple[object, ...], list[int]] = {}
    for i, piece in enumerate(pieces):
        groups.setdefault(piece.style, []).append(i)
    chains: list[Chain] = []
    for group in groups.values():
        chains += _chains([pieces[i] for i in group], words)
    return chains


def _chains(pieces: list[Piece], words: Array) -> list[Chain]:
    ends = [e for i, p in enumerate(pieces) for e in _ends(i, p)]
    lengths = np.array([p.length for p in pieces])
    links = _links(ends, lengths, words)
    mate: dict[int, int] = {}
    for _, a, b in sorted(links):
        if a in mate or b in mate:
            continue
        mate[a], mate[b] = b, a
    return _walked(pieces, mate, words)


def _ends(i: int, piece: Piece) -> tuple[End, End]:
    s = arc_length(piece.xy)
    reach = min(max(0.3 * s[-1], 2.0), 12.0)
    back = np.array([np.interp(s[-1] - reach, s, piece.xy[:, k]) for k in (0, 1)])
    fore = np.array([np.interp(reach, s, piece.xy[:, k]) for k in (0, 1)])
    start, stop = piece.xy[0], piece.xy[-1]
    return End(i, False, start, _unit(start - fore)), End(i, True, stop, _unit(stop - back))


def _unit(v: Array) -> Array:
    return np.asarray(v / max(float(np.hypot(*v)), 1e-9))


def _links(ends: list[End], lengths: Array, words: Array) -> list[tuple[float, int, int]]:
    """(cost, end, end) for each two ends that may belong together."""
    from scipy.spatial import cKDTree

    at = np.array([e.at for e in ends])
    ahead = np.array([e.ahead for e in ends])
    tree = cKDTree(at)
    longest = LABEL_GAP if len(words) else LONGEST_GAP
    near = tree.query_pairs(LONGEST_GAP, output_type="ndarray")
    if len(words) and len(ends) < 400:
        near = tree.query_pairs(longest, output_type="ndarray")
    found = []
    for a, b in near.tolist():
        same = ends[a].piece == ends[b].piece  # a ring that a label interrupts
        gap = at[b] - at[a]
        size = float(np.hypot(*gap))
        turn = _degrees(ahead[a], -ahead[b])
        if size <= TOUCH:
            if turn < CORNER and not same:
                found.append((turn / 90, a, b))
            continue
        la, lb = lengths[ends[a].piece], lengths[ends[b].piece]
        leans = _degrees(ahead[a], gap / size), _degrees(gap / size, -ahead[b])
        lean = max(leans)
        dashes = not same and max(la, lb) < LONGEST_DASH
        dashes = dashes and size < min(DASH_GAP * min(la, lb) + 4.0, LONGEST_GAP)
        label = min(la, lb) > 1.5 * size and _word_in(words, at[a], at[b])
        straight = turn < BENT and lean < 0.8 * BENT
        arc = turn < ARC and abs(leans[0] - leans[1]) < ARC / 5 and turn > 0.8 * sum(leans)
        if ((dashes or label) and straight) or (label and arc):
            found.append((0.1 + size / 40 + lean / 15, a, b))
    return found


def _degrees(a: Array, b: Array) -> float:
    return float(np.degrees(np.arccos(np.clip(a @ b, -1, 1))))


def _word_in(words: Array, a: Array, b: Array) -> bool:
    """Whether a word stands between two points and fills at least a third of the way."""
    if not len(words):
        return False
    t = np.linspace(0.1, 0.9, 9)[:, None]
    way = a + t * (b - a)
    x, y = way[:, :1], way[:, 1:]
    left, top, right, bottom = words.T
    inside = (x > left - 3) & (x < right + 3) & (y > top - 3) & (y < bottom + 3)
    return bool(inside.sum(0).max() >= 3)


def _walked(pieces: list[Piece], mate: dict[int, int], words: Array) -> list[Chain]:
    """Chains from linked ends; end 2i is the first point of piece i, 2i + 1 its last."""
    left = set(range(len(pieces)))
    chains = []
    for start in range(len(pieces)):
        if start not in left:
            continue
        end = 2 * start
        seen = {start}
        while end in mate:  # to the beginning of the chain
            other = mate[end]
            if other // 2 in seen:
                break
            seen.add(other // 2)
            end = other ^ 1
        begin = end
        order: list[tuple[Piece, bool]] = []
        while True:
            i, backwards = end // 2, bool(end % 2)
            order.append((pieces[i], backwards))
            left.discard(i)
            out = end ^ 1
            if out not in mate or mate[out] // 2 not in left:
                break
            end = mate[out]
        chains.append(_chain(order, words, ring=mate.get(out) == begin))
    return chains


def _chain(order: list[tuple[Piece, bool]], words: Array, ring: bool) -> Chain:
    parts: list[Array] = []
    bridged: list[NDArray[np.bool_]] = []
    gaps: list[tuple[float, float]] = []
    total = 0.0
    for piece, backwards in order:
        xy = piece.xy[::-1] if backwards else piece.xy
        empty = np.zeros(len(xy), bool)  # of the stretch that ends in each point
        if parts:
            size = float(np.hypot(*(xy[0] - parts[-1][-1])))
            total += size
            if size <= TOUCH:
                xy, empty = xy[1:], empty[1:]
            else:
                gaps.append((size, total))
                empty[0] = size > LONGEST_GAP or _word_in(words, parts[-1][-1], xy[0])
        total += piece.length
        parts.append(xy)
        bridged.append(empty)
    if ring:
        first, last = parts[0][0], parts[-1][-1]
        parts.append(first[None])
        bridged.append(np.array([_word_in(words, last, first)]))
    largest = max((p for p, _ in order), key=lambda p: p.length)
    return Chain(np.concatenate(parts), largest, len(order), gaps, np.concatenate(bridged))
