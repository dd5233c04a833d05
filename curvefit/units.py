"""Units of the pump trade: the spellings on charts, their UCUM codes and exact SI factors.

The only place where a unit's factor is written. `parse("US gpm")` and `parse("[gal_us]/min")`
give the same :class:`Unit`. Factors are products of exact definitions.

References
----------
NIST SP 811 (2008), Appendix B: definitions of inch, foot, pound, gallon, horsepower.
Schadow & McDonald, *The Unified Code for Units of Measure* (UCUM), for the codes.
"""

from __future__ import annotations

import re
import unicodedata
from dataclasses import dataclass
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from curvefit.errors import InputError

__all__ = [
    "G_N",
    "RHO_WATER",
    "UNITS",
    "Unit",
    "fold",
    "from_si",
    "known",
    "parse",
    "parse_quantity",
    "to_si",
    "unit",
]

G_N = 9.80665  #: standard acceleration of gravity [m/s²], exact (3rd CGPM 1901)
RHO_WATER = 998.2  #: density of water at 20 °C [kg/m³], the default wherever one is needed

_INCH = 0.0254
_FOOT = 0.3048
_POUND = 0.45359237
_US_GALLON = 231 * _INCH**3
_UK_GALLON = 4.54609e-3
_HOUR = 3600.0
_MINUTE = 60.0
_DAY = 86400.0

T = TypeVar("T", float, NDArray[np.float64])


@dataclass(frozen=True, slots=True)
class Unit:
    """One unit.

    code : UCUM; dimension : "flow", "length", "ratio", "power", "pressure", "speed", "density",
    "viscosity", "temperature"; factor : SI value of one unit (temperature: see `offset`);
    print : how it is written for people; spellings : as found on charts, folded by :func:`fold`.
    coded : False where the unit has no UCUM code and values are given in `code` instead.
    """

    code: str
    dimension: str
    factor: float
    print: str
    spellings: tuple[str, ...] = ()
    offset: float = 0.0
    coded: bool = True


# fmt: off
UNITS: tuple[Unit, ...] = (
    Unit("m3/h", "flow", 1 / _HOUR, "m³/h", ("m3/h", "m3h", "m3/hr", "m3/hour", "cbm/h", "m^3/h", "m**3/h", "cum/h", "m3/std", "m3/ora", "m3/hora", "m3.h-1", "m3h-1", "cmh")),
    Unit("L/s", "flow", 1e-3, "l/s", ("l/s", "lps", "l/sec", "ltr/s", "litres/s", "liter/s", "litre/s", "l.s-1", "dm3/s", "lt/s", "l/seg", "l/sek")),
    Unit("L/min", "flow", 1e-3 / _MINUTE, "l/min", ("l/min", "lpm", "l/mn", "ltr/min", "lt/min", "litres/min", "liter/min", "l.min-1", "dm3/min", "l/1'")),
    Unit("L/h", "flow", 1e-3 / _HOUR, "l/h", ("l/h", "l/hr", "lph", "lt/h", "l/ora")),
    Unit("m3/s", "flow", 1.0, "m³/s", ("m3/s", "m3/sec", "m^3/s", "cumecs", "m3.s-1", "m3/seg")),
    Unit("m3/min", "flow", 1 / _MINUTE, "m³/min", ("m3/min", "m^3/min", "m3/mn")),
    Unit("m3/d", "flow", 1 / _DAY, "m³/d", ("m3/d", "m3/day", "m3/tag", "m3/jour")),
    Unit("[gal_us]/min", "flow", _US_GALLON / _MINUTE, "US gpm", ("usgpm", "gpm", "usgal/min", "gal/min", "usg/min", "us.gpm", "u.s.gpm", "u.s.g.p.m.", "g.p.m.", "usgal./min", "gpmus", "usgpm.", "gpm(us)", "u.s.gal/min", "usgallons/min", "gallons/min", "gallonsperminute", "usgallonsperminute", "u.s.gpm.", "gpmu.s.")),
    Unit("[gal_us]/h", "flow", _US_GALLON / _HOUR, "US gph", ("usgph", "gph", "usgal/h", "gal/h", "gal/hr")),
    Unit("[gal_br]/min", "flow", _UK_GALLON / _MINUTE, "Imp gpm", ("igpm", "impgpm", "imp.gpm", "ukgpm", "impgal/min", "imp.gal/min", "gpm(imp)", "gpmimp", "ukgal/min", "i.g.p.m.", "imp.g.p.m.", "imperialgpm", "gpm(uk)", "gpmimp.")),
    Unit("10*6.[gal_us]/d", "flow", 1e6 * _US_GALLON / _DAY, "MGD", ("mgd", "usmgd", "milliongallonsperday", "mgal/d", "mgal/day")),
    Unit("[ft_i]3/s", "flow", _FOOT**3, "ft³/s", ("cfs", "ft3/s", "cuft/s", "ft^3/s", "ft3/sec", "cusec", "cusecs")),
    Unit("[ft_i]3/min", "flow", _FOOT**3 / _MINUTE, "ft³/min", ("cfm", "ft3/min", "cuft/min", "ft^3/min")),
    Unit("m", "length", 1.0, "m", ("m", "mtr", "metre", "metres", "meter", "meters", "mwc", "mwg", "mws", "mlc", "mce", "mca", "mh2o", "mfl.s.", "mfls", "mcl", "m.c.a.", "m.c.e.", "mc.a.", "mfl", "mtrs", "metri", "metros", "metres.")),
    Unit("[ft_i]", "length", _FOOT, "ft", ("ft", "ft.", "feet", "foot", "fthead", "pies", "pieds", "fuss", "piedi", "ftwg", "fth2o")),
    Unit("mm", "length", 1e-3, "mm", ("mm", "millimetre", "millimeter")),
    Unit("cm", "length", 1e-2, "cm", ("cm",)),
    Unit("[in_i]", "length", _INCH, "in", ("in", "in.", "inch", "inches", '"', "′′", "''", "zoll")),
    Unit("kPa", "pressure", 1e3, "kPa", ("kpa", "kn/m2")),
    Unit("Pa", "pressure", 1.0, "Pa", ("pa",)),
    Unit("MPa", "pressure", 1e6, "MPa", ("mpa",)),
    Unit("bar", "pressure", 1e5, "bar", ("bar", "bars", "bard")),
    Unit("mbar", "pressure", 1e2, "mbar", ("mbar", "hpa")),
    Unit("[psi]", "pressure", _POUND * G_N / _INCH**2, "psi", ("psi", "lbf/in2", "lb/in2", "psid", "p.s.i.", "lbs/in2")),
    Unit("kgf/cm2", "pressure", 98066.5, "kgf/cm²", ("kgf/cm2", "kg/cm2", "kp/cm2", "at", "kg/cmq")),
    Unit("kW", "power", 1e3, "kW", ("kw", "kilowatt", "kilowatts", "kw.")),
    Unit("W", "power", 1.0, "W", ("w", "watt", "watts")),
    Unit("MW", "power", 1e6, "MW", ("megawatt",)),
    Unit("[HP]", "power", 550 * _FOOT * _POUND * G_N, "hp", ("hp", "bhp", "h.p.", "b.h.p.", "horsepower", "shp", "hp.", "brakehorsepower")),
    Unit("kW", "power", 75 * G_N, "PS", ("ps", "cv", "ch", "c.v.", "metrichp", "hp(metric)", "pk"), coded=False),
    Unit("%", "ratio", 1e-2, "%", ("%", "percent", "prozent", "pct", "pourcent", "porcento", "percento", "v.h.", "vh")),
    Unit("1", "ratio", 1.0, "", ("1", "-")),
    Unit("/min", "speed", 1 / _MINUTE, "1/min", ("/min", "rpm", "1/min", "min-1", "u/min", "r/min", "r.p.m.", "tr/min", "giri/min", "g/min", "t/min", "upm", "min^-1", "{rev}/min", "rev/min", "min^(-1)", "omw/min")),
    Unit("Hz", "speed", 1.0, "Hz", ("hz", "hertz", "1/s", "c/s", "cps")),
    Unit("kg/m3", "density", 1.0, "kg/m³", ("kg/m3", "kg/m^3")),
    Unit("g/cm3", "density", 1e3, "g/cm³", ("g/cm3", "kg/l", "kg/dm3")),
    Unit("[lb_av]/[ft_i]3", "density", _POUND / _FOOT**3, "lb/ft³", ("lb/ft3", "lbm/ft3")),
    Unit("m2/s", "viscosity", 1.0, "m²/s", ("m2/s", "m^2/s")),
    Unit("mm2/s", "viscosity", 1e-6, "mm²/s", ("mm2/s", "cst", "mm^2/s")),
    Unit("Cel", "temperature", 1.0, "°C", ("cel", "°c", "degc", "c"), offset=273.15),
    Unit("K", "temperature", 1.0, "K", ("k", "kelvin")),
    Unit("[degF]", "temperature", 5 / 9, "°F", ("°f", "degf", "f"), offset=459.67),
    Unit("h", "time", _HOUR, "h", ("h", "hours", "hour", "hr")),
    Unit("s", "time", 1.0, "s", ("s", "sec", "second", "seconds")),
    Unit("a", "time", 365.25 * _DAY, "a", ("a", "year", "years")),
)
# fmt: on

_SUPERSCRIPTS = str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-")
_MARKS = str.maketrans(
    {"·": ".", "⋅": ".", "−": "-", "–": "-", "ℓ": "l", "∕": "/", "⁄": "/", "º": "°"}
)


def fold(text: str) -> str:
    """The text in the form in which spellings are compared: no blanks, lower case, plain digits."""
    plain = unicodedata.normalize("NFKC", text.translate(_SUPERSCRIPTS)).translate(_MARKS)
    return re.sub(r"\s+", "", plain).lower()


_BY_CODE = {u.code: u for u in reversed(UNITS) if u.coded}
_BY_SPELLING = {s: u for u in reversed(UNITS) for s in (*u.spellings, fold(u.print)) if s}
_CASE = {"MW": _BY_CODE["MW"], "mW": None, "Mpa": _BY_CODE["MPa"]}


def unit(code: str) -> Unit:
    """The unit of a UCUM code.

    Raises
    ------
    InputError
        If the code is not one of :data:`UNITS`.
    """
    try:
        return _BY_CODE[code]
    except KeyError:
        raise InputError(f"unit code {code!r} is not known", remedy=_list(None)) from None


def parse(text: str, dimension: str | None = None) -> Unit:
    """The unit that a spelling or a UCUM code names.

    Parameters
    ----------
    text : str
        "m3/h", "US gpm", "[gal_us]/min", "m³/h" …
    dimension : str, optional
        Accept only units of this dimension.

    Raises
    ------
    InputError
        If the spelling is unknown or of another dimension; the message lists the known ones.

    Examples
    --------
    >>> parse("US gpm").code
    '[gal_us]/min'
    >>> parse("m³/h").factor * 3600
    1.0
    """
    text = text.strip()
    found = _BY_CODE.get(text) or _CASE.get(text) or _BY_SPELLING.get(fold(text))
    if found is None:
        raise InputError(f"unit {text!r} is not known", remedy=_list(dimension))
    if dimension is not None and found.dimension != dimension:
        raise InputError(
            f"unit {text!r} is a {found.dimension}, a {dimension} is needed",
            remedy=_list(dimension),
        )
    return found


def known(dimension: str | None = None) -> list[str]:
    """How the known units are written, of one dimension or all."""
    return [u.print or "1" for u in UNITS if dimension in (None, u.dimension)]


def _list(dimension: str | None) -> str:
    return "Known units: " + ", ".join(known(dimension)) + "."


def to_si(value: T, code: str | Unit) -> T:
    """A value, or an array of values, in SI."""
    u = code if isinstance(code, Unit) else unit(code)
    return (value + u.offset) * u.factor


def from_si(value: T, code: str | Unit) -> T:
    """An SI value, or an array of values, in a unit."""
    u = code if isinstance(code, Unit) else unit(code)
    return value / u.factor - u.offset


_QUANTITY = re.compile(r"\s*([-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?)\s*(.*?)\s*$")


def parse_quantity(text: str | float, dimension: str, default: str | None = None) -> float:
    """The SI value of "12 m" or, with a bare number, of a number in SI (or in `default`).

    Raises
    ------
    InputError
        If there is no number, or the unit is unknown or of another dimension.

    Examples
    --------
    >>> parse_quantity("36 m3/h", "flow")
    0.01
    """
    if isinstance(text, (int, float)) and not isinstance(text, bool):
        return float(to_si(float(text), parse(default, dimension))) if default else float(text)
    match = _QUANTITY.match(str(text))
    if not match:
        raise InputError(f"{text!r} does not start with a number", remedy=_list(dimension))
    if not match[2]:
        return parse_quantity(float(match[1]), dimension, default)
    return float(to_si(float(match[1]), parse(match[2], dimension)))
