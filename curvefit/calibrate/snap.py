"""A progression of numbers → the scale that rests on the drawn ticks, with its covariance."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.consensus import Progression
from curvefit.calibrate.evidence import TickRow

__all__ = ["Scale", "Settings", "ends_covariance", "line_through", "snap"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Settings:
    """floor, exact_floor : standard uncertainty of each end of a scale that no scatter of its
    ticks can show (lines drawn on whole pixels, a bow of the paper) [px].
    reach : how far ticks may lie from where the numbers put them [heights of the type].
    near : a tick within this of its place on the scale is that tick [px].
    share : a row of ticks counts where this share of the numbered places has one.
    """

    floor: float = 0.35
    exact_floor: float = 0.02
    reach: float = 0.6
    near: float = 1.6
    share: float = 0.7
    label_scatter: float = 0.15


@dataclass(frozen=True, slots=True, eq=False)
class Scale:
    """f(value) = offset + slope·t along the side, with the ticks that it rests on.

    values, at, u : the places used, u in fractions. share : of the numbered places with a tick.
    rms : of the ticks about the scale [px]. shift : of the numbers from the ticks, scatter about
    it [heights of the type]. kind : of the row of ticks, "" where there are none.
    """

    log: bool
    offset: float
    slope: float
    covariance: Array
    values: Array
    at: Array
    u: Array
    share: float
    rms: float
    shift: float
    scatter: float
    kind: str

    def place(self, value: Array) -> Array:
        """Fractions of the side at values."""
        v = np.asarray(value, float)
        return np.asarray(((np.log10(v) if self.log else v) - self.offset) / self.slope)


def snap(
    p: Progression,
    rows: Sequence[TickRow],
    side_px: float,
    *,
    exact: bool = False,
    demanding: bool = False,
    settings: Settings | None = None,
) -> Scale:
    """The scale with its numbers moved onto the drawn ticks.

    Parameters
    ----------
    p : Progression
    rows : TickRow of this side; a row that does not fit the numbers is passed over.
    side_px : length of the side [px].
    exact : ticks of a vector page.
    demanding : grid lines belong to another scale unless every one of them fits.
    """
    s = settings or Settings()
    size = float(np.median([lb.size for lb in p.labels]))
    values = p.lattice(-0.02, 1.02)
    best: tuple[float, str, Array, Array, Array] | None = None
    for kind, at, u, weight in _candidates(rows, s.near / side_px):
        found = _matched(p, values, at, weight, size, side_px, s)
        if found is None:
            continue
        score, index, pick = found
        share = _share(p, values, index)
        if share < s.share or (demanding and kind == "grid" and share < 0.999):
            continue
        score += 0.05 * (kind != "grid")
        if best is None or score > best[0]:
            best = (score, kind, values[index], at[pick], u[pick])
    if best is None:
        alone = _from_labels(p, side_px, size, exact, s)
        return _on_ends(p, rows, alone, side_px, size, exact, s) or alone
    _, kind, vs, at, u = best
    return _fitted(p, vs, at, u, side_px, size, kind, exact, s)


def _on_ends(
    p: Progression,
    rows: Sequence[TickRow],
    alone: Scale,
    side_px: float,
    size: float,
    exact: bool,
    s: Settings,
) -> Scale | None:
    """The scale from corner to corner of the box, where the numbers say that it ends there.

    Few faint ticks remain on a bad copy, but a box mostly ends on numbers of its scale: taken if
    both corners lie at a number within what the numbers allow.
    """
    ends = [r for r in rows if r.kind == "end" and len(r.at) == 2]
    values = p.lattice(-0.5 * size, 1 + 0.5 * size)
    if not ends or p.exact < 4 or len(values) < 2 or alone.scatter > 0.3:
        return None
    places = alone.place(values)
    k = [int(np.argmin(np.abs(places - t))) for t in ends[0].at]
    if max(abs(places[i] - t) for i, t in zip(k, ends[0].at, strict=True)) > 0.3 * size:
        return None
    off = _contradicted(values, places, rows, size, side_px)
    u = np.hypot(ends[0].u, np.hypot(0.5, off) / side_px)
    found = _fitted(p, values[k], ends[0].at, u, side_px, size, "end", exact, s)
    return replace(found, rms=max(found.rms, off))


def _contradicted(
    values: Array, places: Array, rows: Sequence[TickRow], size: float, side_px: float
) -> float:
    """How far [px, largest] a row of ticks lies off the numbered places that it must belong to."""
    worst = 0.0
    for row in rows:
        if row.kind == "end" or row.offset or len(row.at) < 3:
            continue
        off = np.array([row.at[np.argmin(np.abs(row.at - t))] - t for t in places])
        mine = np.abs(off) < 0.6 * size
        if mine.sum() >= max(3, 0.7 * len(values)):
            worst = max(worst, float(np.abs(off[mine]).max()) * side_px)
    return worst


def _candidates(rows: Sequence[TickRow], close: float) -> list[tuple[str, Array, Array, Array]]:
    """The rows that can carry a scale: each alone and with the corners of the box."""
    ends = [r for r in rows if r.kind == "end"]
    out: list[tuple[str, Array, Array, Array]] = []
    for row in rows:
        if row.kind == "end" or len(row.at) < 1:
            continue
        at, u, w = row.at, row.u, row.weight
        if not row.offset:
            for e in ends:  # a line in the corner is hidden in the side of the box
                new = [not len(at) or np.abs(at - x).min() > 4 * close for x in e.at]
                at, u, w = np.r_[at, e.at[new]], np.r_[u, e.u[new]], np.r_[w, e.weight[new]]
        order = np.argsort(at, kind="stable")
        out.append((row.kind, at[order], u[order], w[order]))
    for e in ends:
        out.append(("end", e.at, e.u, e.weight))
    return out


def _matched(
    p: Progression,
    values: Array,
    at: Array,
    weight: Array,
    size: float,
    side_px: float,
    s: Settings,
) -> tuple[float, NDArray[np.int64], NDArray[np.int64]] | None:
    """(score, lattice indices, tick indices) of the best way to lay the numbers on the ticks."""
    places = p.place(values)
    if len(places) < 2:
        return None
    reach = s.reach * size
    at_label, label_value = _labelled(p)
    span = np.ptp(places)
    best: tuple[float, NDArray[np.int64], NDArray[np.int64]] | None = None
    near = [np.flatnonzero(np.abs(at - x) < reach) for x in places]
    f = np.log10(values) if p.log else values
    tolerance = s.near / side_px
    for i in range(len(places)):
        for j in range(i + 1, len(places)):
            if abs(places[j] - places[i]) < 0.45 * span:
                continue
            for m in near[i]:
                for n in near[j]:
                    beta = (at[n] - at[m]) / (f[j] - f[i])
                    if beta * p.b <= 0:
                        continue
                    t = at[m] + beta * (f - f[i])
                    k = np.clip(np.searchsorted(at, t), 1, max(len(at) - 1, 1))
                    k = np.where(
                        (k >= len(at))
                        | (np.abs(at[k - 1] - t) < np.abs(at[np.minimum(k, len(at) - 1)] - t)),
                        k - 1,
                        k,
                    )
                    off = np.abs(at[k] - t)
                    hit = off < tolerance
                    lab = at[m] + beta * (label_value - f[i])
                    shift = (at_label - lab) / size
                    middle = float(np.median(shift))
                    score = float(
                        ((0.5 + 0.5 * weight[k]) * (1 - (off / tolerance) ** 2))[hit].sum()
                    )
                    score -= 0.5 * (middle / 0.2) ** 2 * 0.3
                    score -= float(np.clip(((shift - middle) / 0.25) ** 2, 0, 4).mean())
                    if best is None or score > best[0] + 1e-9:
                        best = (score, np.flatnonzero(hit), k[hit])
    return best


def _labelled(p: Progression) -> tuple[Array, Array]:
    """Places and f(value) of the labels that agree."""
    pairs = [
        (lb.at, r.value)
        for lb, r in zip(p.labels, p.chosen, strict=True)
        if r is not None and lb.firm
    ] or [(lb.at, r.value) for lb, r in zip(p.labels, p.chosen, strict=True) if r is not None]
    at, value = np.array(pairs, float).T
    return at, np.log10(value) if p.log else value


def _share(p: Progression, values: Array, index: NDArray[np.int64]) -> float:
    """Share of the numbered places that a tick was found at."""
    numbered = {round(r.value, 9) for r in p.chosen if r is not None}
    wanted = (
        [k for k, v in enumerate(values) if round(float(v), 9) in numbered]
        if p.log
        else (list(range(len(values))))
    )
    if not wanted:
        return 0.0
    return len(set(wanted) & set(index.tolist())) / len(wanted)


def line_through(f: Array, at: Array, u: Array) -> tuple[float, float, Array]:
    """(offset, slope, covariance) of f = offset + slope·t through places with uncertainty u.

    Notes
    -----
    The places are uncertain, not the values: t = α + β f is fitted by weighted least squares,
    then offset = −α/β, slope = 1/β, and the covariance follows by propagation.
    """
    w = 1 / u
    design = np.c_[w, w * f]
    cov = np.linalg.inv(design.T @ design)
    alpha, beta = cov @ design.T @ (w * at)
    jac = np.array([[-1 / beta, alpha / beta**2], [0.0, -1 / beta**2]])
    return -alpha / beta, 1 / beta, jac @ cov @ jac.T


def _fitted(
    p: Progression,
    values: Array,
    at: Array,
    u: Array,
    side_px: float,
    size: float,
    kind: str,
    exact: bool,
    s: Settings,
) -> Scale:
    """Least squares on the ticks, those far off left out."""
    f = np.log10(values) if p.log else values
    least = (0.01 if exact else 0.05) / side_px
    u = np.maximum(u, least)
    keep = np.ones(len(f), bool)
    for limit in (2.0, 1.2, 1.0):
        offset, slope, cov = line_through(f[keep], at[keep], u[keep])
        off = np.abs((f - offset) / slope - at) * side_px
        better = off < limit
        if better.sum() >= max(2, 0.6 * len(f)):
            keep = better
    offset, slope, cov = line_through(f[keep], at[keep], u[keep])
    residual = ((f[keep] - offset) / slope - at[keep]) * side_px
    n = int(keep.sum())
    rms = float(np.sqrt((residual**2).sum() / max(n - 2, 1))) if n > 2 else 0.0
    expected = float(np.sqrt((u[keep] ** 2).mean())) * side_px
    cov = cov * max(1.0, (rms / expected) ** 2)
    cov = cov + ends_covariance(slope, (s.exact_floor if exact else s.floor) / side_px)
    at_label, label_value = _labelled(p)
    shift = (at_label - (label_value - offset) / slope) / size
    middle = float(np.median(shift))
    return Scale(
        p.log,
        float(offset),
        float(slope),
        cov,
        values[keep],
        at[keep],
        u[keep],
        _covered(p, values[keep]),
        rms,
        middle,
        float(np.sqrt(((shift - middle) ** 2).mean())),
        kind,
    )


def _covered(p: Progression, used: Array) -> float:
    values = p.lattice(0.0, 1.0)
    if p.log:
        numbered = {round(r.value, 9) for r in p.chosen if r is not None}
        values = np.array([v for v in values if round(float(v), 9) in numbered])
    if not len(values):
        return 1.0
    return float(np.mean([np.abs(used - v).min() < 1e-9 + 1e-6 * abs(v) for v in values]))


def ends_covariance(slope: float, u: float) -> Array:
    """Covariance of offset and slope from independent errors u (fractions) of the two ends."""
    variance = (slope * u) ** 2
    return variance * np.array([[1.0, -1.0], [-1.0, 2.0]])


def _from_labels(p: Progression, side_px: float, size: float, exact: bool, s: Settings) -> Scale:
    """The scale on the middles of the numbers alone."""
    at, f = _labelled(p)
    u = np.full(len(at), s.label_scatter * size)
    offset, slope, cov = line_through(f, at, u)
    # the numbers of a side may all stand a little to one side of their ticks
    cov = cov + (slope * s.label_scatter * size) ** 2 * np.array([[1.0, 0.0], [0.0, 0.0]])
    cov = cov + ends_covariance(slope, (s.exact_floor if exact else s.floor) / side_px)
    values = 10.0**f if p.log else f
    residual = ((f - offset) / slope - at) / size
    return Scale(
        p.log,
        float(offset),
        float(slope),
        cov,
        values,
        at,
        u,
        0.0,
        float(np.sqrt((residual**2).mean()) * size * side_px),
        0.0,
        float(np.sqrt((residual**2).mean())),
        "",
    )
