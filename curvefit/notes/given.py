"""What the user knows about a chart, as records: each stage is handed only its own section.

`None` means not known: it is read. What stands here was given and is taken as given. Pixels are
page px (the page as shown); the TOML file holds stored px and is converted where it is read.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

__all__ = ["AxisNotes", "CurveNotes", "GivenMark", "Notes", "PageNotes", "PanelNotes", "PumpNotes"]

Point = tuple[float, float]
Box = tuple[float, float, float, float]


@dataclass(frozen=True, slots=True)
class PageNotes:
    """turn : quarter turns clockwise that set the page upright, 0–3."""

    turn: int | None = None


@dataclass(frozen=True, slots=True)
class GivenMark:
    """A place on an axis and its printed value; u: its standard uncertainty [px]."""

    xy: Point
    value: float
    u: float = 0.5


@dataclass(frozen=True, slots=True)
class AxisNotes:
    """name : "bottom", "left", "right.2" …; the panel is the one that holds these notes.

    unit : a UCUM code, or the spelling where the unit has no code (metric horsepower: "PS").
    """

    name: str
    quantity: str | None = None
    unit: str | None = None
    scale: str | None = None
    marks: tuple[GivenMark, ...] = ()
    line: int | None = None


@dataclass(frozen=True, slots=True)
class PanelNotes:
    """name : the panel's letter, or None where `box` says which one.

    corners : clockwise from the top left of the upright box; leave_out : boxes inside the plot
    that hold no curves; drop : this is no chart.
    """

    name: str | None = None
    box: Box | None = None
    corners: tuple[Point, Point, Point, Point] | None = None
    axes: tuple[AxisNotes, ...] = ()
    leave_out: tuple[Box, ...] = ()
    drop: bool = False
    line: int | None = None


@dataclass(frozen=True, slots=True)
class CurveNotes:
    """One line: which one, and what is known of it.

    name : the name that `read` gave it; at : a point on it (wins over the name).
    path : a polyline that the line follows. With `path` alone a new line is started; with a name
    or `at` too, it replaces the read line between its ends (`whole`: the whole line).
    leave_out : boxes in which the read line is not trusted; drop : this is no curve.
    axis : name of its value axis in the panel ("right.2"), flow_axis likewise.
    diameter_si, speed_si : SI; speed_ratio instead where the speed is a share of the rated one.
    level : what a line of equal efficiency, power or NPSH is worth, in `level_unit`.
    """

    name: str | None = None
    panel: str | None = None
    at: Point | None = None
    path: tuple[Point, ...] = ()
    whole: bool = True
    leave_out: tuple[Box, ...] = ()
    drop: bool = False
    quantity: str | None = None
    axis: str | None = None
    flow_axis: str | None = None
    diameter_si: float | None = None
    diameter_unit: str = "mm"
    speed_si: float | None = None
    speed_unit: str = "/min"
    speed_ratio: float | None = None
    stages: int | None = None
    level: float | None = None
    level_unit: str = "%"
    label: str | None = None
    pump: str | None = None
    line: int | None = None


@dataclass(frozen=True, slots=True)
class PumpNotes:
    """What is known of a pump; SI."""

    name: str = "1"
    speed_si: float | None = None
    stages: int | None = None
    suction_sides: int | None = None
    density_si: float | None = None
    liquid: str | None = None
    line: int | None = None


@dataclass(frozen=True, slots=True)
class Notes:
    """All notes on one page; an empty one gives nothing and everything is read.

    given : the given entries as they stand in the file, stored px, by table name: what `write`
        keeps in the new notes file.
    """

    page: PageNotes = PageNotes()
    panels: tuple[PanelNotes, ...] = ()
    curves: tuple[CurveNotes, ...] = ()
    pumps: tuple[PumpNotes, ...] = ()
    file: str | None = None
    sha256: str | None = None
    given: dict[str, list[dict[str, Any]]] = field(default_factory=dict)
