"""Lines that run across a family of curves: carried to the outer curves, told apart at the turn."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from curvefit.trace.centre import Line, trimmed
from curvefit.trace.column import columns_of, slope_of

__all__ = ["branches", "carried_to"]

Array = NDArray[np.float64]


def carried_to(line: Line, family: list[Line], longest: float) -> Line:
    """The line carried on at both ends to the next curve of the family, if one is near.

    A line of equal efficiency ends on the curves of the largest and the smallest impeller; its
    last stretch is often hidden by its own label.
    """
    xy, before, after = line.xy, 0, 0
    for end in (0, 1):
        tail = xy[:25] if end == 0 else xy[-25:][::-1]
        if len(tail) < 10:
            continue
        out = tail[0] - tail[-1]
        out = out / max(float(np.hypot(*out)), 1e-9)
        steps = tail[0] + out * np.arange(0.0, longest)[:, None]
        hit = _first_meeting(steps, family)
        if hit is None or hit < 2:
            continue
        added = steps[1 : hit + 1]
        xy = np.concatenate([added[::-1], xy]) if end == 0 else np.concatenate([xy, added])
        before, after = (len(added), after) if end == 0 else (before, len(added))

    def padded(values: NDArray[np.generic], fill: float) -> Array:
        return np.pad(np.asarray(values, float), (before, after), constant_values=fill)

    sigma = np.pad(line.sigma, (before, after), mode="edge")
    return Line(
        xy,
        sigma,
        padded(line.good, 0) > 0.5,
        padded(line.ink, 0),
        padded(line.known, 1),
        padded(line.side, 0),
        line.width,
        line.scatter,
    )


def _first_meeting(steps: Array, family: list[Line]) -> int | None:
    """The step at which a straight walk meets a curve, None where it meets none."""
    met = []
    for curve in family:
        x, y = columns_of(curve)
        inside = (steps[:, 0] >= x[0] - 3) & (steps[:, 0] <= x[-1] + 3)
        side = steps[:, 1] - np.interp(steps[:, 0], x, y)
        near = inside & (np.abs(side) < 1.0)
        crossed = np.r_[False, np.diff(np.sign(side)) != 0] & inside
        where = np.flatnonzero(near | crossed)
        if len(where):
            met.append(int(where[0]))
    return min(met) if met else None


def branches(line: Line, family: list[Line]) -> list[Line]:
    """The branches of a line that turns back within the family: where it runs along with it.

    Left of the turn the efficiency is reached before its best point, right of it after: each
    branch carries a label of its own.
    """
    from scipy.ndimage import gaussian_filter1d

    if len(family) < 2 or len(line.xy) < 60:
        return [line]
    tangent = gaussian_filter1d(np.gradient(line.xy, axis=0), 6.0, axis=0, mode="nearest")
    slopes, away = [], []
    for curve in family:
        x, y = columns_of(curve)
        slopes.append(np.interp(line.xy[:, 0], x, slope_of(x, y)))
        away.append(np.abs(line.xy[:, 1] - np.interp(line.xy[:, 0], x, y)))
    nearest = np.argmin(away, axis=0)
    slope = np.array(slopes)[nearest, np.arange(len(line.xy))]
    turn = tangent[:, 1] - slope * tangent[:, 0]
    changes = np.flatnonzero(np.diff(np.sign(turn)) != 0)
    inner = changes[(changes > 0.12 * len(turn)) & (changes < 0.88 * len(turn))]
    if len(inner) != 1:
        return [line]
    left, right = turn[: inner[0]].mean(), turn[inner[0] :].mean()
    if left * right >= 0 or min(abs(left), abs(right)) < 0.2:
        return [line]
    k = int(inner[0])
    return [trimmed(line, 0, k), trimmed(line, k, len(line.xy) - 1)]
