"""STEM.notes.toml: every decision of a reading, the given ones kept as they were given."""

from __future__ import annotations

import json
import re
from collections.abc import Iterator, Mapping, Sequence
from pathlib import PurePath
from typing import Any

import numpy as np
from numpy.typing import NDArray

from curvefit import __version__
from curvefit.notes import given_entries, merge_given
from curvefit.records import Axis, Curve, Panel, Pump, Reading
from curvefit.units import from_si

__all__ = ["notes_toml"]

_HEAD = f"""\
# Notes on a pump chart, written by curvefit {__version__}.
# What stands here without by = "read" is given: it is taken as it is, and kept.
# Entries with by = "read" only record what was read; they are read afresh each time.
# To correct one, write an entry of your own with the keys that name it and those you correct:
#   [[curve]]
#   name = "head 1"
#   diameter = "210 mm"
# and run `curvefit read` again. Pixels are those of the stored picture.
"""


def notes_toml(reading: Reading, existing: str | None = None, file: str = "notes.toml") -> str:
    """The text of the notes file of a reading.

    Parameters
    ----------
    reading : what was read, with the notes it was read with.
    existing : the text of the notes file that will be replaced: its given entries are kept, too.
    file : name of that file, for messages.

    Raises
    ------
    NotesError
        If the existing text cannot be understood, so that nothing of it could be kept.
    """
    used = reading.notes.given if reading.notes is not None else {}
    before = given_entries(existing, file) if existing is not None else {}
    given, replaced = merge_given(used, before)
    parts = [_HEAD, _source(reading)]
    rows = [_table(t, row) for t, entries in given.items() for row in entries if row]
    if rows:
        parts += ["# Given:\n", *rows]
    if replaced:
        old = "\n".join(_table(t, row) for t, entries in replaced.items() for row in entries)
        parts += ["# Given before, and replaced since:\n" + re.sub(r"(?m)^(?=.)", "# ", old)]
    parts += ["# Read:\n"]
    if "page" not in given and reading.panels:
        page = _table("page", {"turn": reading.panels[0].turn, "by": "read"})
        parts += ["# (a changed turn is given once its line by is removed)\n" + page]
    parts += [_table("panel", _panel(reading, p)) for p in reading.panels]
    parts += [_table("axis", _axis(reading, p, a)) for p in reading.panels for a in p.axes]
    parts += [_table("curve", _curve(reading, c)) for c in reading.curves]
    parts += [_table("pump", _pump(p)) for p in reading.pumps]
    return "\n".join(parts)


def _source(reading: Reading) -> str:
    page = reading.page
    name = PurePath(page.file).name
    row = {"file": name, "sha256": page.sha256, "page": page.number, "by": "read"}
    return _table("source", row)


def _panel(reading: Reading, panel: Panel) -> dict[str, Any]:
    return {"name": panel.name, "corners": _pixels(reading, panel.corners), "by": "read"}


def _axis(reading: Reading, panel: Panel, axis: Axis) -> dict[str, Any]:
    marks = [m for m in axis.marks if m.used and m.value is not None]
    places = _pixels(reading, np.array([m.xy for m in marks]).reshape(-1, 2))
    return _known(
        panel=panel.name,
        side=axis.name.removeprefix(f"{panel.name}."),
        quantity=axis.quantity,
        unit=axis.unit if axis.factor == 1.0 or not axis.printed_unit else axis.printed_unit,
        scale=axis.scale,
        marks=[
            {"pixel": xy, "value": _plain(m.value), "u_px": _plain(m.u, 3)}
            for m, xy in zip(marks, places, strict=True)
            if m.value is not None
        ],
        by="read",
    )


def _curve(reading: Reading, curve: Curve) -> dict[str, Any]:
    speed = _measure(curve.speed_si, "Hz" if curve.speed_unit == "Hz" else "/min")
    if curve.speed_ratio is not None:
        speed = f"{100 * curve.speed_ratio:.6g} %"
    flow_axis, value_axis = (
        a.rpartition(f"{curve.panel.name}.")[2] if a and curve.panel else None
        for a in (curve.flow_axis, curve.value_axis)
    )
    path = None
    if curve.trace is not None and len(curve.trace.flat):
        path = _pixels(reading, _simplified(curve.trace.xy, 0.1))
    return _known(
        name=curve.name,
        panel=curve.panel.name if curve.panel else None,
        quantity=curve.quantity,
        axis=value_axis,
        flow_axis=flow_axis,
        diameter=_measure(curve.diameter_si, curve.diameter_unit),
        speed=speed,
        stages=curve.stages,
        level=_measure(curve.level_si, curve.level_unit) if curve.iso else None,
        label=curve.label or None,
        pump=curve.pump,
        path=path if path and len(path) > 1 else None,
        by="read",
    )


def _pump(pump: Pump) -> dict[str, Any]:
    return _known(
        name=pump.name,
        speed=_measure(pump.speed_si, "/min"),
        stages=pump.stages,
        suction_sides=pump.suction_sides,
        density=_measure(pump.density_si, "kg/m3"),
        liquid=pump.liquid,
        by="read",
    )


def _known(**values: Any) -> dict[str, Any]:
    return {k: v for k, v in values.items() if v is not None and v != []}


def _measure(si: float | None, code: str) -> str | None:
    return None if si is None else f"{from_si(si, code):.9g} {code}"


def _plain(value: float | None, digits: int = 12) -> float | int | None:
    if value is None:
        return None
    rounded = float(f"{value:.{digits}g}")
    return int(rounded) if rounded.is_integer() and abs(rounded) < 1e15 else rounded


def _pixels(reading: Reading, xy: NDArray[np.float64]) -> list[list[float]]:
    stored = reading.page.to_stored(xy)
    return [[round(float(x), 2) + 0.0, round(float(y), 2) + 0.0] for x, y in stored]


def _simplified(xy: NDArray[np.float64], tolerance: float) -> NDArray[np.float64]:
    """The polyline with the fewest points of its own that stay within a tolerance of it.

    References
    ----------
    Douglas & Peucker, Cartographica 10 (1973) 112.
    """
    keep = np.zeros(len(xy), bool)
    keep[[0, -1]] = True
    open_spans = [(0, len(xy) - 1)]
    while open_spans:
        a, b = open_spans.pop()
        if b - a < 2:
            continue
        along = xy[b] - xy[a]
        rest = xy[a + 1 : b] - xy[a]
        length = float(np.hypot(*along))
        off = np.hypot(rest[:, 0], rest[:, 1])
        if length > 0:
            off = np.abs(rest[:, 0] * along[1] - rest[:, 1] * along[0]) / length
        worst = int(np.argmax(off))
        if off[worst] > tolerance:
            keep[a + 1 + worst] = True
            open_spans += [(a, a + 1 + worst), (a + 1 + worst, b)]
    return xy[keep]


def _table(name: str, row: Mapping[str, Any]) -> str:
    bracket = f"[{name}]" if name in ("source", "page") else f"[[{name}]]"
    return "\n".join([bracket, *(f"{_key(k)} = {_value(v)}" for k, v in row.items()), ""])


def _key(key: str) -> str:
    return key if re.fullmatch(r"[A-Za-z0-9_-]+", key) else _text(key)


def _value(value: Any) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return _text(value)
    if isinstance(value, (int, float)):
        return repr(value)
    if isinstance(value, Mapping):
        return "{" + ", ".join(f"{_key(k)} = {_value(v)}" for k, v in value.items()) + "}"
    return "[" + ", ".join(_items(value)).replace(", \n", ",\n") + "]"


def _items(values: Sequence[Any]) -> Iterator[str]:
    """Items of a list; a long list of points or marks gets lines of its own."""
    long = len(values) > 4 and not isinstance(values[0], (int, float, str))
    per_line = 1 if values and isinstance(values[0], Mapping) else 6
    for i, value in enumerate(values):
        lead = "\n  " if long and i % per_line == 0 else ""
        last = "\n" if long and i == len(values) - 1 else ""
        yield f"{lead}{_value(value)}{last}"


def _text(text: str) -> str:
    quoted = json.dumps(text.encode("utf-8", "replace").decode(), ensure_ascii=False)
    return quoted.replace("\x7f", "\\u007f")
