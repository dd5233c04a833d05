"""What the page shows of one plot box before any number is believed: box, ticks, words.

Two rooms gather it, one from pixels and one from the strokes of a vector page; one room
(`axes`) makes scales of it, whichever it came from.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import Warp
from curvefit.records import Finding, Word

__all__ = ["Evidence", "TickRow"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class TickRow:
    """Candidate ticks along one side, found in one way.

    at : (n,) fractions of the box side, 0 left/bottom to 1 right/top, sorted.
    u : (n,) standard uncertainties, fractions. weight : (n,) 0–1, strength of each.
    kind : "grid" (a line across the box), "inside" or "outside" (a short tick), "end" (box corner).
    offset : distance of the scale's own line outside the box [panel px]; 0 for the box side.
    """

    side: Literal["bottom", "top", "left", "right"]
    kind: Literal["grid", "inside", "outside", "end"]
    at: Array
    u: Array
    weight: Array
    offset: float = 0.0


@dataclass(frozen=True, slots=True, eq=False)
class Evidence:
    """One plot box and everything printed in and around it.

    corners : (4, 2) page px, clockwise from the top left of the upright box.
    turn : quarter turns clockwise that set the page upright (0–3).
    words : the words in and near the box, page px, tick numbers among them.
    look : reads the numbers afresh where they should stand: boxes (4, 2) page px → (text, score)
        each; None where there are no pixels to look at. read : the same for text of any kind.
    exact : True for a vector page.
    bow : how far straight lines still sag after the warp, along x and along y [px].
    loose : how far a corner that nothing drawn shows may be off, along x and y [px].
    """

    corners: Array
    warp: Warp
    turn: int
    ticks: tuple[TickRow, ...]
    words: tuple[Word, ...]
    look: Callable[[Sequence[Array]], list[tuple[str, float]]] | None = None
    exact: bool = False
    findings: tuple[Finding, ...] = ()
    read: Callable[[Sequence[Array]], list[tuple[str, float]]] | None = None
    bow: tuple[float, float] = (0.0, 0.0)
    loose: tuple[float, float] = (0.0, 0.0)
