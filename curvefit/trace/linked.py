"""Lines in any direction, from what the left-to-right lines leave: lines of equal efficiency."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import arc_length, resample
from curvefit.records import Panel
from curvefit.trace.centre import Line, centred, trimmed, width_along
from curvefit.trace.ends import settled
from curvefit.trace.fragments import pieces
from curvefit.trace.ink import Layer
from curvefit.trace.links import Chain, chains
from curvefit.trace.text import lettering

__all__ = ["Loose", "linked_lines", "without"]

Array = NDArray[np.float64]
Image = NDArray[np.float32]


@dataclass(frozen=True, slots=True, eq=False)
class Loose:
    """A line in any direction; closed: a loop."""

    line: Line
    closed: bool


def without(layer: Layer, lines: list[Line], beyond: float = 1.0) -> Layer:
    """The layer with found lines taken out: their ink is hidden, `beyond` px on each side too."""
    import cv2

    hidden = np.zeros(layer.ink.shape, np.uint8)
    for line in lines:
        points = np.round(line.xy * 16).astype(np.int32)
        thickness = max(round(line.width + 2 * beyond), 1)
        cv2.polylines(hidden, [points], False, 1, thickness, shift=4)
    seen = hidden == 0
    return Layer(layer.ink * seen, layer.lines * seen, layer.known * seen)


def linked_lines(
    panel: Panel, layer: Layer, found: list[Line], width: float, shortest: float
) -> list[Loose]:
    """The lines that pieces of ink between the found lines make.

    Parameters
    ----------
    found : lines that are known already.
    shortest : ink that a line must show [px].
    """
    rest = without(layer, found)
    letters = lettering(panel, rest.lines, width)
    ink = np.where(letters, 0.0, rest.lines).astype(np.float32)
    known = np.where(letters, 0.0, rest.known).astype(np.float32)
    blank = known * (1.0 - rest.ink)
    joined = chains(pieces(ink, width), blank, width, 0.06 * panel.warp.size[0])
    bare = Layer(rest.ink, ink, known)
    out: list[Loose] = []
    for chain in sorted(joined, key=lambda c: -c.ink):
        if chain.ink < shortest or np.ptp(chain.xy, axis=0).max() < 1.5 * shortest:
            continue
        loose = _refined(bare, chain, width)
        if loose is not None and loose.line.good.sum() > 0.6 * shortest:
            out.append(loose)
    return out


def _refined(layer: Layer, chain: Chain, width: float) -> Loose | None:
    own = width_along(layer.lines, layer.known, resample(chain.xy, 1.0), 2.5 * width + 2)
    own = float(np.clip(own, 0.4 * width, 1.6 * width)) if np.isfinite(own) else width
    if chain.closed:
        return _refined_loop(layer, chain, own)
    line = centred(layer.lines, layer.known, chain.xy, own)
    if not _smooth(line):
        return None
    ended = settled(layer, line, 0.06 * max(layer.ink.shape), kinked=True)
    return None if ended is None else Loose(ended, False)


def _refined_loop(layer: Layer, chain: Chain, own: float) -> Loose | None:
    """A loop, refined with an overlap and cut where it meets itself."""
    ring = resample(np.concatenate([chain.xy, chain.xy[:1]]), 1.0)
    over = min(80, len(ring) // 3)
    line = centred(
        layer.lines, layer.known, np.concatenate([ring[-over:-1], ring, ring[1:over]]), own
    )
    if not _smooth(line):
        return None
    start = over // 2
    away = np.hypot(*(line.xy[len(line.xy) // 2 :] - line.xy[start]).T)
    return Loose(trimmed(line, start, len(line.xy) // 2 + int(away.argmin())), True)


def _smooth(line: Line) -> bool:
    """Whether the ink lies on one smooth stroke: letters in a row do not."""
    turn = np.unwrap(np.arctan2(*np.gradient(line.xy, axis=0).T[::-1]))
    wiggle = np.abs(np.diff(turn)).sum() - abs(turn[-1] - turn[0])
    length = float(arc_length(line.xy)[-1])
    return bool(
        line.good.mean() > 0.2
        and line.scatter < 0.25 * line.width + 0.4
        and wiggle < 1.0 + length / 400
    )
