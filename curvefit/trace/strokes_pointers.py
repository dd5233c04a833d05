"""Bent lines that lead from a label to a curve: they are no curves."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import resample
from curvefit.trace.strokes_chains import Chain

__all__ = ["without_pointers"]

Array = NDArray[np.float64]
POINTS = 4  #: at most so many points: a straight line and a shelf for the text, an arrow's barb
CORNER = 12.0  #: degrees by which one of its corners turns at least
TOUCH = 3.0  #: px between its tip and the curve


def without_pointers(chains: Sequence[Chain], words: Array, longest: float) -> list[Chain]:
    """The chains without short bent lines of few points between a word and a curve.

    Parameters
    ----------
    words : (n, 4) left, top, right, bottom of the words in the box [px]
    longest : how long a pointer may be [px]
    """
    bent = [_is_bent(c, longest) for c in chains]
    curves = [c for c, b in zip(chains, bent, strict=True) if not b]
    return [
        c
        for c, b in zip(chains, bent, strict=True)
        if not (b and (_at_word(c, words) or _on_curve(c, curves)))
    ]


def _is_bent(chain: Chain, longest: float) -> bool:
    xy = chain.xy
    if not 3 <= len(xy) <= POINTS or chain.first.dash or chain.pieces > 3:
        return False
    if np.hypot(*np.ptp(xy, axis=0)) > longest:
        return False
    d = np.diff(xy, axis=0)
    turn = np.degrees(np.abs(np.diff(np.unwrap(np.arctan2(d[:, 1], d[:, 0])))))
    return bool(turn.max() > CORNER)


def _at_word(chain: Chain, words: Array) -> bool:
    """Whether one of the ends lies within a text height of a word."""
    for end in chain.xy[[0, -1]]:
        for left, top, right, bottom in words:
            reach = min(bottom - top, right - left)
            away = np.maximum([left - end[0], top - end[1]], [end[0] - right, end[1] - bottom])
            if away.max() < reach:
                return True
    return False


def _on_curve(chain: Chain, curves: Sequence[Chain]) -> bool:
    """Whether one of the ends lies on a curve."""
    ends = chain.xy[[0, -1]]
    for curve in curves:
        line = resample(curve.xy, 1.0)
        away = np.hypot(*(line[:, None] - ends[None]).transpose(2, 0, 1)).min()
        if away < TOUCH + curve.first.width / 2:
            return True
    return False
