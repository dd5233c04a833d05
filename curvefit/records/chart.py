"""Records in pixels: the page, its plot boxes and scales, and the lines followed in them."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import Warp, project
from curvefit.records.base import Array, By, Finding, Record, Side, hold

__all__ = ["Axis", "Mark", "Page", "Panel", "Stroke", "Trace", "Word"]


@dataclass(frozen=True, slots=True, eq=False)
class Word(Record):
    """A piece of printed text: a number, a label or a line of a title.

    box : (4, 2) page px, clockwise from the text's own top-left corner (so a title that reads
    upwards has box[0] at the lower left of the page).
    score : the reader's confidence, 0–1; 1 for the text layer of a PDF.
    """

    text: str
    box: Array
    score: float = 1.0

    def __post_init__(self) -> None:
        hold(self, "box", float, (4, 2))

    @property
    def centre(self) -> Array:
        """(2,) page px."""
        return np.asarray(self.box.mean(0))

    @property
    def height(self) -> float:
        """Height of the line of text [px]."""
        return float(np.hypot(*(self.box[3] - self.box[0])))

    @property
    def width(self) -> float:
        """Length of the line of text [px]."""
        return float(np.hypot(*(self.box[1] - self.box[0])))

    @property
    def angle(self) -> float:
        """Direction of reading [degrees], 0 to the right, 90 upwards."""
        d = self.box[1] - self.box[0]
        return float(np.degrees(np.arctan2(-d[1], d[0])))


@dataclass(frozen=True, slots=True, eq=False)
class Stroke(Record):
    """One drawn path of a vector page, curves already flattened to within 0.01 px.

    xy : (n, 2) page px; width [px]; dash : lengths on, off, … [px], empty where solid;
    colour : red, green, blue 0–1; fill : a filled area rather than a line.
    path : number of the drawing operator that it came from (subpaths share it).
    """

    xy: Array
    width: float
    colour: tuple[float, float, float]
    dash: tuple[float, ...] = ()
    fill: bool = False
    path: int = 0

    def __post_init__(self) -> None:
        hold(self, "xy", float, (None, 2))


@dataclass(frozen=True, slots=True, eq=False)
class Page(Record):
    """One page: its pixels and, where it is a vector drawing, its strokes and words.

    pixels : (height, width, 3) uint8 RGB, as shown. A vector page carries them too, rendered.
    stored_from_page : (3, 3) page px → stored px.
    dpi : resolution of the stored pixels where it is known; a vector page: 300.
    """

    file: str
    sha256: str
    number: int
    pixels: NDArray[np.uint8]
    stored_size: tuple[int, int]
    stored_from_page: Array = field(default_factory=lambda: np.eye(3))
    dpi: float | None = None
    strokes: tuple[Stroke, ...] = ()
    words: tuple[Word, ...] = ()
    pages: int = 1
    findings: tuple[Finding, ...] = ()

    def __post_init__(self) -> None:
        hold(self, "pixels", np.uint8, (None, None, 3))
        hold(self, "stored_from_page", float, (3, 3))

    @property
    def vector(self) -> bool:
        """Whether the lines are known exactly, from the drawing operators."""
        return bool(self.strokes)

    @property
    def size(self) -> tuple[int, int]:
        """(width, height) of the page as shown [px]."""
        return self.pixels.shape[1], self.pixels.shape[0]

    def to_stored(self, xy: Array) -> Array:
        """Page px → px of the stored image; arrays of shape (n, 2)."""
        return project(self.stored_from_page, xy)

    def from_stored(self, xy: Array) -> Array:
        """Px of the stored image → page px; arrays of shape (n, 2)."""
        return project(np.linalg.inv(self.stored_from_page), xy)


@dataclass(frozen=True, slots=True, eq=False)
class Mark(Record):
    """One tick of an axis: its place on the page and its value in the printed unit.

    xy : (2,) page px, on the axis line; u : standard uncertainty along the axis [px].
    text : as printed ("" for a tick without a number); value None where it could not be read.
    used : whether the scale rests on it.
    """

    xy: Array
    u: float
    text: str
    value: float | None
    used: bool = True
    by: By = "read"

    def __post_init__(self) -> None:
        hold(self, "xy", float, (2,))


@dataclass(frozen=True, slots=True, eq=False)
class Axis(Record):
    """One scale of a plot box.

    With t the place along the box side as a fraction, 0 at the left or bottom end and 1 at the
    right or top end, the value in the printed unit (its log10 on a log axis) is offset + slope·t.
    covariance : (2, 2) of offset and slope, in those units.
    name : "A.bottom"; a second axis on the same side is "A.right.2".
    quantity, unit : None where they could not be established; unit is a UCUM code.
    factor : multiplies printed numbers on the way to `unit` (e.g. 0.73549875 for PS shown as kW,
    1000 for a title that says ×1000); offset, slope, covariance, marks are as printed, before it.
    guessed : whether quantity or unit is a guess.
    """

    name: str
    side: Side
    quantity: str | None
    unit: str | None
    printed_unit: str
    scale: Literal["linear", "log"]
    offset: float
    slope: float
    covariance: Array
    marks: tuple[Mark, ...] = ()
    factor: float = 1.0
    title: str = ""
    guessed: bool = False
    by: By = "read"

    def __post_init__(self) -> None:
        hold(self, "covariance", float, (2, 2))

    @property
    def along_flow(self) -> bool:
        """Whether the axis runs from left to right."""
        return self.side in ("bottom", "top")

    def value(self, t: Array) -> Array:
        """Values in `unit` at fractions t of the box side; arrays of shape (n,)."""
        v = self.offset + self.slope * np.asarray(t, float)
        return np.asarray((10.0**v if self.scale == "log" else v) * self.factor)

    def fraction(self, value: Array) -> Array:
        """Fractions t of the box side at values in `unit`; arrays of shape (n,)."""
        v = np.asarray(value, float) / self.factor
        return np.asarray(((np.log10(v) if self.scale == "log" else v) - self.offset) / self.slope)


@dataclass(frozen=True, slots=True, eq=False)
class Panel(Record):
    """One plot box with its axes.

    corners : (4, 2) page px, clockwise from the top left of the upright plot box.
    words : the text in and around the box, without the tick numbers: labels, legends, titles.
    turn : quarter turns clockwise that set the page upright, 0–3.
    masks : page px polygons inside the box that hold no curves (a legend, a logo, a table).
    """

    name: str
    page: Page
    corners: Array
    warp: Warp
    axes: tuple[Axis, ...]
    words: tuple[Word, ...] = ()
    turn: int = 0
    masks: tuple[Array, ...] = ()
    findings: tuple[Finding, ...] = ()
    by: By = "read"

    def __post_init__(self) -> None:
        hold(self, "corners", float, (4, 2))

    def axis(self, name: str) -> Axis:
        """The axis of that name ("A.left") or side ("left")."""
        for a in self.axes:
            if name in (a.name, a.side, a.name.partition(".")[2]):
                return a
        raise KeyError(name)

    def fractions(self, xy: Array) -> tuple[Array, Array]:
        """(across, up) for page px of shape (n, 2): 0 at the left/bottom side, 1 at the other."""
        flat = self.warp.to_panel(xy)
        w, h = self.warp.size
        return flat[:, 0] / w, 1.0 - flat[:, 1] / h

    def at(self, across: Array, up: Array) -> Array:
        """Page px, shape (n, 2), at fractions of the box."""
        w, h = self.warp.size
        return self.warp.to_page(np.c_[np.asarray(across) * w, (1.0 - np.asarray(up)) * h])


@dataclass(frozen=True, slots=True, eq=False)
class Trace(Record):
    """One line followed through the plot box.

    flat : (n, 2) panel px, along the centre of the ink; x strictly increasing unless `path`.
    sigma : (n,) standard uncertainty perpendicular to the line [px].
    flags : (n,) uint8, bits of FLAGS.
    correlation : distance along the line over which neighbouring errors stay alike [px].
    path : the line is not single-valued in x (lines of equal efficiency); closed : it is a loop.
    colour : red, green, blue 0–1; dash : "solid", "dashed", "dotted", "dash-dotted".

    """

    name: str
    panel: Panel
    flat: Array
    sigma: Array
    flags: NDArray[np.uint8]
    correlation: float
    width: float
    colour: tuple[float, float, float] = (0.0, 0.0, 0.0)
    dash: str = "solid"
    path: bool = False
    closed: bool = False
    by: By = "read"
    findings: tuple[Finding, ...] = ()

    def __post_init__(self) -> None:
        hold(self, "flat", float, (None, 2))
        hold(self, "sigma", float, (len(self.flat),))
        hold(self, "flags", np.uint8, (len(self.flat),))

    @property
    def xy(self) -> Array:
        """(n, 2) page px."""
        return self.panel.warp.to_page(self.flat)
