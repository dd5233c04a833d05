"""Numbers derived from fits (best efficiency point, shut-off, specific speed) as they leave."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from curvefit.units import Unit, from_si, to_si, unit

__all__ = ["derived_back", "derived_out"]

#: which unit option a derived number follows, and its unit without one
_UNITS = {
    "flow": ("flow", "m3/h"),
    "head": ("head", "m"),
    "pressure": ("head", "kPa"),
    "efficiency": ("", "%"),
    "overall_efficiency": ("", "%"),
    "shaft_power": ("power", "kW"),
    "input_power": ("power", "kW"),
    "npsh_required": ("npsh", "m"),
}


def derived_out(
    derived: Mapping[str, Mapping[str, float | None]],
    chosen: Mapping[str, Unit],
    printed: Mapping[str, str],
) -> dict[str, dict[str, dict[str, Any]]]:
    """Each number as value, unit (None for specific speeds) and standard uncertainty.

    Parameters
    ----------
    derived : as in Fit.derived, SI
    chosen : the unit options
    printed : units of the fit's own axes by name ("flow", "head" …), used where none was chosen
    """
    return {
        kind: {
            name.removesuffix("_si"): _measured(name, numbers, chosen, printed)
            for name in numbers
            if not name.startswith("u_")
        }
        for kind, numbers in derived.items()
    }


def _measured(
    name: str,
    numbers: Mapping[str, float | None],
    chosen: Mapping[str, Unit],
    printed: Mapping[str, str],
) -> dict[str, Any]:
    value, u = numbers[name], numbers.get(f"u_{name}")
    short = name.removesuffix("_si")
    if short == name or short not in _UNITS:
        return {"value": value, "unit": None, "standard_uncertainty": u}
    option, default = _UNITS[short]
    code = printed.get(short, default)
    if option in chosen and chosen[option].dimension == unit(code).dimension:
        code = chosen[option].code
    return {
        "value": None if value is None else from_si(value, code),
        "unit": code,
        "standard_uncertainty": None if u is None else u / unit(code).factor,
    }


def derived_back(
    derived: Mapping[str, Mapping[str, Mapping[str, Any]]],
) -> dict[str, dict[str, float | None]]:
    """The numbers of :func:`derived_out` in SI again, as in Fit.derived."""
    back: dict[str, dict[str, float | None]] = {}
    for kind, numbers in derived.items():
        back[kind] = {}
        for name, measured in numbers.items():
            code, value, u = (measured[k] for k in ("unit", "value", "standard_uncertainty"))
            if code is None:
                back[kind] |= {name: value, f"u_{name}": u}
            else:
                back[kind] |= {
                    f"{name}_si": None if value is None else to_si(value, code),
                    f"u_{name}_si": None if u is None else u * unit(code).factor,
                }
    return back
