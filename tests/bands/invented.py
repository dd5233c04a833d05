"""Invented curves of pumps that are no polynomials, traced with errors of known size."""

from dataclasses import dataclass

import numpy as np

from curvefit.records import Curve

KERNELS = {
    "exponential": lambda d: np.exp(-d),
    "matern": lambda d: (1 + np.sqrt(3) * d) * np.exp(-np.sqrt(3) * d),
    "smooth": lambda d: np.exp(-(d**2) / 2),
}


@dataclass(frozen=True)
class Invented:
    """A traced curve and its true values; span: the length of its value axis."""

    curve: Curve
    true: np.ndarray
    span: float


def truth(quantity, x, rng):
    """True values at flows x (1 is the best point): losses, leakage and shock, no polynomial."""
    if quantity == "head":
        droop = rng.uniform(0, 0.05) if rng.random() < 0.25 else 0.0
        fall = rng.uniform(0.2, 0.4) * x ** rng.uniform(1.6, 2.6)
        return 1.2 - fall - droop * np.exp(-x / rng.uniform(0.15, 0.4))
    if quantity == "efficiency":
        top, edge = rng.uniform(0.5, 0.85), rng.uniform(1.5, 1.9)
        rise = 1 - (1 - np.minimum(x / edge, 0.999)) ** rng.uniform(1.8, 2.4)
        return top * rise * (1 - rng.uniform(0.15, 0.3) * x ** rng.uniform(2.2, 3.2))
    if quantity == "shaft_power":
        lift = rng.uniform(0.4, 0.6) + rng.uniform(0.4, 0.6) * x ** rng.uniform(0.85, 1.0)
        return lift - rng.uniform(0.03, 0.1) * x ** rng.uniform(2.0, 3.0)
    return 0.3 + rng.uniform(0.1, 0.3) * x**2 + 0.03 * np.exp(rng.uniform(1.6, 2.4) * x)


#: noise is drawn from a bank of a few lengths, since a kernel of 600 pixels takes a while to root
LENGTHS = (3.0, 8.0, 20.0)


class Bank:
    """Roots of the kernels, made once."""

    def __init__(self, n):
        distance = np.abs(np.subtract.outer(np.arange(n), np.arange(n)))
        self.roots = [
            np.linalg.cholesky(kernel(distance / length) + 1e-8 * np.eye(n))
            for kernel in KERNELS.values()
            for length in LENGTHS
        ]

    def draw(self, rng):
        root = self.roots[rng.integers(len(self.roots))]
        return root @ rng.standard_normal(len(root))


def invent(quantity, rng, bank, trace=2e-4, calibration=6e-4):
    """One curve: trace noise and axis errors with the given sizes, as shares of the axis."""
    n = len(bank.roots[0])
    low = 0.0 if rng.random() < 0.5 else rng.uniform(0.05, 0.3)
    x = np.linspace(low, rng.uniform(1.15, 1.4), n)
    true = truth(quantity, x, rng)
    flow_axis, span = 1.5, 1.15 * float(true.max())
    u = trace * span * rng.uniform(0.7, 1.5)  # the stated uncertainty is right to that
    stated = np.full(n, trace * span)
    along, up = x / flow_axis, true / span
    slope = np.gradient(true, x)
    causes = calibration * np.stack(
        [
            -slope * flow_axis * (1 - along),
            -slope * flow_axis * along,
            span * (1 - up),
            span * up,
        ],
        axis=1,
    )
    value = true + u * bank.draw(rng) + causes @ rng.standard_normal(4)
    flags = np.zeros(n, np.uint8)
    if rng.random() < 0.25:  # a gap carried over by a straight line, and known to be one
        start, size = int(rng.integers(60, n - 160)), int(rng.integers(20, 60))
        gap = slice(start, start + size)
        value[gap] = np.interp(x[gap], x[[start, start + size]], value[[start, start + size]])
        sag = np.abs(np.gradient(slope, x)).max() * (x[start + size] - x[start]) ** 2 / 8
        stated[gap] += sag
        flags[gap] = 1
    sigma = np.sqrt(stated**2 + (causes**2).sum(1))
    curve = Curve(
        quantity,
        quantity,
        x / 100,
        value,
        "m3/h",
        "m",
        sigma_si=sigma,
        trace_sigma_si=stated,
        calibration_si=causes,
        flags=flags,
    )
    return Invented(curve, true, span)
