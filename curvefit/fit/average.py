"""Polynomials of several degrees through one traced line, and what they say together.

Each degree is fitted by generalised least squares under the line's noise. Degrees are weighted by
what predicts best (Akaike's criterion, corrected for small numbers, on whitened residuals); the
spread between them is the doubt about the equation and goes into the covariance.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.fit.choice import Settings
from curvefit.fit.noise import Noise, find_noise
from curvefit.fit.quantiles import t_two_sided
from curvefit.models import legendre, to_unit_range

__all__ = ["Average", "Member", "average", "held_terms"]

Array = NDArray[np.float64]

TOP = 6  #: the highest degree; all coefficients below are Legendre ones up to it


@dataclass(frozen=True, slots=True, eq=False)
class Member:
    """One degree: Legendre coefficients (7,), their covariance (7, 7) and its whitened fit.

    terms : (7, k) the columns that this degree may use; free : (k,) their coefficients;
    root : (k, k) upper triangle R with free covariance s²(RᵀR)⁻¹.
    """

    degree: int
    coefficients: Array
    covariance: Array
    criterion: float
    weight: float
    terms: Array
    free: Array
    root: Array


@dataclass(frozen=True, slots=True, eq=False)
class Average:
    """The weighted mean of the degrees, its covariance with the spread, the noise."""

    members: tuple[Member, ...]
    coefficients: Array
    covariance: Array
    noise: Noise
    low: float
    high: float

    @property
    def best(self) -> Member:
        """The degree with the largest weight."""
        return max(self.members, key=lambda m: m.weight)

    def basis(self, flow: Array) -> Array:
        """Legendre columns at flows (n,): shape (n, 7)."""
        return legendre(to_unit_range(flow, self.low, self.high), TOP)


def average(
    flow: Array,
    value: Array,
    u: Array,
    degrees: tuple[int, ...],
    settings: Settings,
    without: tuple[int, ...] = (),
    noise: Noise | None = None,
) -> Average:
    """The fits of several degrees to a thinned line and their average.

    Parameters
    ----------
    flow, value, u : (m,) strictly increasing flows, values, uncertainties of the line alone
    degrees : ascending
    without : powers of Q held at zero
    noise : if already known
    """
    low, high = float(flow[0]), float(flow[-1])
    t = (flow - low) / (high - low)
    design = legendre(2.0 * t - 1.0, TOP)
    top = degrees[-1]
    if noise is None:
        noise = find_noise(t, value, u, design[:, : top + 1], settings)
    white, target = noise.whiten(design), noise.whiten(value)
    fitted = [
        _member(white, target, degree, held_terms(low, high, degree, without), noise, len(flow))
        for degree in degrees
    ]
    criteria = np.array([m.criterion for m in fitted])
    weights = np.exp(-0.5 * (criteria - criteria.min()))
    weights /= weights.sum()
    members = tuple(
        Member(
            m.degree, m.coefficients, m.covariance, m.criterion, float(w), m.terms, m.free, m.root
        )
        for m, w in zip(fitted, weights, strict=True)
    )
    centre = np.sum([m.weight * m.coefficients for m in members], axis=0)
    covariance = np.sum(
        [
            m.weight * (m.covariance + np.outer(m.coefficients - centre, m.coefficients - centre))
            for m in members
        ],
        axis=0,
    )
    return Average(members, centre, covariance, noise, low, high)


def held_terms(low: float, high: float, degree: int, without: tuple[int, ...]) -> Array:
    """The Legendre columns (7, k) that span the powers of Q up to `degree` but those held."""
    kept = [e for e in range(degree + 1) if e not in without]
    if len(kept) == degree + 1:
        return np.eye(TOP + 1)[:, : degree + 1]
    scale = max(abs(low), abs(high))
    line = np.array([(low + high) / 2.0, (high - low) / 2.0]) / scale
    columns = np.zeros((TOP + 1, len(kept)))
    for j, e in enumerate(kept):
        raised = np.polynomial.polynomial.polypow(line, e) if e else np.ones(1)
        leg = np.polynomial.legendre.poly2leg(raised)
        columns[: len(leg), j] = leg
    return columns


def _member(white: Array, target: Array, degree: int, terms: Array, noise: Noise, m: int) -> Member:
    q, root = np.linalg.qr(white @ terms)
    free = np.linalg.solve(root, q.T @ target)
    residual = target - white @ (terms @ free)
    inverse = np.linalg.inv(root)
    freedom = max(noise.effective, 10.0) - terms.shape[1]
    widen = t_two_sided(0.95, round(max(freedom, 2.0), 1)) / 1.959964
    spread = noise.scale * widen * (terms @ inverse)
    k = terms.shape[1] + 1
    floor = np.finfo(float).tiny
    criterion = m * np.log(max(float(residual @ residual), floor) / m) + 2 * k
    criterion += 2 * k * (k + 1) / max(m - k - 1, 1e-3)
    return Member(degree, terms @ free, spread @ spread.T, float(criterion), 0.0, terms, free, root)
