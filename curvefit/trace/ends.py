"""Where a line really begins and ends."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import arc_length

__all__ = ["extended", "supported"]

Array = NDArray[np.float64]


def extended(xy: Array, by: float, memory: float) -> Array:
    """The polyline carried on at both ends by a circle of its last `memory` px, `by` px far."""
    return np.concatenate([_carry(xy[::-1], by, memory)[::-1], xy, _carry(xy, by, memory)])


def _carry(xy: Array, by: float, memory: float) -> Array:
    n = int(min(memory, len(xy) - 1))
    steps = np.arange(1, max(int(by), 0) + 1, dtype=float)
    if n < 6 or not len(steps):
        return np.empty((0, 2))
    tail = xy[-n - 1 :]
    s = arc_length(tail)
    s -= s[-1]
    degree = 2 if s[0] < -40 else 1
    out = np.empty((len(steps), 2))
    for axis in range(2):
        relative = tail[:, axis] - tail[-1, axis]
        design = np.stack([s**k for k in range(1, degree + 1)], 1)
        c, *_ = np.linalg.lstsq(design, relative, rcond=None)
        out[:, axis] = tail[-1, axis] + sum(c[k] * steps ** (k + 1) for k in range(degree))
    return out


def supported(ink: Array, known: Array, theta: float | None = None) -> tuple[int, int]:
    """First and last index of the stretch that carries the line: the largest sum of ink − theta.

    ink : (n,) coverage along the line 0–1; known : (n,) 0 where hidden, which counts neither way.
    theta : the ink a px must show; None: 0.28 of the line's own duty cycle.
    """
    seen = np.clip(ink, 0, 1) > 0.45
    if theta is None:
        inside = np.nonzero(seen)[0]
        duty = seen[inside[0] : inside[-1] + 1].mean() if len(inside) else 1.0
        theta = 0.28 * float(duty)
    gain = np.where(known > 0.4, seen - theta, np.where(seen, 1 - theta, 0.0))
    total = np.r_[0.0, np.cumsum(gain)]
    lowest = np.minimum.accumulate(total)
    last = int((total - lowest).argmax())
    first = int(total[: last + 1].argmin())
    inside = np.nonzero(seen[first:last])[0]
    if not len(inside):
        return first, max(last - 1, first)
    return first + int(inside[0]), first + int(inside[-1])
