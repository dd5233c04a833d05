"""Quantiles of the distributions that bands need."""

from __future__ import annotations

from functools import lru_cache
from statistics import NormalDist

__all__ = ["chi_square", "f_quantile", "normal_two_sided", "t_two_sided"]


def normal_two_sided(confidence: float) -> float:
    """The z with P(|Z| < z) = confidence.

    Examples
    --------
    >>> round(normal_two_sided(0.95), 6)
    1.959964
    """
    return NormalDist().inv_cdf(0.5 + confidence / 2.0)


@lru_cache(maxsize=256)
def t_two_sided(confidence: float, freedom: float) -> float:
    """The t with P(|T| < t) = confidence for Student's t with so many degrees of freedom."""
    from scipy.special import stdtrit

    return float(stdtrit(freedom, 0.5 + confidence / 2.0))


def f_quantile(confidence: float, freedom: int, freedom_below: int) -> float:
    """The quantile of Fisher's F."""
    from scipy.special import fdtri

    return float(fdtri(freedom, freedom_below, confidence))


def chi_square(confidence: float, freedom: int) -> float:
    """The quantile of χ²."""
    from scipy.special import chdtri

    return float(chdtri(freedom, 1.0 - confidence))
