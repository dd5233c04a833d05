"""Pump physics in pure SI: flow m³/s, head m, power W, speed 1/s, density kg/m³.

Efficiency is a fraction. Nothing here knows of charts or fits.
"""

from __future__ import annotations

from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from curvefit.units import G_N, RHO_WATER

__all__ = [
    "NQ_TO_TYPE_NUMBER",
    "NQ_TO_US",
    "at_speed_ratio",
    "efficiency",
    "hydraulic_power",
    "npsh_available",
    "shaft_power",
    "specific_speed",
    "suction_specific_speed",
    "type_number",
    "us_specific_speed",
]

T = TypeVar("T", float, NDArray[np.float64])

_US_GALLON = 231 * 0.0254**3
_FOOT = 0.3048

#: US specific speed (1/min, US gpm, ft) over the metric one (1/min, m³/s, m)
NQ_TO_US: float = (60.0 / _US_GALLON) ** 0.5 * _FOOT**0.75
#: type number over the metric specific speed: 2π/60 · g^(−3/4)
NQ_TO_TYPE_NUMBER: float = 2.0 * np.pi / 60.0 / G_N**0.75


def hydraulic_power(flow: T, head: T, density: float = RHO_WATER) -> T:
    """Power given to the liquid [W], P = ρ·g·Q·H.

    Examples
    --------
    >>> round(hydraulic_power(100 / 3600, 32.0, 998.20715) / 0.75, 3)  # over η: shaft power
    11601.859
    """
    return density * G_N * flow * head


def shaft_power(flow: T, head: T, efficiency: T, density: float = RHO_WATER) -> T:
    """Power at the pump's shaft [W], P = ρ·g·Q·H / η."""
    return hydraulic_power(flow, head, density) / efficiency


def efficiency(flow: T, head: T, power: T, density: float = RHO_WATER) -> T:
    """Pump efficiency, η = ρ·g·Q·H / P with the shaft power P."""
    return hydraulic_power(flow, head, density) / power


def at_speed_ratio(flow: T, head: T, power: T, ratio: float) -> tuple[T, T, T]:
    """Flow, head and power of the same operating point at another speed.

    Parameters
    ----------
    flow, head, power : SI, at the charted speed
    ratio : new speed over charted speed

    Notes
    -----
    Affinity laws: Q ∝ n, H ∝ n², P ∝ n³, with the efficiency unchanged. They hold well within
    about half to one and a half times the speed, for liquids as thin as water.
    """
    return flow * ratio, head * ratio**2, power * ratio**3


def specific_speed(speed: float, flow: float, head: float) -> float:
    """Metric specific speed n_q = n·√Q / H^(3/4), n in 1/min, Q in m³/s, H in m.

    Parameters
    ----------
    speed : [1/s]
    flow : total flow at the best efficiency point of the largest impeller [m³/s]
    head : head per stage there [m]

    Notes
    -----
    The flow is the whole flow of the pump, also with two suction sides.

    Examples
    --------
    >>> round(specific_speed(2900 / 60, 0.05, 40.0), 3)
    40.769
    """
    return float(speed * 60.0 * flow**0.5 / head**0.75)


def us_specific_speed(speed: float, flow: float, head: float) -> float:
    """US specific speed N_s, of 1/min, US gpm and ft; see :func:`specific_speed`."""
    return specific_speed(speed, flow, head) * NQ_TO_US


def type_number(speed: float, flow: float, head: float) -> float:
    """Type number K = 2π·n·√Q / (g·H)^(3/4), without dimension.

    References
    ----------
    ISO 9906:2012, definition of the type number.
    """
    return specific_speed(speed, flow, head) * NQ_TO_TYPE_NUMBER


def suction_specific_speed(speed: float, flow_per_eye: float, npsh_required: float) -> float:
    """Metric suction specific speed n_ss = n·√Q / NPSHr^(3/4) with the flow of one impeller eye.

    Parameters
    ----------
    speed : [1/s]
    flow_per_eye : total flow at the best efficiency point over the number of suction sides [m³/s]
    npsh_required : NPSH3 there [m]

    Notes
    -----
    Times :data:`NQ_TO_US` it is the US value.
    """
    return specific_speed(speed, flow_per_eye, npsh_required)


def npsh_available(
    pressure: T, level: T, losses: T, vapour_pressure: float, density: float = RHO_WATER
) -> T:
    """NPSH available [m] at the pump's suction.

    Parameters
    ----------
    pressure : absolute pressure on the surface of the suction vessel [Pa]
    level : height of that surface above the pump's reference plane [m], negative below
    losses : of head in the suction line [m]
    vapour_pressure : of the liquid [Pa]
    density : [kg/m³]

    Notes
    -----
    NPSHA = (p − p_v)/(ρ·g) + z − h_loss.
    """
    return (pressure - vapour_pressure) / (density * G_N) + level - losses
