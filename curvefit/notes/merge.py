"""Two sets of notes on one page made into one: what the first gives wins."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import replace
from typing import Any, TypeVar

from curvefit.notes.given import CurveNotes, Notes, PageNotes, PanelNotes

__all__ = ["identity", "merge", "merge_given"]

T = TypeVar("T")


def merge(first: Notes, second: Notes) -> Notes:
    """The notes that both give together; where both speak of one thing, the first wins."""
    panels = {_panel_key(p): p for p in second.panels}
    for panel in first.panels:
        other = panels.get(_panel_key(panel))
        panels[_panel_key(panel)] = panel if other is None else _both(panel, other)
    given, _ = merge_given(first.given, second.given)
    turn = first.page.turn if first.page.turn is not None else second.page.turn
    return Notes(
        page=PageNotes(turn),
        panels=tuple(panels.values()),
        curves=_joined(first.curves, second.curves, _curve_key),
        pumps=_joined(first.pumps, second.pumps, lambda p: p.name),
        file=first.file,
        sha256=first.sha256 or second.sha256,
        given=given,
    )


def merge_given(
    first: Mapping[str, Any], second: Mapping[str, Any]
) -> tuple[dict[str, list[dict[str, Any]]], dict[str, list[dict[str, Any]]]]:
    """Given entries of both by table, and those of the second that the first replaces."""
    kept: dict[str, list[dict[str, Any]]] = {}
    replaced: dict[str, list[dict[str, Any]]] = {}
    for table in dict.fromkeys((*first, *second)):
        rows = [dict(r) for r in first.get(table, [])]
        taken = {identity(table, r) for r in rows}
        for row in second.get(table, []):
            if identity(table, row) not in taken:
                rows.append(dict(row))
            elif row not in rows:
                replaced.setdefault(table, []).append(dict(row))
        if rows:
            kept[table] = rows
    return kept, replaced


def identity(table: str, row: Mapping[str, Any]) -> str:
    """What an entry of the file speaks of; two entries with the same one cannot both stand."""
    if table == "axis":
        side = str(row.get("name") or row.get("side")).rpartition(f"{row.get('panel')}.")[2]
        return repr((row.get("panel") or row.get("box"), side))
    if table == "curve":
        path = row.get("path") if "name" not in row and "at" not in row else None
        return repr((row.get("panel"), row.get("at") or row.get("name"), path))
    if table == "panel":
        return repr(row.get("name") or row.get("box") or row.get("corners"))
    return repr(row.get("name", "1")) if table == "pump" else table


def _panel_key(panel: PanelNotes) -> object:
    return panel.name if panel.name is not None else panel.box or panel.corners


def _curve_key(c: CurveNotes) -> object:
    if c.at is None and c.name is None:
        return c.panel, c.path
    return c.panel, c.at or c.name


def _both(first: PanelNotes, second: PanelNotes) -> PanelNotes:
    return replace(
        first,
        corners=first.corners or second.corners,
        leave_out=first.leave_out or second.leave_out,
        drop=first.drop or second.drop,
        axes=_joined(first.axes, second.axes, lambda a: a.name),
    )


def _joined(first: Iterable[T], second: Iterable[T], key: Callable[[T], object]) -> tuple[T, ...]:
    rows = {key(r): r for r in second}
    return tuple((rows | {key(r): r for r in first}).values())
