"""Solid, dashed, dotted or dash-dotted: the rhythm of the ink along a line."""

from __future__ import annotations

import numpy as np

from curvefit.trace.centre import Line

__all__ = ["dash_of"]


def dash_of(line: Line) -> str:
    """How the line is drawn: "solid", "dashed", "dotted" or "dash-dotted".

    Notes
    -----
    Ink of 0.4 and more counts as drawn. Gaps and strokes are measured between places that are
    seen; a line is solid unless at least four gaps make up a tenth of it.
    """
    seen = line.known > 0.5
    on = line.ink > 0.4
    edges = np.flatnonzero(np.diff(on.astype(int))) + 1
    parts = np.split(np.arange(len(on)), edges)[1:-1]  # the first and the last may be cut
    plain = [p for p in parts if seen[p].mean() > 0.8]
    gaps = np.array([len(p) for p in plain if not on[p[0]]])
    strokes = np.array([len(p) for p in plain if on[p[0]]])
    gaps = gaps[gaps > 1.5]
    if len(gaps) < 4 or len(strokes) < 3 or gaps.sum() < 0.1 * seen.sum():
        return "solid"
    if np.median(strokes) < 2.2 * line.width + 1:
        return "dotted"
    short, long = np.quantile(strokes, [0.2, 0.8])
    if short < 2.0 * line.width + 2 and long > 2.5 * short:
        return "dash-dotted"
    return "dashed"
