"""Lines that sag on a curled page: the bend that makes them straight."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import Warp

__all__ = ["bent", "quarter", "sag"]

Array = NDArray[np.float64]

MOST = 0.05  #: of the box's side that a bend may move a point

_POWERS = [(i, j) for i in range(4) for j in range(4 - i)]  # of Warp.terms


def bent(warp: Warp, across: Sequence[Array], upright: Sequence[Array], bow: float) -> Warp:
    """The warp with the bend that sets the lines of the box straight.

    Parameters
    ----------
    across, upright : sequences of arrays (n, 2), page px
        Points along lines of the box; first and last are its sides (top and bottom, left and
        right).
    bow : lines that are straight to within this [px] leave the warp as it is.

    Notes
    -----
    A line along x stays at one height: y + Σ aᵢⱼ uⁱvʲ (i ≥ 1) = c, with one c a line, in least
    squares; likewise along y. Terms of v alone would move lines without bending them: only the
    sides fix those, linearly.
    """
    bend = np.zeros((len(_POWERS), 2))
    for axis, lines in ((1, across), (0, upright)):
        flat = [warp.to_panel(xy) for xy in lines]
        before = max((sag(p, axis) for p in flat), default=0.0)
        if before < bow or len(flat) < 2:
            continue
        column = _coefficients(flat, axis, warp.size)
        trial = np.zeros_like(bend)
        trial[:, axis] = column
        after = max(sag(Warp(warp.matrix, warp.size, trial).to_panel(xy), axis) for xy in lines)
        if after < 0.6 * before and _reach(column) < min(4 * before + 2, MOST * warp.size[axis]):
            bend[:, axis] = column
    return warp if not bend.any() else replace(warp, bend=bend)


def _reach(column: Array) -> float:
    """How far a bend moves any point of the box [px]: far more than lines sag, it is no page."""
    u, v = (g.ravel() for g in np.meshgrid(np.linspace(-1, 1, 9), np.linspace(-1, 1, 9)))
    return float(np.abs(Warp.terms(u, v) @ column).max())


def sag(xy: Array, axis: int) -> float:
    """How far a quadratic through points leaves its own chord [px]."""
    t, y = xy[:, 1 - axis], xy[:, axis]
    if len(t) < 12:
        return 0.0
    x = 2 * (t - t.min()) / max(float(np.ptp(t)), 1e-9) - 1
    return float(abs(np.polynomial.legendre.legfit(x, y, 3)[2:]).max() * 1.5)


def _coefficients(flat: list[Array], axis: int, size: tuple[float, float]) -> Array:
    """Bend coefficients (10,) of one coordinate."""
    xy = np.vstack(flat)
    line = np.repeat(np.arange(len(flat)), [len(p) for p in flat])
    terms = Warp.terms(2 * xy[:, 0] / size[0] - 1, 2 * xy[:, 1] / size[1] - 1)
    bending = [k for k, power in enumerate(_POWERS) if power[1 - axis] >= 1]
    design = np.c_[terms[:, bending], -np.eye(len(flat))[line]]
    weight = np.ones(len(xy))
    for _ in range(5):
        root = np.sqrt(weight)[:, None]
        solved = np.linalg.lstsq(design * root, -xy[:, axis] * root[:, 0], rcond=None)[0]
        off = np.abs(design @ solved + xy[:, axis])
        weight = 1 / (1 + (off / max(2 * float(np.median(off)), 0.1)) ** 2)
    places = solved[len(bending) :]
    low, high = float(places[0]), float(places[-1])
    span = size[axis]
    k = span / (high - low)
    out = np.zeros(len(_POWERS))
    out[bending] = k * solved[: len(bending)]
    out[_POWERS.index((0, 0))] += (k - 1) * span / 2 - k * low
    out[_POWERS.index((1, 0) if axis == 0 else (0, 1))] += (k - 1) * span / 2
    return out


def quarter(warp: Warp) -> Warp:
    """The warp of the same box turned a quarter clockwise: (x, y) becomes (h − y, x)."""
    w, h = warp.size
    turn = np.array([[0, -1, h], [1, 0, 0], [0, 0, 1]], float)
    bend = None
    if warp.bend is not None:
        bend = np.zeros_like(warp.bend)
        for (i, j), (px, py) in zip(_POWERS, warp.bend, strict=True):
            bend[_POWERS.index((j, i))] = (-1) ** j * np.array([-py, px])
    return Warp(turn @ warp.matrix, (h, w), bend)
