"""One model for all impeller diameters and speeds of a quantity: affinity laws, made to fit.

Curve k follows v = S(λₖ)·e^βₖ·f(q / (λₖᵃ·e^αₖ)) with λ the ratio of its diameter or speed to the
largest one, the exponents fitted, and small own deviations αₖ, βₖ ~ N(0, τ²) of each curve, since
no real family obeys a law exactly. τ is not known: the result is a mixture over a grid of it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.fit.quantiles import t_two_sided
from curvefit.models import plain_from_legendre

__all__ = ["Joint", "Line", "Solution", "centre", "coefficients_at", "fit_joint", "predict"]

Array = NDArray[np.float64]

#: deviations of a curve from the law that are tried, and where their prior falls off
TAUS = np.geomspace(2e-4, 0.05, 8)
PRIOR_TAU = 0.005


@dataclass(frozen=True, slots=True, eq=False)
class Line:
    """One thinned curve: log ratios (j,) of its diameter and/or speed to the reference.

    whitener : (m, m) inverse of the root of the trace covariance: it makes errors independent and
    of size one; calibration : (m, c) common causes.
    """

    logs: Array
    flow: Array
    value: Array
    whitener: Array
    calibration: Array


@dataclass(frozen=True, slots=True, eq=False)
class Solution:
    """The model at one τ: parameters, covariance root (p, p), response to the common causes.

    parameters : coefficients of f, then flow exponents, value exponents, then α and β by curve.
    """

    tau: float
    weight: float
    parameters: Array
    root: Array
    response: Array


@dataclass(frozen=True, slots=True, eq=False)
class Joint:
    """The family's model as a mixture; `linear` scales the value by 1 − c(1 − λ) (efficiency)."""

    solutions: tuple[Solution, ...]
    degree: int
    low: float
    high: float
    ratios: int
    lines: int
    linear: bool

    @property
    def exponents(self) -> tuple[Array, Array]:
        """Flow exponents then value exponents, (2j,), and their standard uncertainties."""
        at = slice(self.degree + 1, self.degree + 1 + 2 * self.ratios)
        weights = np.array([s.weight for s in self.solutions])
        values = np.stack([s.parameters[at] for s in self.solutions])
        mean = weights @ values
        own = np.stack(
            [(s.root[at] ** 2).sum(1) + (s.response[at] ** 2).sum(1) for s in self.solutions]
        )
        return mean, np.sqrt(weights @ (own + (values - mean) ** 2))

    @property
    def tau(self) -> float:
        """How far a curve departs from the law, weighted over the mixture."""
        return float(sum(s.weight * s.tau for s in self.solutions))


def fit_joint(
    lines: Sequence[Line],
    degree: int,
    start: tuple[Array, Array],
    linear: bool = False,
    taus: Array = TAUS,
) -> Joint:
    """The model fitted to all curves at once.

    Parameters
    ----------
    lines : at least two, of different ratios
    degree : of f
    start : flow and value exponents to start from, (j,) each
    linear : the value scales by 1 − c(1 − λ) instead of λᵇ

    Notes
    -----
    At each τ: Gauss–Newton steps to the mode; the mixture weighs each by its marginal likelihood
    (Laplace) times a half-Cauchy prior of τ.
    """
    ratios = len(start[0])
    scaled = [line.flow * np.exp(-line.logs @ start[0]) for line in lines]
    low, high = min(s.min() for s in scaled), max(s.max() for s in scaled)
    joint = Joint((), degree, float(low), float(high), ratios, len(lines), linear)
    p = degree + 1 + 2 * ratios + 2 * len(lines)
    parameters = np.zeros(p)
    parameters[degree + 1 : degree + 1 + 2 * ratios] = np.concatenate(start)
    parameters[: degree + 1] = _first_shape(joint, lines, parameters)
    found = []
    for tau in taus[::-1]:
        parameters, triangle, squares = _settle(joint, lines, parameters, tau)
        inverse = np.asarray(np.linalg.inv(triangle), float)
        deviations = parameters[degree + 1 + 2 * ratios :]
        evidence = -0.5 * (squares + np.sum(deviations**2) / tau**2)
        evidence -= len(deviations) * np.log(tau) + np.log(np.abs(np.diag(triangle))).sum()
        evidence += np.log(tau) - np.log1p((tau / PRIOR_TAU) ** 2)
        response = _response(joint, lines, parameters, inverse)
        found.append((float(evidence), Solution(tau, 0.0, parameters, inverse, response)))
    top = max(e for e, _ in found)
    weights = np.exp([e - top for e, _ in found])
    weights /= weights.sum()
    solutions = tuple(
        Solution(s.tau, float(w), s.parameters, s.root, s.response)
        for (_, s), w in zip(found, weights, strict=True)
        if w > 1e-4
    )
    return Joint(solutions, degree, joint.low, joint.high, ratios, len(lines), linear)


def predict(
    joint: Joint, logs: Array, flow: Array, index: int | None = None
) -> tuple[Array, Array, Array]:
    """The curve at another diameter or speed, or at that of one of the lines.

    Parameters
    ----------
    logs : (j,) log ratios to the reference
    flow : (n,)
    index : of the line whose own deviation is known; None for a new curve.

    Returns
    -------
    value : (n,)
    factors : (m, n) independent causes: the fit, the exponents, the curve's own deviation
    common : (c, n) the causes common to all curves (axes)
    """
    weights = np.array([s.weight for s in joint.solutions])
    weights = weights / weights.sum()
    # few curves tell τ poorly: Student's t in place of the normal quantile
    freedom = max(2, 2 * (joint.lines - joint.ratios))
    widen = t_two_sided(0.95, float(freedom)) / 1.959964
    rows, centres, common = [], [], []
    for solution, weight in zip(joint.solutions, weights, strict=True):
        value, jacobian = _model(joint, solution.parameters, logs, flow, index)
        shared = jacobian.shape[1] - 2
        at = np.arange(shared)
        if index is not None:
            at = np.r_[at, shared + 2 * index, shared + 2 * index + 1]
        known = jacobian[:, : len(at)]
        own = (known @ solution.root[at]).T
        if index is None:
            own = np.concatenate([own, solution.tau * jacobian[:, shared:].T])
        rows.append(np.sqrt(weight) * widen * own)
        common.append((known @ solution.response[at]).T)
        centres.append(value)
    middle = weights @ np.stack(centres)
    spread = [np.sqrt(w) * (c - middle)[None] for w, c in zip(weights, centres, strict=True)]
    stacked = np.concatenate([*rows, *spread])
    _, sizes, turned = np.linalg.svd(stacked, full_matrices=False)
    keep = sizes > 1e-6 * sizes[0] if len(sizes) and sizes[0] > 0 else sizes > 0
    factors = sizes[keep, None] * turned[keep]
    return middle, factors, np.asarray(np.tensordot(weights, np.stack(common), 1))


def centre(joint: Joint, logs: Array, flow: Array, index: int | None = None) -> Array:
    """The values (n,) alone that :func:`predict` gives."""
    weights = np.array([s.weight for s in joint.solutions])
    values = [_model(joint, s.parameters, logs, flow, index)[0] for s in joint.solutions]
    return np.asarray(weights @ np.stack(values) / weights.sum())


def coefficients_at(joint: Joint, logs: Array, index: int | None = None) -> Array:
    """Plain coefficients (degree + 1,) of what :func:`predict` gives."""
    matrix = plain_from_legendre(joint.low, joint.high, joint.degree)
    total = np.zeros(joint.degree + 1)
    for s in joint.solutions:
        a, b = _exponents(joint, s.parameters)
        plain = matrix @ s.parameters[: joint.degree + 1]
        alpha, beta = _own(joint, s.parameters, index)
        flow_scale = np.exp(logs @ a + alpha)
        value_scale = _value_scale(joint, logs, b) * np.exp(beta)
        total += s.weight * value_scale * plain * flow_scale ** -np.arange(len(plain), dtype=float)
    return total / sum(s.weight for s in joint.solutions)


# --- the model --------------------------------------------------------------------------------


def _exponents(joint: Joint, parameters: Array) -> tuple[Array, Array]:
    k, j = joint.degree + 1, joint.ratios
    return parameters[k : k + j], parameters[k + j : k + 2 * j]


def _own(joint: Joint, parameters: Array, index: int | None) -> tuple[float, float]:
    """The own deviations α, β of a line; zero for a new curve."""
    if index is None:
        return 0.0, 0.0
    at = joint.degree + 1 + 2 * joint.ratios + 2 * index
    return float(parameters[at]), float(parameters[at + 1])


def _value_scale(joint: Joint, logs: Array, exponents: Array) -> float:
    if joint.linear:
        return float(1.0 - (1.0 - np.exp(logs)) @ exponents)
    return float(np.exp(logs @ exponents))


def _model(
    joint: Joint, parameters: Array, logs: Array, flow: Array, index: int | None
) -> tuple[Array, Array]:
    """Values (n,) and derivatives (n, k + 2j + 2): f, exponents, then α and β of this curve."""
    k, j = joint.degree + 1, joint.ratios
    a, b = _exponents(joint, parameters)
    alpha, beta = _own(joint, parameters, index)
    x = flow * np.exp(-logs @ a - alpha)
    span = joint.high - joint.low
    t = (2.0 * x - joint.low - joint.high) / span
    basis = np.polynomial.legendre.legvander(t, joint.degree)
    shape = parameters[:k]
    slope = basis[:, :-1] @ np.polynomial.legendre.legder(shape) * 2.0 / span
    own = np.exp(beta)
    scale = _value_scale(joint, logs, b) * own
    value = scale * (basis @ shape)
    along = -scale * slope * x
    jacobian = np.empty((len(flow), k + 2 * j + 2))
    jacobian[:, :k] = scale * basis
    jacobian[:, k : k + j] = along[:, None] * logs
    if joint.linear:
        jacobian[:, k + j : k + 2 * j] = -(own * (basis @ shape))[:, None] * (1 - np.exp(logs))
    else:
        jacobian[:, k + j : k + 2 * j] = value[:, None] * logs
    jacobian[:, -2], jacobian[:, -1] = along, value
    return value, jacobian


def _first_shape(joint: Joint, lines: Sequence[Line], parameters: Array) -> Array:
    """Coefficients of f by linear least squares at the exponents to start from."""
    rows, targets = [], []
    for line in lines:
        _, jacobian = _model(joint, parameters, line.logs, line.flow, None)
        size = float(np.abs(line.value).max())
        rows.append(jacobian[:, : joint.degree + 1] / size)
        targets.append(line.value / size)
    solved, *_ = np.linalg.lstsq(np.concatenate(rows), np.concatenate(targets), rcond=None)
    return np.asarray(solved)


def _system(
    joint: Joint, lines: Sequence[Line], parameters: Array, tau: float
) -> tuple[Array, Array]:
    """Whitened derivatives and residuals of all curves, then the rows of the prior."""
    k, j = joint.degree + 1, joint.ratios
    shared, p = k + 2 * j, len(parameters)
    rows = []
    for i, line in enumerate(lines):
        value, jacobian = _model(joint, parameters, line.logs, line.flow, i)
        white = line.whitener @ np.concatenate([jacobian, (line.value - value)[:, None]], axis=1)
        full = np.zeros((len(line.flow), p + 1))
        full[:, :shared] = white[:, :shared]
        full[:, shared + 2 * i : shared + 2 * i + 2] = white[:, shared : shared + 2]
        full[:, -1] = white[:, -1]
        rows.append(full)
    prior = np.zeros((p - shared, p + 1))
    prior[:, shared:p] = np.eye(p - shared) / tau
    prior[:, -1] = -parameters[shared:] / tau
    stacked = np.concatenate([*rows, prior])
    return stacked[:, :p], stacked[:, p]


def _settle(
    joint: Joint, lines: Sequence[Line], parameters: Array, tau: float
) -> tuple[Array, Array, float]:
    """Mode at one τ, the triangle R of its curvature RᵀR, squared residuals of the curves."""
    jacobian, residual = _system(joint, lines, parameters, tau)
    squares = float(residual @ residual)
    for _ in range(25):
        q, triangle = np.linalg.qr(jacobian)
        step = np.linalg.solve(triangle, q.T @ residual)
        size = 1.0
        while True:
            trial = parameters + size * step
            jacobian, residual = _system(joint, lines, trial, tau)
            new = float(residual @ residual)
            if new <= squares or size < 1e-3:
                break
            size /= 2.0
        gain, squares, parameters = squares - new, new, trial
        if gain < 1e-4:
            break
    curvature = np.asarray(np.linalg.qr(jacobian, mode="r"))
    deviations = parameters[joint.degree + 1 + 2 * joint.ratios :]
    return parameters, curvature, squares - float(np.sum(deviations**2)) / tau**2


def _response(joint: Joint, lines: Sequence[Line], parameters: Array, inverse: Array) -> Array:
    """Change of the parameters (p, c) for one deviation of each common cause of the curves."""
    k, j = joint.degree + 1, joint.ratios
    shared = k + 2 * j
    pull = np.zeros((len(parameters), lines[0].calibration.shape[1]))
    for i, line in enumerate(lines):
        _, jacobian = _model(joint, parameters, line.logs, line.flow, i)
        white = line.whitener @ np.concatenate([jacobian, line.calibration], axis=1)
        part = white[:, : shared + 2].T @ white[:, shared + 2 :]
        pull[:shared] += part[:shared]
        pull[shared + 2 * i : shared + 2 * i + 2] += part[shared:]
    return np.asarray(inverse @ (inverse.T @ pull))
