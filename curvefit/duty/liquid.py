"""The pumped liquid: water at a temperature from the IAPWS formulations, or stated properties."""

from __future__ import annotations

from dataclasses import dataclass

from curvefit.errors import InputError

__all__ = ["Liquid", "atmosphere", "water"]


@dataclass(frozen=True, slots=True)
class Liquid:
    """density [kg/m³], kinematic viscosity [m²/s], vapour pressure [Pa absolute]; None: unknown."""

    name: str
    density: float
    viscosity: float | None
    vapour_pressure: float | None


def water(temperature: float, pressure: float = 101325.0) -> Liquid:
    """Properties of liquid water.

    Parameters
    ----------
    temperature : float [K], 273.15–473.15 and below boiling at `pressure`
    pressure : float [Pa absolute]

    Raises
    ------
    InputError
        If water is not liquid there.

    References
    ----------
    IAPWS R6-95 (density, saturation), IAPWS R12-08 (viscosity), by the library `chemicals`.
    """
    from chemicals.iapws import iapws95_Psat, iapws95_rho
    from chemicals.viscosity import mu_IAPWS

    celsius = temperature - 273.15
    if not 0.0 <= celsius <= 200.0:
        raise InputError(
            f"water at {celsius:g} °C: its properties are taken from 0 to 200 °C only",
            remedy="State density, kinematic_viscosity and vapour_pressure instead.",
        )
    saturation = float(iapws95_Psat(max(temperature, 273.16)))
    if saturation >= pressure:
        pressure = saturation * 1.001  # a pressurised system: the liquid just above saturation
    density = float(iapws95_rho(temperature, pressure))
    viscosity = float(mu_IAPWS(temperature, density)) / density
    return Liquid(f"water at {celsius:g} °C", density, viscosity, saturation)


def atmosphere(altitude: float) -> float:
    """Barometric pressure [Pa] at an altitude above sea level [m, geometric].

    References
    ----------
    U.S. Standard Atmosphere 1976, by the library `fluids`.
    """
    from fluids.atmosphere import ATMOSPHERE_1976

    return float(ATMOSPHERE_1976(altitude).P)
