"""Names of curves: what the line is and what tells it from its family, unique on the page."""

from __future__ import annotations

from collections.abc import Sequence

from curvefit.identify.line import Line
from curvefit.identify.wording import quantity_named
from curvefit.units import from_si

__all__ = ["names"]


def names(lines: Sequence[Line]) -> list[str]:
    """A name for each line: "head Ø210", "efficiency", "iso_efficiency 70%", "head Ø210 2"."""
    found: list[str] = []
    used: set[str] = set()
    for line in lines:
        base = " ".join(filter(None, (line.quantity, _mark(line))))
        name, k = base, 1
        while name in used:
            k += 1
            name = f"{base} {k}"
        used.add(name)
        found.append(name)
    return found


def _mark(line: Line) -> str:
    if line.iso:
        return "" if line.level is None else _amount(line.level, line.level_unit, "")
    parts = []
    if line.diameter is not None:
        value = from_si(line.diameter, line.diameter_unit)
        parts.append(f"Ø{value:.6g}" + {"mm": "", "[in_i]": " in"}.get(line.diameter_unit, ""))
    if line.speed_ratio is not None and line.speed_unit == "%":
        parts.append(f"{100 * line.speed_ratio:.6g}%")
    elif line.speed is not None:
        parts.append(_amount(line.speed, line.speed_unit, " "))
    if line.stages is not None:
        parts.append(f"{line.stages} stages" if line.stages != 1 else "1 stage")
    if not parts and line.label and quantity_named(line.label) is None:
        parts.append(line.label)
    return " ".join(parts)


def _amount(value: float, code: str, blank: str) -> str:
    word = {"[HP]": "hp", "[ft_i]": "ft", "%": "%", "/min": "/min"}.get(code, code)
    return f"{from_si(value, code):.6g}{blank if code in ('%', '/min') else ' '}{word}"
