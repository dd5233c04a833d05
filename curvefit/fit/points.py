"""A CSV of measured points → curves: a header row, a row of units or unit options, numbers."""

from __future__ import annotations

import csv
import math
import re
from array import array
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from curvefit.errors import InputError, LimitError, Location, OpenError
from curvefit.records import QUANTITIES, Curve
from curvefit.units import Unit, fold, parse

__all__ = ["MOST_ROWS", "read_points"]

Array = NDArray[np.float64]

MOST_ROWS = 5_000_000
NOT_GIVEN = -1.0  #: stands for a diameter or speed that a row does not name

#: words in a header → quantity
_WORDS = {
    "flow": ("flow", "q", "flowrate", "capacity", "discharge", "volumeflow"),
    "head": ("head", "h", "totalhead", "tdh"),
    "efficiency": ("efficiency", "eta", "η", "eff", "pumpefficiency"),
    "overall_efficiency": ("overallefficiency", "η_gr", "eta_gr"),
    "shaft_power": ("shaftpower", "power", "p", "p2", "bhp", "brakepower"),
    "input_power": ("inputpower", "p1"),
    "npsh_required": ("npshrequired", "npshr", "npsh", "npsh3", "npshreq"),
    "differential_pressure": ("differentialpressure", "dp", "δp", "pressure"),
    "diameter": ("diameter", "impellerdiameter", "d", "d2"),
    "speed": ("speed", "n", "rpm"),
}
_QUANTITY = {fold(word): name for name, words in _WORDS.items() for word in words}
_QUANTITY |= {fold(name.replace("_", "")): name for name in QUANTITIES}
_DIMENSION = {name: q.dimension for name, q in QUANTITIES.items()}
_DIMENSION |= {"diameter": "length", "speed": "speed"}
#: which unit option speaks for a quantity
_OPTION = {
    "flow": "flow",
    "head": "head",
    "differential_pressure": "head",
    "shaft_power": "power",
    "input_power": "power",
    "npsh_required": "npsh",
}
_BY_NATURE = {"efficiency": "%", "overall_efficiency": "%", "speed": "/min", "diameter": "mm"}


@dataclass(frozen=True, slots=True)
class _Column:
    place: int
    name: str
    quantity: str
    unit: Unit


def read_points(path: str | Path, units: Mapping[str, str] | None = None) -> tuple[Curve, ...]:
    """The measured points of a CSV file, one curve for each quantity (and diameter and speed).

    Parameters
    ----------
    path : the file: a row of names ("flow, head, efficiency"), then a row of units ("m3/h, m, %"),
        then numbers. Units may stand in the names instead ("Q [m3/h]"). Commas, semicolons or tabs
        part the cells; with semicolons or tabs a decimal comma is understood. An empty cell is a
        point that was not measured. Columns "diameter" and "speed" part the rows into curves.
    units : by "flow", "head", "power", "npsh", used where the file names no unit

    Returns
    -------
    tuple of Curve
        With `sigma_si` None: measured points carry no uncertainty of their own.

    Raises
    ------
    OpenError
        If the file cannot be read.
    InputError
        If a column, unit or number cannot be used; the message names line and column.
    LimitError
        If the file has more than five million rows.
    """
    file = Path(path)
    try:
        with file.open(encoding="utf-8-sig", newline="") as stream:
            head = stream.readline()
            delimiter = _delimiter(head)
            stream.seek(0)
            rows = csv.reader(stream, delimiter=delimiter)
            return _curves(rows, str(path), delimiter, units or {})
    except OSError as error:
        raise OpenError(
            f"the points cannot be read: {error.strerror or error}", Location(file=str(path))
        ) from error
    except UnicodeDecodeError as error:
        raise OpenError(
            "the file is no text in UTF-8", Location(file=str(path)), "Save it as CSV in UTF-8."
        ) from error
    except csv.Error as error:
        raise InputError(f"the file is no CSV: {error}", Location(file=str(path))) from error


def _delimiter(head: str) -> str:
    return max(",;\t", key=head.count)


def _curves(
    rows: Iterator[list[str]], file: str, delimiter: str, units: Mapping[str, str]
) -> tuple[Curve, ...]:
    names = next(rows, None)
    if names is None or not any(c.strip() for c in names):
        raise InputError(
            "the file holds no header row",
            Location(file=file, line=1),
            'Begin it with a row of names such as "flow,head", then a row of units.',
        )
    if {"curve", "quantity", "value"} <= {c.strip() for c in names}:
        raise InputError(
            "this is a table that curvefit wrote, not a table of measured points",
            Location(file=file, line=1),
            "Give the .curves.json beside it.",
        )
    second = next(rows, [])
    has_units = bool(second) and not any(_number(c, delimiter) is not None for c in second)
    columns = _columns(names, second if has_units else [], units, file)
    stored = [array("d") for _ in columns]
    line = 2
    if second and not has_units:
        _store(second, columns, stored, file, line, delimiter)
    for count, row in enumerate(rows):
        line += 1
        if count >= MOST_ROWS:
            raise LimitError(
                f"the file has more than {MOST_ROWS} rows of points",
                Location(file=file, line=line),
                "Give fewer points.",
            )
        if any(c.strip() for c in row):
            _store(row, columns, stored, file, line, delimiter)
    return _grouped(columns, [np.frombuffer(a) if len(a) else np.zeros(0) for a in stored], file)


def _columns(
    names: list[str], second: list[str], options: Mapping[str, str], file: str
) -> list[_Column]:
    """What each column is; those of unknown name are an error, since a typing error loses data."""
    columns: list[_Column] = []
    for place, text in enumerate(names):
        if not text.strip():
            continue
        where = Location(file=file, line=1, key=f"column {place + 1} ({text.strip()})")
        match = re.fullmatch(r"\s*(.*?)\s*(?:[\[(/]\s*(.*?)\s*[\])]?)?\s*", text)
        word, inside = (match[1], match[2]) if match else (text, None)
        quantity = _QUANTITY.get(fold(re.sub(r"[\s_]+", "", word)))
        if quantity is None:
            raise InputError(
                f"the column name {text.strip()!r} is not known",
                where,
                "Known names: " + ", ".join(_WORDS) + ".",
            )
        if any(c.quantity == quantity for c in columns):
            raise InputError(f"there are two columns of {quantity}", where, "Keep one.")
        given = second[place].strip() if place < len(second) else ""
        given = given or inside or options.get(_OPTION.get(quantity, ""), "")
        given = given or _BY_NATURE.get(quantity, "")
        if not given:
            option = _OPTION.get(quantity, "flow")
            raise InputError(
                f"the unit of {text.strip()!r} is not given",
                where,
                f"Put a row of units under the names, or use --{option}-unit.",
            )
        try:
            unit = parse(given, _DIMENSION[quantity])
        except InputError as error:
            raise error.at(file=file, line=2 if second else 1, key=where.key) from None
        columns.append(_Column(place, text.strip(), quantity, unit))
    found = [c.quantity for c in columns]
    if "flow" not in found or not set(found) - {"flow", "diameter", "speed"}:
        raise InputError(
            f"a column of flow and one of another quantity are needed, the file has "
            f"{', '.join(found)}",
            Location(file=file, line=1),
            "Known names: " + ", ".join(_WORDS) + ".",
        )
    return columns


def _number(text: str, delimiter: str) -> float | None:
    """The number a cell holds; None where it holds none."""
    plain = text.strip()
    if delimiter != "," and plain.count(",") == 1 and "." not in plain:
        plain = plain.replace(",", ".")
    try:
        return float(plain)
    except ValueError:
        return None


def _store(
    row: list[str],
    columns: list[_Column],
    stored: list[array[float]],
    file: str,
    line: int,
    delimiter: str,
) -> None:
    for column, values in zip(columns, stored, strict=True):
        text = row[column.place].strip() if column.place < len(row) else ""
        if not text and column.quantity != "flow":
            values.append(math.nan)
            continue
        number = _number(text, delimiter)
        if number is None or not math.isfinite(number):
            where = Location(file=file, line=line, key=f"column {column.place + 1} ({column.name})")
            said = f"{text!r} is no number" if text else "the flow is missing"
            raise InputError(
                said,
                where,
                "Numbers only, all in the unit of their column; leave a cell empty where nothing "
                "was measured.",
            )
        values.append(number)


def _grouped(columns: list[_Column], data: list[Array], file: str) -> tuple[Curve, ...]:
    """One curve for each quantity, diameter and speed."""
    si = {
        c.quantity: (c, (v + c.unit.offset) * c.unit.factor)
        for c, v in zip(columns, data, strict=True)
    }
    flow_column, flow = si["flow"]
    if not len(flow):
        raise InputError(
            "the file holds no points", Location(file=file), "Put rows of numbers under the names."
        )
    unknown = np.full(len(flow), NOT_GIVEN)
    parts = [np.round(si[n][1], 9) if n in si else unknown for n in ("diameter", "speed")]
    keys = np.nan_to_num(np.stack(parts, axis=1), nan=NOT_GIVEN)
    groups = np.unique(keys, axis=0)
    curves = []
    for quantity, (column, value) in si.items():
        if quantity in ("flow", "diameter", "speed"):
            continue
        for diameter, speed in groups:
            same = (keys == (diameter, speed)).all(axis=1) & ~np.isnan(value)
            if not same.any():
                continue
            order = np.argsort(flow[same], kind="stable")
            words = [quantity]
            if diameter != NOT_GIVEN:
                words.append(f"Ø{diameter * 1e3:.4g}")
            if speed != NOT_GIVEN:
                words.append(f"{speed * 60:.4g} 1/min")
            curves.append(
                Curve(
                    " ".join(words),
                    quantity,
                    flow[same][order],
                    value[same][order],
                    flow_column.unit.code,
                    column.unit.code,
                    diameter_si=None if diameter == NOT_GIVEN else float(diameter),
                    diameter_unit=si["diameter"][0].unit.code if "diameter" in si else "mm",
                    speed_si=None if speed == NOT_GIVEN else float(speed),
                    by="given",
                )
            )
    return tuple(curves)
