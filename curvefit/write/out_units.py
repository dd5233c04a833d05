"""In which units a curve leaves: as printed on its axes, or as the user chose."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.errors import InputError, Location
from curvefit.records import QUANTITIES, Curve, Finding, Pump
from curvefit.units import G_N, RHO_WATER, Unit, parse, unit

__all__ = ["OutUnits", "choose_units", "density_finding", "out_units"]

#: which unit option governs a quantity
_FAMILY = {
    "flow": "flow",
    "head": "head",
    "differential_pressure": "head",
    "iso_efficiency": "head",
    "iso_shaft_power": "head",
    "iso_npsh_required": "head",
    "npsh_required": "npsh",
    "shaft_power": "power",
    "input_power": "power",
}
_DIMENSIONS = {
    "flow": ("flow",),
    "head": ("length", "pressure"),
    "power": ("power",),
    "npsh": ("length",),
}


@dataclass(frozen=True, slots=True)
class OutUnits:
    """The units of one curve on its way out.

    flow, value : UCUM codes; flow_si, value_si : SI values of one of them. value_si includes ρg
    where head leaves as pressure or pressure as head; quantity is what it then is.
    """

    flow: str
    value: str
    flow_si: float
    value_si: float
    quantity: str
    density: float | None = None

    def flows(self, si: NDArray[np.float64]) -> NDArray[np.float64]:
        """Flows in the unit that leaves."""
        return np.asarray(si / self.flow_si)

    def values(self, si: NDArray[np.float64]) -> NDArray[np.float64]:
        """Values in the unit that leaves."""
        return np.asarray(si / self.value_si)


def choose_units(options: Mapping[str, str | None] | None) -> dict[str, Unit]:
    """The units that options name, by "flow", "head", "power", "npsh".

    Raises
    ------
    InputError
        If a unit is unknown or of a wrong dimension; the message lists the known ones.
    """
    chosen = {}
    for name, text in (options or {}).items():
        if text is None:
            continue
        if name not in _DIMENSIONS:
            raise InputError(
                f"unit option {name!r} is not known", remedy="Known: flow, head, power, npsh."
            )
        found = parse(text, _DIMENSIONS[name][0] if len(_DIMENSIONS[name]) == 1 else None)
        if found.dimension not in _DIMENSIONS[name]:
            parse(text, _DIMENSIONS[name][0])
        chosen[name] = found
    return chosen


def out_units(curve: Curve, chosen: Mapping[str, Unit], pump: Pump | None = None) -> OutUnits:
    """The units in which a curve leaves.

    Notes
    -----
    Head and pressure turn into each other by Δp = ρ·g·H with g = 9.80665 m/s² and the liquid's
    density, 998.2 kg/m³ where it is not known.
    """
    flow = _coded(chosen.get("flow"), curve.flow_unit)
    value = _coded(chosen.get(_FAMILY.get(curve.quantity, "")), curve.unit)
    flow_si, value_si = unit(flow).factor, unit(value).factor
    own = QUANTITIES[curve.quantity].dimension
    if unit(value).dimension == own:
        return OutUnits(flow, value, flow_si, value_si, curve.quantity)
    if curve.quantity not in ("head", "differential_pressure"):
        return OutUnits(flow, curve.unit, flow_si, unit(curve.unit).factor, curve.quantity)
    density = pump.density_si if pump is not None and pump.density_si else RHO_WATER
    weight = density * G_N
    if own == "length":
        return OutUnits(flow, value, flow_si, value_si / weight, "differential_pressure", density)
    return OutUnits(flow, value, flow_si, value_si * weight, "head", density)


def _coded(chosen: Unit | None, printed: str) -> str:
    return chosen.code if chosen is not None else printed


def density_finding(curve: Curve, units: OutUnits, known: bool) -> Finding:
    """The statement that goes with head turned into pressure or back."""
    source = "the density given for the pump" if known else "water at 20 °C, since none is known"
    return Finding(
        "info",
        "units.density",
        f"{QUANTITIES[curve.quantity].title} was turned into "
        f"{QUANTITIES[units.quantity].title.lower()} with {units.density:g} kg/m³ ({source}) "
        f"and g = {G_N} m/s².",
        Location(panel=curve.panel.name if curve.panel else None, curve=curve.name),
        'Give density = "… kg/m3" under [[pump]] in the notes if the liquid is another.',
    )
