"""Power forms carried from one pair of units to another; polynomials: `models.rescale`."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

__all__ = ["rescaled_parameters"]

Array = NDArray[np.float64]


def rescaled_parameters(
    parameters: Mapping[str, float], covariance: Array | None, flow: float, value: float
) -> tuple[dict[str, float], Array | None]:
    """Parameters of a power form, c0 + c1·Qⁿ or H0 − a·Qⁿ, in other units; others as they are.

    Parameters
    ----------
    parameters : name → value in the old units
    covariance : (3, 3) or None
    flow, value : how many old units one new unit of flow and of value is

    Notes
    -----
    a′ = a·fⁿ/v, so that the covariance goes with the Jacobian, in which ∂a′/∂n = a′·ln f.
    """
    names = tuple(parameters)
    if names not in (("c0", "c1", "n"), ("H0", "a", "n")):
        return dict(parameters), covariance
    constant, factor, n = parameters.values()
    changed = (constant / value, factor * flow**n / value, n)
    if covariance is not None and covariance.shape == (3, 3):
        jacobian = np.diag([1 / value, flow**n / value, 1.0])
        jacobian[1, 2] = changed[1] * np.log(flow)
        covariance = jacobian @ covariance @ jacobian.T
    return dict(zip(names, changed, strict=True)), covariance
