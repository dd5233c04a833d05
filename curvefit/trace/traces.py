"""Followed lines → Trace records: uncertainty, flags, one point a column."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from curvefit.errors import Location
from curvefit.records import BRIDGED, BUNDLED, CROSSING, GIVEN, Finding, Panel, Trace
from curvefit.trace.dashes import dash_of
from curvefit.trace.ink import MARGIN
from curvefit.trace.raster import Found, line_along, lines_of

__all__ = ["followed", "traces_of"]

Array = NDArray[np.float64]
SURE = 0.2  #: by how much the best pairing in a bundle must beat the next
FLOOR = 0.06  #: px, what no fit sees: rasterising, resampling, the drawing's own resolution


def traces_of(panel: Panel) -> tuple[Trace, ...]:
    """The lines of a plot box as records."""
    found = lines_of(panel)
    return tuple(_trace(panel, one, f"line {i}") for i, one in enumerate(found, 1))


def followed(panel: Panel, path: Array) -> Trace | None:
    """The line of ink that runs along a drawn path, (n, 2) panel px; None where there is none."""
    found = line_along(panel, path + MARGIN)
    if found is None:
        return None
    one = _trace(panel, found, "")
    return replace(one, flags=one.flags | np.uint8(GIVEN), findings=())


def _trace(panel: Panel, found: Found, name: str) -> Trace:
    line = found.line
    sigma, flags = _doubt(found)
    flat = line.xy - MARGIN
    inside = _inside(flat, panel.warp.size)
    flat, sigma, flags = flat[inside], sigma[inside], flags[inside]
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
        dash=dash_of(line),
        path=path,
        closed=found.closed,
        findings=_said(panel, found, name),
    )


def _inside(flat: Array, size: tuple[float, float]) -> NDArray[np.intp]:
    """Indices of the points of a line in the box, to half a pixel: a stroke's end is round."""
    within = ((flat > -0.5) & (flat < np.array(size) + 0.5)).all(1)
    return np.flatnonzero(within) if within.sum() > 5 else np.arange(len(flat))


def _single_valued(flat: Array) -> bool:
    """Whether a line runs from left to right rather than up and down or back."""
    x, y = flat[:, 0], flat[:, 1]
    back = np.clip(-np.diff(x), 0, None).sum()
    return bool(back < 1.5 and np.abs(np.diff(y)).sum() < 1.2 * np.ptp(x))


def _increasing(x: Array) -> NDArray[np.bool_]:
    before = np.r_[-np.inf, np.maximum.accumulate(x)[:-1]]
    return np.asarray(x > before + 1e-6)


def _doubt(found: Found) -> tuple[Array, NDArray[np.uint8]]:
    """Standard uncertainty and flags of every point."""
    from scipy.ndimage import distance_transform_edt, uniform_filter1d

    line = found.line
    away = distance_transform_edt(~line.good) if line.good.any() else np.full(len(line.xy), 50.0)
    missing = uniform_filter1d((line.ink < 0.4).astype(float), 5) > 0.5
    crossing = ~line.good & ~missing & (line.side > 0.3)
    flags = np.where(missing & (line.known > 0.4), BRIDGED, 0) | np.where(crossing, CROSSING, 0)
    wander = 0.012 * np.clip(away - 2.0, 0, None)
    if found.bundled is not None:
        merged, spread = found.bundled.merged, found.bundled.spread
        sure = found.bundled.margin >= SURE
        loose = merged & (spread > 0.3 * line.width) & (found.bundled.inner | (not sure))
        share = 0.12 * line.width + (0.3 if sure else 0.6) * np.where(loose, spread, 0.0)
        wander = np.where(merged, share, np.minimum(wander, 0.3))
        flags = np.where(loose, BUNDLED, np.where(merged, CROSSING, flags))
    sigma = np.sqrt((1.3 * line.sigma) ** 2 + FLOOR**2 + (0.15 * line.scatter) ** 2 + wander**2)
    return sigma, flags.astype(np.uint8)


def _said(panel: Panel, found: Found, name: str) -> tuple[Finding, ...]:
    """The finding that a pairing could not be established."""
    if found.bundled is None or found.bundled.margin >= SURE:
        return ()
    box = panel.warp.to_page(found.line.xy[found.bundled.merged] - MARGIN)
    (left, top), (right, bottom) = box.min(0).tolist(), box.max(0).tolist()
    where = Location(panel=panel.name, curve=name, box_px=(left, top, right, bottom))
    return (
        Finding(
            "warning",
            "trace.pairing",
            "Lines run together here and which one goes on as which could not be established: "
            f"the best pairing is smoother than the next by {found.bundled.margin:.0%}, "
            f"{SURE:.0%} are needed.",
            where,
            "Draw the line with `path` in the notes of this curve.",
        ),
    )
