"""Followed lines → Trace records: uncertainty, flags, one point a column."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from curvefit.notes import CurveNotes
from curvefit.records import BRIDGED, CROSSING, Panel, Trace
from curvefit.trace.centre import Line
from curvefit.trace.ink import MARGIN
from curvefit.trace.raster import Found, lines_of

__all__ = ["traces_of"]

Array = NDArray[np.float64]
FLOOR = 0.06  #: px, what no fit sees: rasterising, resampling, the drawing's own resolution


def traces_of(panel: Panel, curve_notes: tuple[CurveNotes, ...]) -> tuple[Trace, ...]:
    """The lines of a plot box as records."""
    found = lines_of(panel)
    return tuple(_trace(panel, one, f"line {i}") for i, one in enumerate(found, 1))


def _trace(panel: Panel, found: Found, name: str) -> Trace:
    line = found.line
    sigma, flags = _doubt(line)
    flat = line.xy - MARGIN
    if flat[0, 0] > flat[-1, 0]:
        flat, sigma, flags = flat[::-1], sigma[::-1], flags[::-1]
    path = found.closed or (found.loose and not _single_valued(flat))
    index = np.arange(len(flat)) if path else np.nonzero(_increasing(flat[:, 0]))[0]
    step = max(int(np.ceil(len(index) / 1500)), 1)
    index = np.unique(np.r_[index[::step], index[-1]])
    return Trace(
        name,
        panel,
        flat[index],
        sigma[index],
        flags[index],
        correlation=max(14.0, 3.0 * line.width),
        width=line.width,
        colour=found.colour,
        path=path,
        closed=found.closed,
    )


def _single_valued(flat: Array) -> bool:
    """Whether a line runs from left to right rather than up and down or back."""
    x, y = flat[:, 0], flat[:, 1]
    back = np.clip(-np.diff(x), 0, None).sum()
    return bool(back < 1.5 and np.abs(np.diff(y)).sum() < 1.2 * np.ptp(x))


def _increasing(x: Array) -> NDArray[np.bool_]:
    before = np.r_[-np.inf, np.maximum.accumulate(x)[:-1]]
    return np.asarray(x > before + 1e-6)


def _doubt(line: Line) -> tuple[Array, NDArray[np.uint8]]:
    """Standard uncertainty and flags of every point."""
    from scipy.ndimage import distance_transform_edt, uniform_filter1d

    away = distance_transform_edt(~line.good) if line.good.any() else np.full(len(line.xy), 50.0)
    wander = 0.012 * np.clip(away - 2.0, 0, None)
    sigma = np.sqrt((1.3 * line.sigma) ** 2 + FLOOR**2 + (0.15 * line.scatter) ** 2 + wander**2)
    missing = uniform_filter1d((line.ink < 0.4).astype(float), 5) > 0.5
    crossing = ~line.good & ~missing & (line.side > 0.3)
    flags = np.where(missing & (line.known > 0.4), BRIDGED, 0) | np.where(crossing, CROSSING, 0)
    return sigma, flags.astype(np.uint8)
