"""What the stages hand to each other: Page → Panel(Axis…) → Trace → Curve → Fit(Band) → Finding.

Every record is frozen; its arrays are checked for shape and dtype and set read-only, also after a
pickle or a deepcopy. Every record points to its maker, so that a number can be followed back to
pixels: `fit.curves[0].trace.panel.page`. No algorithm lives here.

Three pixel frames
------------------
*page*    the page as shown (after the EXIF or /Rotate turn): `Page.pixels`, `Word.box`,
          `Stroke.xy`, `Mark.xy`, `Panel.corners`, `Trace.xy`. x right, y down, the centre of the
          top-left pixel at (0, 0). A vector page has 300 pixels to the inch.
*panel*   one plot box made straight: [0, width] × [0, height], by `Panel.warp`: `Trace.flat`.
*stored*  the image as it lies in the file; only `write` and `notes` use it, by `Page.to_stored`.

Names of values end in `_si` where they are SI: flow m³/s, head and NPSH m, power W, efficiency as
a fraction, pressure Pa, speed 1/s, diameter m.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, fields
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from curvefit.errors import Location
from curvefit.geometry import Warp

__all__ = [
    "BRIDGED",
    "BUNDLED",
    "CROSSING",
    "FLAGS",
    "GIVEN",
    "QUANTITIES",
    "Axis",
    "Band",
    "By",
    "Curve",
    "DutyPoint",
    "Finding",
    "Fit",
    "Interval",
    "Mark",
    "Page",
    "Panel",
    "Pump",
    "Quantity",
    "Reading",
    "Stroke",
    "Trace",
    "Word",
    "flag_names",
]

Array = NDArray[np.float64]
By = Literal["read", "given"]
Side = Literal["bottom", "top", "left", "right"]
Severity = Literal["info", "warning", "error"]

# per-point flags of a trace: a bit each
BRIDGED = 1  #: no ink was seen here: the line was carried over a gap
CROSSING = 2  #: another line crosses here: the ink is shared
BUNDLED = 4  #: runs together with a neighbour; sigma spans the bundle
GIVEN = 8  #: drawn by the user
FLAGS = {"bridged": BRIDGED, "crossing": CROSSING, "bundled": BUNDLED, "given": GIVEN}


def flag_names(bits: int) -> str:
    """The flags of one point in words, joined by a space; "" for none."""
    return " ".join(name for name, bit in FLAGS.items() if bits & bit)


@dataclass(frozen=True, slots=True)
class Quantity:
    """A quantity that a chart can show: its symbol in equations and its dimension."""

    name: str
    symbol: str
    dimension: str
    title: str


QUANTITIES = {
    q.name: q
    for q in (
        Quantity("flow", "Q", "flow", "Flow"),
        Quantity("head", "H", "length", "Total head"),
        Quantity("efficiency", "η", "ratio", "Pump efficiency"),
        Quantity("shaft_power", "P", "power", "Shaft power"),
        Quantity("input_power", "P1", "power", "Input power"),
        Quantity("overall_efficiency", "η_gr", "ratio", "Overall efficiency"),
        Quantity("npsh_required", "NPSHr", "length", "NPSH required"),
        Quantity("differential_pressure", "Δp", "pressure", "Differential pressure"),
        Quantity("iso_efficiency", "H", "length", "Line of equal efficiency"),
        Quantity("iso_shaft_power", "H", "length", "Line of equal shaft power"),
        Quantity("iso_npsh_required", "H", "length", "Line of equal NPSH required"),
    )
}


def _hold(record: Any, name: str, dtype: Any, shape: tuple[int | None, ...]) -> None:
    """Check one array field's shape, cast its dtype and set it read-only."""
    value = getattr(record, name)
    if value is None:
        return
    array = np.array(value, dtype=dtype)
    expected = tuple(n if s is None else s for n, s in zip(array.shape, shape, strict=False))
    if array.ndim != len(shape) or array.shape != expected:
        raise ValueError(f"{type(record).__name__}.{name} has shape {array.shape}, needs {shape}")
    array.setflags(write=False)
    object.__setattr__(record, name, array)


def _rebuild(cls: type, state: dict[str, Any]) -> Any:
    return cls(**state)


class _Record:
    """Pickle and deepcopy go through the constructor, so that arrays stay read-only."""

    __slots__ = ()

    def __reduce__(self) -> tuple[Callable[..., Any], tuple[Any, ...]]:
        state = {f.name: getattr(self, f.name) for f in fields(self) if f.init}  # type: ignore[arg-type]
        return _rebuild, (type(self), state)


@dataclass(frozen=True, slots=True)
class Finding(_Record):
    """Something the user should know: what, where and what to do about it."""

    severity: Severity
    code: str
    message: str
    where: Location = field(default_factory=Location)
    remedy: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class Word(_Record):
    """A piece of printed text: a number, a label or a line of a title.

    box : (4, 2) page px, clockwise from the text's own top-left corner (so a title that reads
    upwards has box[0] at the lower left of the page).
    score : the reader's confidence, 0–1; 1 for the text layer of a PDF.
    """

    text: str
    box: Array
    score: float = 1.0

    def __post_init__(self) -> None:
        _hold(self, "box", float, (4, 2))

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
class Stroke(_Record):
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
        _hold(self, "xy", float, (None, 2))


@dataclass(frozen=True, slots=True, eq=False)
class Page(_Record):
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
        _hold(self, "pixels", np.uint8, (None, None, 3))
        _hold(self, "stored_from_page", float, (3, 3))

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
        from curvefit.geometry import project

        return project(self.stored_from_page, xy)

    def from_stored(self, xy: Array) -> Array:
        """Px of the stored image → page px; arrays of shape (n, 2)."""
        from curvefit.geometry import project

        return project(np.linalg.inv(self.stored_from_page), xy)


@dataclass(frozen=True, slots=True, eq=False)
class Mark(_Record):
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
        _hold(self, "xy", float, (2,))


@dataclass(frozen=True, slots=True, eq=False)
class Axis(_Record):
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
        _hold(self, "covariance", float, (2, 2))

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
class Panel(_Record):
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
        _hold(self, "corners", float, (4, 2))

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
class Trace(_Record):
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
        _hold(self, "flat", float, (None, 2))
        _hold(self, "sigma", float, (len(self.flat),))
        _hold(self, "flags", np.uint8, (len(self.flat),))

    @property
    def xy(self) -> Array:
        """(n, 2) page px."""
        return self.panel.warp.to_page(self.flat)


@dataclass(frozen=True, slots=True)
class Pump(_Record):
    """What the page says of the pump: name, rated speed, stages, suction sides, liquid."""

    name: str
    speed_si: float | None = None
    speed_basis: Literal["printed", "synchronous"] | None = None
    stages: int | None = None
    suction_sides: int | None = None
    density_si: float | None = None
    liquid: str | None = None
    by: By = "read"


@dataclass(frozen=True, slots=True, eq=False)
class Curve(_Record):
    """One line of a chart in engineering quantities, or a table of measured points (trace None).

    flow_si, value_si : (n,); flow strictly increasing except on iso lines.
    sigma_si : (n,) standard uncertainty of value, all causes; None where unknown (measured points).
    trace_sigma_si : (n,) the part of the line alone.
    calibration_si : (n, 4) change of value for one standard deviation of each of four independent
        errors, two of the flow axis then two of the value axis: shared by all curves on the axis.
    correlation_si : length in flow over which trace errors stay alike.
    quantity : a key of QUANTITIES; on iso lines value is the head and `level` the constant.
    flow_unit, unit : UCUM codes of the printed axes; printed_* keep the words of the page.
    diameter_text, label : as printed. speed_unit, level_unit : "/min", "Hz", "%" …
    guessed : names of the fields above that are a guess.
    """

    name: str
    quantity: str
    flow_si: Array
    value_si: Array
    flow_unit: str
    unit: str
    trace: Trace | None = None
    panel: Panel | None = None
    flow_axis: str | None = None
    value_axis: str | None = None
    pump: str = "1"
    sigma_si: Array | None = None
    trace_sigma_si: Array | None = None
    calibration_si: Array | None = None
    correlation_si: float | None = None
    flags: NDArray[np.uint8] | None = None
    diameter_si: float | None = None
    diameter_unit: str = "mm"
    speed_si: float | None = None
    speed_unit: str = "/min"
    speed_ratio: float | None = None
    stages: int | None = None
    level_si: float | None = None
    level_unit: str = "%"
    npsh_basis: str = "not stated"
    label: str = ""
    guessed: tuple[str, ...] = ()
    by: By = "read"
    findings: tuple[Finding, ...] = ()

    def __post_init__(self) -> None:
        n = len(self.flow_si)
        _hold(self, "flow_si", float, (None,))
        for name in ("value_si", "sigma_si", "trace_sigma_si"):
            _hold(self, name, float, (n,))
        _hold(self, "calibration_si", float, (n, 4))
        _hold(self, "flags", np.uint8, (n,))

    @property
    def iso(self) -> bool:
        """Whether this is a line of equal efficiency, power or NPSH."""
        return self.quantity.startswith("iso_")


@dataclass(frozen=True, slots=True, eq=False)
class Band(_Record):
    """A band about a fitted curve on a flow grid, SI.

    kind : "pointwise" or "simultaneous" confidence of the curve, "prediction" of a new point.
    low, high : None where the band is not known.
    """

    flow_si: Array
    value_si: Array
    low_si: Array | None
    high_si: Array | None
    kind: Literal["pointwise", "simultaneous", "prediction"]
    confidence: float

    def __post_init__(self) -> None:
        _hold(self, "flow_si", float, (None,))
        for name in ("value_si", "low_si", "high_si"):
            _hold(self, name, float, (len(self.flow_si),))


@dataclass(frozen=True, slots=True, eq=False)
class Fit(_Record):
    """An equation fitted to one curve or to a family, SI.

    coefficients : plain, constant term first, of value_si in flow_si (polynomials), else None.
    parameters : name → value, SI, for the other families.
    covariance : (k, k) of the coefficients or parameters, all causes but the calibration; None
        where unknown. factors : (m, grid) the trace and equation errors on the band's flow grid,
        one row an independent unit-variance cause; calibration : (4, grid) likewise for the axes
        (flow axis two, value axis two), to be propagated jointly over curves of the same axes.
    flow_range_si : the fitted range; outside it nothing is given.
    derived : "bep", "shut_off", "specific_speed" → dicts of SI numbers and their u_….
    candidates : (name, criterion, note) of each model tried; reason : why this one.
    """

    name: str
    curves: tuple[Curve, ...]
    family: Literal["polynomial", "power", "affinity", "piecewise"]
    degree: int | None
    flow_range_si: tuple[float, float]
    band: Band
    coefficients: Array | None = None
    parameters: dict[str, float] = field(default_factory=dict)
    covariance: Array | None = None
    factors: Array | None = None
    calibration: Array | None = None
    residual_rms_si: float = 0.0
    effective_points: float = 0.0
    derived: dict[str, dict[str, float | None]] = field(default_factory=dict)
    candidates: tuple[tuple[str, float, str], ...] = ()
    reason: str = ""
    knots_si: Array | None = None
    findings: tuple[Finding, ...] = ()

    def __post_init__(self) -> None:
        _hold(self, "coefficients", float, (None,))
        _hold(self, "covariance", float, (None, None))
        _hold(self, "factors", float, (None, len(self.band.flow_si)))
        _hold(self, "calibration", float, (4, len(self.band.flow_si)))
        _hold(self, "knots_si", float, (None, None))

    @property
    def curve(self) -> Curve:
        """The fitted curve (the first one of a family)."""
        return self.curves[0]


@dataclass(frozen=True, slots=True)
class Interval(_Record):
    """A value with its 95 % interval, SI; low and high are None where they are not known."""

    value: float
    low: float | None = None
    high: float | None = None


@dataclass(frozen=True, slots=True)
class DutyPoint(_Record):
    """One crossing of pump and system, SI; None where the chart or the system does not tell.

    shaft_power_si is read from the power curve, hydraulic_power_si is ρgQH, computed_power_si is
    ρgQH/η. stable : a disturbance of the flow dies away. share_of_bep : flow over BEP flow.
    energy_si : energy to the shaft per volume pumped [J/m³]; energy_year_si [J].
    """

    flow_si: Interval
    head_si: Interval
    stable: bool
    efficiency_si: Interval | None = None
    shaft_power_si: Interval | None = None
    computed_power_si: Interval | None = None
    hydraulic_power_si: float | None = None
    npsh_required_si: Interval | None = None
    npsh_available_si: Interval | None = None
    share_of_bep: float | None = None
    energy_si: float | None = None
    energy_year_si: float | None = None


@dataclass(frozen=True, slots=True, eq=False)
class Reading(_Record):
    """All that was read from one page of a chart."""

    page: Page
    panels: tuple[Panel, ...] = ()
    traces: tuple[Trace, ...] = ()
    curves: tuple[Curve, ...] = ()
    pumps: tuple[Pump, ...] = ()
    fits: tuple[Fit, ...] = ()
    findings: tuple[Finding, ...] = ()
    notes: Any = None
    seconds: dict[str, float] = field(default_factory=dict)
