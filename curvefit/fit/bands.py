"""Bands about a fitted curve, each named for what it is."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from curvefit.fit.quantiles import f_quantile, normal_two_sided, t_two_sided

__all__ = ["multiplier", "spread", "sup_t", "working_hotelling"]

Array = NDArray[np.float64]


def spread(*factors: Array | None) -> Array:
    """Standard uncertainty at each grid flow, shape (n,), of independent causes (rows)."""
    return np.asarray(np.sqrt(sum(np.sum(f**2, axis=0) for f in factors if f is not None)))


def sup_t(factors: Array, confidence: float, rng: np.random.Generator, draws: int) -> float:
    """How many standard uncertainties hold the whole curve with the given confidence.

    Parameters
    ----------
    factors : (m, n) independent causes on the flow grid
    confidence : share of curves that lie inside everywhere
    rng : random generator
    draws : at least 1000

    Notes
    -----
    The quantile of max |error| / standard uncertainty over draws of the fitted covariance, on
    about 60 of the grid's flows. It lies between the pointwise and the Scheffé multiplier.
    """
    n = factors.shape[1]
    at = np.unique(np.linspace(0, n - 1, min(n, 61)).round().astype(int))
    rows = factors[:, at]
    sd = np.sqrt(np.sum(rows**2, axis=0))
    rows = rows / np.where(sd > 0, sd, 1.0)
    worst = np.abs(rng.standard_normal((draws, len(rows))) @ rows).max(axis=1)
    return max(float(np.quantile(worst, confidence)), normal_two_sided(confidence))


def working_hotelling(confidence: float, terms: int, freedom: int) -> float:
    """The multiplier W of the Working–Hotelling (Scheffé) band of a whole regression curve.

    Notes
    -----
    W² = p·F(confidence; p, n − p) for p coefficients and n − p degrees of freedom.

    References
    ----------
    Working & Hotelling (1929), *JASA* 24:73; Kutner, Nachtsheim, Neter & Li (2005), *Applied
    Linear Statistical Models*, sections 2.6 and 4.2.
    """
    return float(np.sqrt(terms * f_quantile(confidence, terms, freedom)))


def multiplier(kind: str, confidence: float, terms: int, freedom: int) -> float:
    """Multiplier of the standard error for measured points: t, or Working–Hotelling."""
    if kind == "simultaneous":
        return working_hotelling(confidence, terms, freedom)
    return t_two_sided(confidence, float(freedom))
