"""Lines end at the frame of their box: what the ink of the frame adds to them is cut off."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from curvefit.records import Trace

__all__ = ["OVER", "inside"]

Array = NDArray[np.float64]
OVER = 0.0015  #: share of the box side by which a point may lie outside and still be moved to it


def inside(trace: Trace) -> Trace:
    """The trace without what lies outside its plot box; the trace itself where nothing does.

    Notes
    -----
    A line ends where it meets the left or right side of the box: that point is put in. Points
    above or below the box by more than ``OVER`` of its height are left out, closer ones are moved
    onto its side, so that no value lies below the start of an axis. A line that the user drew is
    left as it is.
    """
    if trace.by == "given" or len(trace.flat) < 4:
        return trace
    size = np.array(trace.panel.warp.size, float)
    outside = (trace.flat < 0) | (trace.flat > size)
    if not outside.any():
        return trace
    flat, sigma, flags = trace.flat, trace.sigma, trace.flags
    if not trace.path:
        flat, sigma, flags = _cut(trace, float(size[0]))
    near = ((flat > -OVER * size) & (flat < (1 + OVER) * size)).all(1)
    if near.sum() < 4:
        return trace  # not a line that runs a little too far: `check` has a say
    return replace(trace, flat=np.clip(flat[near], 0.0, size), sigma=sigma[near], flags=flags[near])


def _cut(trace: Trace, width: float) -> tuple[Array, Array, NDArray[np.uint8]]:
    """A line from left to right between the two sides of its box, with its points on them."""
    x, y = trace.flat.T
    ends = [side for side in (0.0, width) if x[0] < side < x[-1]]
    kept = np.flatnonzero((x > 0) & (x < width))
    at = np.r_[[e for e in ends if e == 0.0], x[kept], [e for e in ends if e > 0.0]]
    nearest = np.abs(x[None] - at[:, None]).argmin(1)
    flat = np.c_[at, np.interp(at, x, y)]
    return flat, trace.sigma[nearest], trace.flags[nearest]
