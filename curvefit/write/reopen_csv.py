"""Reads a table that curvefit wrote (STEM.curves.csv, STEM.points.csv) back into curves, SI."""

from __future__ import annotations

import csv
import io
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from curvefit.errors import ChartError, InputError, Location, OpenError
from curvefit.records import FLAGS, QUANTITIES, Curve, Pump
from curvefit.units import parse, to_si
from curvefit.write.curves_csv import COLUMNS
from curvefit.write.reopen import CurveSet

__all__ = ["is_own_table", "reopen_csv"]

_NAMES = [name for name, _, _ in COLUMNS]


def is_own_table(path: str | Path) -> bool:
    """Whether a file begins with the header of a table that curvefit writes."""
    try:
        with open(path, encoding="utf-8-sig", newline="") as file:
            return next(csv.reader(file), []) == _NAMES
    except (OSError, UnicodeDecodeError, csv.Error):
        return False


def reopen_csv(path: str | Path) -> CurveSet:
    """The curves of a table that curvefit wrote; the traced points, else the fitted ones.

    Raises
    ------
    OpenError
        If the file cannot be read.
    InputError
        If it has other columns, or a cell is unusable: line and column are named.
    """
    file = str(path)
    try:
        text = Path(path).read_text(encoding="utf-8-sig")
    except (OSError, UnicodeDecodeError) as error:
        remedy = "Give a .curves.csv that curvefit wrote."
        raise OpenError(
            f"the table cannot be read: {error}", Location(file=file), remedy
        ) from error
    rows = list(csv.reader(io.StringIO(text, newline="")))
    if not rows or rows[0] != _NAMES:
        raise InputError(
            "the table has other columns than curvefit writes",
            Location(file=file, line=1),
            f"Needed: {', '.join(_NAMES)}.",
        )
    groups: dict[tuple[str, str], list[tuple[int, dict[str, str]]]] = {}
    for line, row in enumerate(rows[1:], 2):
        if len(row) != len(_NAMES):
            raise InputError(
                f"the row has {len(row)} cells, {len(_NAMES)} are needed",
                Location(file=file, line=line),
                "Complete the row, or take it out.",
            )
        cells = dict(zip(_NAMES, row, strict=True))
        groups.setdefault((cells["curve"], cells["source"]), []).append((line, cells))
    names = dict.fromkeys(name for name, _ in groups)
    chosen = [groups.get((n, "traced")) or groups.get((n, "fitted")) for n in names]
    curves = tuple(_curve(file, group) for group in chosen if group)
    pumps = tuple(Pump(n) for n in dict.fromkeys(c.pump for c in curves))
    page = int(chosen[0][0][1]["page"] or 1) if chosen and chosen[0] else 1
    return CurveSet({"file": Path(path).name, "page": page}, (), pumps, curves, (), ())


def _curve(file: str, group: list[tuple[int, dict[str, str]]]) -> Curve:
    line, first = group[0]
    if first["quantity"] not in QUANTITIES:
        raise InputError(
            f"quantity {first['quantity']!r} is not known",
            Location(file=file, line=line, key="quantity"),
            f"Known: {', '.join(QUANTITIES)}.",
        )
    try:
        flow_unit = parse(first["flow_unit"], "flow")
        value_unit = parse(first["value_unit"], QUANTITIES[first["quantity"]].dimension)
    except ChartError as error:
        raise error.at(file=file, line=line) from error
    flow = _column(file, group, "flow") * flow_unit.factor
    value = _column(file, group, "value") * value_unit.factor
    u = _column(file, group, "standard_uncertainty", empty=True) * value_unit.factor
    diameter = _column(file, group[:1], "impeller_diameter_mm", empty=True)[0]
    speed = _column(file, group[:1], "speed_rpm", empty=True)[0]
    panel = _text(first["panel"])
    return Curve(
        name=_text(first["curve"]),
        quantity=first["quantity"],
        flow_si=flow,
        value_si=value,
        flow_unit=flow_unit.code,
        unit=value_unit.code,
        flow_axis=f"{panel}.bottom" if panel else None,
        pump=_text(first["pump"]),
        sigma_si=None if np.isnan(u).all() else u,
        flags=np.array([_bits(cells["flags"]) for _, cells in group], np.uint8),
        diameter_si=None if np.isnan(diameter) else diameter / 1e3,
        speed_si=None if np.isnan(speed) else float(to_si(speed, "/min")),
    )


def _text(cell: str) -> str:
    """A text without the apostrophe that kept spreadsheets from taking it for a formula."""
    return cell[1:] if cell[:1] == "'" and cell[1:].lstrip()[:1] in ("=", "+", "-", "@") else cell


def _bits(words: str) -> int:
    return sum(FLAGS.get(word, 0) for word in words.split())


def _column(
    file: str, group: list[tuple[int, dict[str, str]]], name: str, empty: bool = False
) -> NDArray[np.float64]:
    """Numbers of a column; NaN for empty cells where they are allowed."""
    values = []
    for line, cells in group:
        cell = cells[name].strip()
        try:
            value = np.nan if empty and not cell else float(cell)
        except ValueError:
            value = np.inf
        if np.isinf(value) or (np.isnan(value) and not (empty and not cell)):
            raise InputError(
                f"{cell!r} is no number",
                Location(file=file, line=line, key=name),
                "Write a number with a decimal point, or leave out the row.",
            )
        values.append(value)
    return np.array(values, float)
