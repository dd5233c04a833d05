"""A smooth line through scattered offsets: penalised B-spline, stiffness by cross-validation."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Smooth", "smooth"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Smooth:
    """value, sigma : (n,) at the given places; scatter: robust residual [same unit];
    weight : (n,) robust weights 0–1; freedom : effective number of parameters."""

    value: Array
    sigma: Array
    scatter: float
    weight: Array
    freedom: float


def smooth(s: Array, d: Array, weight: Array, spacing: float, apart: float = 3.0) -> Smooth:
    """The smooth line d(s) through the samples of non-zero weight.

    Parameters
    ----------
    s : (n,) increasing [px]; d : (n,) [px]; weight : (n,) 0–1.
    spacing : distance between knots [px].
    apart : samples closer than this along s are not independent of each other [px].

    Notes
    -----
    Cubic B-spline with third-difference penalty (Eilers & Marx 1996), Tukey's biweight, the
    penalty's weight by generalised cross-validation with n / apart samples.
    """
    basis = _basis(s, spacing)
    third = np.diff(np.eye(basis.shape[1]), 3, axis=0)
    penalty = third.T @ third
    step = max(float(np.median(np.diff(s))), 1e-6)
    share = min(step / apart, 1.0)  # independent samples a sample
    robust = weight.astype(float).copy()
    value = np.zeros_like(d)
    scatter = 0.1
    for turn in range(4):
        fit = _best(basis, penalty, robust, d, share)
        value = basis @ fit.coefficients
        if (robust > 0.05).sum() < 5:
            break
        residual = d - value
        known = residual[weight > 0.05]
        scatter = max(1.4826 * float(np.median(np.abs(known - np.median(known)))), 0.01)
        limit = 4.685 * scatter * (2.0 if turn < 2 else 1.0)
        robust = weight * np.clip(1.0 - (residual / limit) ** 2, 0, 1) ** 2
    sigma = np.sqrt((np.square(basis @ fit.root)).sum(1) / share)
    return Smooth(value, sigma * scatter, scatter, robust, fit.freedom)


@dataclass(frozen=True, slots=True, eq=False)
class _Fit:
    """root : R with covariance = R Rᵀ for unit scatter."""

    coefficients: Array
    root: Array
    freedom: float


def _basis(s: Array, spacing: float) -> Array:
    from scipy.interpolate import BSpline

    count = int(np.clip(round((s[-1] - s[0]) / spacing), 3, 90))
    inner = np.linspace(s[0], s[-1], count + 1)
    h = inner[1] - inner[0]
    knots = np.r_[inner[0] - h * np.arange(3, 0, -1), inner, inner[-1] + h * np.arange(1, 4)]
    return np.asarray(BSpline.design_matrix(np.clip(s, s[0], s[-1]), knots, 3).toarray())


def _best(basis: Array, penalty: Array, weight: Array, d: Array, share: float) -> _Fit:
    """The fit at the penalty weight that cross-validates best."""
    from scipy.linalg import eigh

    gram = (basis * weight[:, None]).T @ basis
    m = len(gram)
    if weight.sum() < 3.0:  # nothing to hold the line: it stays where it is
        return _Fit(np.zeros(m), 10.0 * np.eye(m), 0.0)
    n = max(weight.sum() * share, 6.0)
    scale = np.trace(gram) / m
    # one generalised eigen-decomposition serves every penalty weight
    values, vectors = eigh(penalty * scale, gram + 1e-9 * scale * np.eye(m))
    values = np.clip(values, 0, None)
    z = vectors.T @ (basis.T @ (weight * d))
    total = float((weight * d * d).sum())
    best: tuple[float, float] = (np.inf, 1.0)
    for stiffness in 10.0 ** np.linspace(-4, 9, 27):
        shrink = 1.0 / (1.0 + stiffness * values)
        freedom = float(shrink.sum())
        rss = max(total - float((z * z * (2 * shrink - shrink**2)).sum()), 1e-12)
        if freedom > 0.6 * n:
            continue
        score = rss / (1.0 - 1.1 * freedom / n) ** 2
        if score < best[0]:
            best = (score, float(stiffness))
    shrink = 1.0 / (1.0 + best[1] * values)
    return _Fit(vectors @ (shrink * z), vectors * np.sqrt(shrink), float(shrink.sum()))
