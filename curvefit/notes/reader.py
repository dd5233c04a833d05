"""Reads a STEM.notes.toml: given entries become records, what `read` wrote is passed over."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

from curvefit.errors import Location, NotesError
from curvefit.notes.entry import Entry
from curvefit.notes.given import (
    AxisNotes,
    CurveNotes,
    GivenMark,
    Notes,
    PageNotes,
    PanelNotes,
    PumpNotes,
)
from curvefit.notes.lines import Lines
from curvefit.records import QUANTITIES, Page

__all__ = ["KEYS", "given_entries", "notes_from", "read_notes"]

#: the keys of each table of a notes file
KEYS: dict[str, tuple[str, ...]] = {
    "source": ("file", "sha256", "page", "by"),
    "page": ("turn", "by"),
    "panel": ("name", "box", "corners", "leave_out", "drop", "by"),
    "axis": ("panel", "box", "side", "name", "quantity", "unit", "scale", "marks", "by"),
    "curve": (
        *("name", "panel", "at", "path", "whole", "leave_out", "drop", "quantity", "axis"),
        *("flow_axis", "diameter", "speed", "stages", "level", "label", "pump", "by"),
    ),
    "pump": ("name", "speed", "stages", "suction_sides", "density", "liquid", "by"),
}
_SINGLE = ("source", "page")
_SIDES = ("bottom", "top", "left", "right")
_MARK = ("pixel", "value", "u_px", "text", "used")
_VALUE_QUANTITIES = tuple(q for q in QUANTITIES if not q.startswith("iso_"))
_LEVELS = {"iso_shaft_power": "power", "iso_npsh_required": "length"}


def read_notes(path: str | Path | None, page: Page | None = None, *, named: bool = False) -> Notes:
    """The Notes that a TOML file gives for one page; those of no file are empty.

    Parameters
    ----------
    path : the notes file, or None.
    page : the loaded page, which turns pixels of the stored image into pixels of the page; None
        leaves them as they are.
    named : the user chose this page, so that notes which name no page are meant for it.

    Raises
    ------
    NotesError
        If the file cannot be read, an entry cannot be used (file, line and key are named), or it
        gives places on another picture than this one.
    """
    if path is None:
        return Notes()
    try:
        text = Path(path).read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        raise NotesError(
            f"the notes file cannot be read: {error}",
            Location(file=str(path)),
            "Give the path of a UTF-8 text file in TOML.",
        ) from error
    return notes_from(text, page, str(path), named=named)


def notes_from(
    text: str, page: Page | None = None, file: str = "notes.toml", *, named: bool = False
) -> Notes:
    """The Notes that a TOML text gives for one page; see :func:`read_notes`."""
    tables, lines = _parse(text, file), Lines(text)
    entries = {t: _entries(tables, t, file, lines, page) for t in KEYS}
    given = {t: [e for e in rows if e.values.get("by") != "read"] for t, rows in entries.items()}
    source = entries["source"][0] if entries["source"] else None
    facts = any(given[t] for t in KEYS if t != "source")
    if source is not None and facts and not _meant_for(source, page):
        return Notes(file=file)
    if source is None or source.values.get("page") is None:
        _refuse_unnamed(facts, page, named, file)
    panels = [_panel(e) for e in given["panel"]]
    for entry in given["axis"]:
        _hang(panels, entry)
    return Notes(
        page=PageNotes(given["page"][0].whole("turn", 0, 3) if given["page"] else None),
        panels=tuple(panels),
        curves=tuple(_curve(e) for e in given["curve"]),
        pumps=tuple(_pump(e) for e in given["pump"]),
        file=file,
        sha256=source.text("sha256") if source is not None else None,
        given={t: [dict(e.values) for e in rows] for t, rows in given.items() if t != "source"}
        if facts
        else {},
    )


def given_entries(text: str, file: str = "notes.toml") -> dict[str, list[dict[str, Any]]]:
    """The given entries of a notes file as they stand there, by table; tables without any left out.

    Raises
    ------
    NotesError
        If the text is not valid TOML or holds an unknown table.
    """
    tables, lines = _parse(text, file), Lines(text)
    rows = {
        t: [dict(e.values) for e in _entries(tables, t, file, lines, None)]
        for t in KEYS
        if t != "source"
    }
    kept = {t: [v for v in values if v.get("by") != "read"] for t, values in rows.items()}
    return {t: values for t, values in kept.items() if values}


def _parse(text: str, file: str) -> dict[str, Any]:
    try:
        tables = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        line = re.search(r"line (\d+)", str(error))  # else it is at the end of the document
        number = int(line[1]) if line else max(len(text.splitlines()), 1)
        raise NotesError(
            f"not valid TOML: {error}",
            Location(file=file, line=number),
            'Texts stand in quotes: unit = "m3/h".',
        ) from error
    for name in tables:
        if name not in KEYS:
            raise NotesError(
                f"table {name!r} is not known",
                Location(file=file, line=_line_of(text, name), key=name),
                f"Known: {', '.join(KEYS)}.",
            )
    return tables


def _line_of(text: str, name: str) -> int | None:
    pattern = re.compile(rf"\s*(\[\[?\s*)?[\"']?{re.escape(name)}\b")
    return next((n for n, row in enumerate(text.splitlines(), 1) if pattern.match(row)), None)


def _entries(
    tables: Mapping[str, Any], table: str, file: str, lines: Lines, page: Page | None
) -> list[Entry]:
    """The entries of one table, their keys and `by` checked."""
    rows = tables.get(table, [])
    if not isinstance(rows, list):
        rows = [rows]
    found = [Entry(file, table, i, v, lines, page) for i, v in enumerate(rows)]
    for entry in found:
        if not isinstance(entry.values, dict):
            bracket = f"[{table}]" if table in _SINGLE else f"[[{table}]]"
            raise entry.wrong(None, f"{table} is not a table", f"Write {bracket} and keys below.")
        entry.only(KEYS[table])
        entry.choice("by", ("read", "given"))
    if table in _SINGLE and len(found) > 1:
        raise found[1].wrong(None, f"{table} stands {len(found)} times", "Keep one of them.")
    return found


def _meant_for(source: Entry, page: Page | None) -> bool:
    """Whether the notes are for this page; another picture than theirs is refused."""
    sha256, number = source.text("sha256"), source.whole("page", 1, 10**6)
    if page is None:
        return True
    if sha256 is not None and sha256.lower() != page.sha256.lower():
        raise source.wrong(
            "sha256",
            f"the notes were made for another picture (sha256 {sha256[:12]}…, this one has "
            f"{page.sha256[:12]}…), so their pixels would be wrong here",
            "Use them with their own picture, or remove the line sha256 if the pixels still fit.",
        )
    return number is None or number == page.number


def _refuse_unnamed(facts: bool, page: Page | None, named: bool, file: str) -> None:
    if facts and page is not None and page.pages > 1 and not named:
        raise NotesError(
            f"the notes name no page, and the document has {page.pages}",
            Location(file=file, key="source.page"),
            f"Add the lines [source] and page = {page.number}, or name the page with --page.",
        )


def _panel(entry: Entry) -> PanelNotes:
    name, box = entry.text("name"), entry.box("box")
    corners = entry.points("corners", 4, 4)
    if name is None and box is None and not corners:
        raise entry.wrong(
            None,
            "the panel is not named",
            'Add name = "A", box = [left, top, right, bottom], or its four corners.',
        )
    return PanelNotes(
        name=name,
        box=box,
        corners=(corners[0], corners[1], corners[2], corners[3]) if corners else None,
        leave_out=entry.boxes("leave_out"),
        drop=entry.flag("drop"),
        line=entry.line,
    )


def _hang(panels: list[PanelNotes], entry: Entry) -> None:
    """Hangs the notes on one axis on those of its panel, which are made where there are none."""
    side = entry.text("name") or entry.text("side")
    panel, box = entry.text("panel"), entry.box("box")
    if side is None:
        raise entry.wrong(None, "the axis names no side", f"Add side = one of {', '.join(_SIDES)}.")
    head, dot, rest = side.partition(".")
    if dot and head not in _SIDES:
        panel, side = panel or head, rest
    if not re.fullmatch(r"(bottom|top|left|right)(\.[2-9])?", side):
        key = "name" if "name" in entry.values else "side"
        known = f'Known: {", ".join(_SIDES)}, a second axis on a side is "right.2".'
        raise entry.wrong(key, f"{key} is {entry.values[key]!r}", known)
    if panel is None and box is None:
        raise entry.wrong(
            None,
            "the axis does not say in which panel it is",
            'Add panel = "A", or box = [left, top, right, bottom] of its plot box.',
        )
    axis = _axis(entry, side)
    for i, known_panel in enumerate(panels):
        if (panel is not None and panel == known_panel.name) or (
            panel is None and box == known_panel.box
        ):
            if any(a.name == side for a in known_panel.axes):
                raise entry.wrong(
                    None, f"the axis {side} of this panel is given twice", "Keep one of them."
                )
            panels[i] = replace(known_panel, axes=(*known_panel.axes, axis))
            return
    panels.append(PanelNotes(panel, box if panel is None else None, axes=(axis,), line=entry.line))


def _axis(entry: Entry, side: str) -> AxisNotes:
    quantity = entry.choice("quantity", _VALUE_QUANTITIES)
    dimensions = (QUANTITIES[quantity].dimension,) if quantity else ()
    marks = entry.each("marks", lambda v: _mark(entry, v))
    scale = entry.choice("scale", ("linear", "log"))
    if len(marks) == 1:
        raise entry.wrong(
            "marks", "one mark makes no scale", "Give two: marks = [[x, y, value], [x, y, value]]."
        )
    if len({m.value for m in marks}) < len(marks):
        raise entry.wrong("marks", "two marks have the same value", "Each mark needs its own.")
    if scale == "log" and any(m.value <= 0 for m in marks):
        raise entry.wrong("marks", "a log axis has no value at or below 0", "Correct the value.")
    return AxisNotes(side, quantity, entry.unit("unit", dimensions), scale, marks, entry.line)


def _mark(entry: Entry, value: object) -> GivenMark:
    """A mark from [x, y, value] or {pixel = [x, y], value = …, u_px = …}."""
    if isinstance(value, list) and len(value) == 3:
        value = {"pixel": value[:2], "value": value[2]}
    if not isinstance(value, dict) or not {"pixel", "value"} <= value.keys() <= set(_MARK):
        raise entry.wrong(
            "marks",
            f"{value!r} is no mark",
            "Write [x, y, value], or {pixel = [x, y], value = …, u_px = 0.5}.",
        )
    at = entry.point("marks", value["pixel"])
    u = entry.number("marks", value.get("u_px", 0.5))
    if not u > 0:
        raise entry.wrong("marks", f"u_px is {u:g}", "It must be above zero, in pixels.")
    assert at is not None
    return GivenMark(at, entry.number("marks", value["value"]), u)


def _curve(entry: Entry) -> CurveNotes:
    path, at, name = entry.points("path", 2), entry.point("at"), entry.text("name")
    if not path and at is None and name is None:
        raise entry.wrong(
            None,
            "the curve is not named",
            'Add name = "…", at = [x, y] on it, or path = [[x, y], …].',
        )
    quantity = entry.choice("quantity", tuple(q for q in QUANTITIES if q != "flow"))
    diameter = entry.quantity("diameter", "length", "210 mm")
    speed, ratio = _speed(entry)
    level = entry.quantity("level", _LEVELS.get(quantity or "", "ratio"), "70 %")
    return CurveNotes(
        name=name,
        panel=entry.text("panel"),
        at=at,
        path=path,
        whole=entry.flag("whole") if "whole" in entry.values else True,
        leave_out=entry.boxes("leave_out"),
        drop=entry.flag("drop"),
        quantity=quantity,
        axis=_side_of(entry, "axis"),
        flow_axis=_side_of(entry, "flow_axis"),
        diameter_si=diameter[0] if diameter else None,
        diameter_unit=diameter[1] if diameter else "mm",
        speed_si=speed[0] if speed else None,
        speed_unit="%" if ratio is not None else speed[1] if speed else "/min",
        speed_ratio=ratio,
        stages=entry.whole("stages", 1, 1000),
        level=_in_unit(level) if level else None,
        level_unit=level[1] if level else "%",
        label=entry.text("label"),
        pump=entry.text("pump"),
        line=entry.line,
    )


def _in_unit(level: tuple[float, str]) -> float:
    from curvefit.units import from_si

    return float(f"{from_si(level[0], level[1]):.12g}")


def _speed(entry: Entry) -> tuple[tuple[float, str] | None, float | None]:
    """A speed in SI with its unit, or a share of the rated speed."""
    value = entry.values.get("speed")
    if isinstance(value, str) and value.rstrip().endswith("%"):
        ratio = entry.quantity("speed", "ratio", "90 %")
        return None, ratio[0] if ratio else None
    return entry.quantity("speed", "speed", "2900 /min"), None


def _side_of(entry: Entry, key: str) -> str | None:
    """The name of an axis within its panel: "right.2" from "right.2" or "A.right.2"."""
    name = entry.text(key)
    match = re.fullmatch(r"(?:[^.]+\.)?((?:bottom|top|left|right)(?:\.[2-9])?)", name or "left")
    if match is None:
        raise entry.wrong(key, f"{key} is {name!r}", f'Known: {", ".join(_SIDES)}, "right.2" ….')
    return match[1] if name is not None else None


def _pump(entry: Entry) -> PumpNotes:
    speed = entry.quantity("speed", "speed", "2900 /min")
    density = entry.quantity("density", "density", "998.2 kg/m3")
    return PumpNotes(
        name=entry.text("name") or "1",
        speed_si=speed[0] if speed else None,
        stages=entry.whole("stages", 1, 1000),
        suction_sides=entry.whole("suction_sides", 1, 2),
        density_si=density[0] if density else None,
        liquid=entry.text("liquid"),
        line=entry.line,
    )
