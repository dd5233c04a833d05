"""One look: the chart laid out by hand-written code, for pen and ink or for a vector PDF."""

from __future__ import annotations

import itertools
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from sample_charts.canvas import BLACK, WHITE, Colour, Drawing, text_width
from sample_charts.scenes import AxisSpec, LineSpec, PanelSpec, Scene

Array = NDArray[np.float64]
Box = tuple[float, float, float, float]  # left, top, right, bottom [pt]


@dataclass(frozen=True)
class Style:
    """How a drafted chart looks; one is drawn at random for each chart."""

    font: str
    size: float
    tick: float  # length of a tick [pt], negative inwards, 0 none
    grid: str  # "none", "fine", "dotted", "heavy", "minor", "graph" (ten lines a division)
    grid_colour: Colour
    colours: tuple[Colour, ...]
    dashes: tuple[tuple[float, ...], ...]
    width: float
    frame: float  # width of the frame [pt]
    title: str  # "along", "end", "above"
    label: str  # "end", "start", "on" (in a gap of the line), "leader", "legend"
    thousands: str = ""
    open: bool = False  # only the sides that carry a scale are drawn, no frame


def style(rng: np.random.Generator, mono: bool | None = None, hand: bool = False) -> Style:
    """A random style; `mono` forces black or colour."""
    inks: list[tuple[Colour, ...]] = [
        (BLACK,),
        ((0.05, 0.1, 0.45),),
        ((0.0, 0.25, 0.6), (0.7, 0.1, 0.1), (0.0, 0.45, 0.2), (0.45, 0.2, 0.5)),
        ((0.1, 0.1, 0.1), (0.75, 0.25, 0.0), (0.0, 0.4, 0.45), (0.5, 0.35, 0.05)),
    ]
    pick = int(rng.integers(0, 2)) if mono else int(rng.integers(2, 4))
    greens: list[Colour] = [(0.6, 0.6, 0.6), (0.75, 0.85, 0.75), (0.95, 0.75, 0.6), (0.7, 0.8, 0.9)]
    solid: tuple[tuple[float, ...], ...] = ((),)
    broken = ((), (7.0, 3.0), (9.0, 2.5, 1.5, 2.5), (3.5, 2.0))
    return Style(
        font="hand" if hand else str(rng.choice(["roman", "sans", "mono", "serif"])),
        size=float(rng.uniform(8.0, 9.5)) + 2.0 * hand,
        tick=float(rng.choice([4.0, 3.0, -4.0, 0.0])),
        grid=str(rng.choice(["none", "fine", "dotted", "heavy", "minor"])),
        grid_colour=greens[int(rng.integers(4))],
        colours=inks[pick],
        dashes=broken if mono and rng.random() < 0.5 else solid,
        width=float(rng.uniform(1.0, 1.7)),
        frame=float(rng.uniform(0.6, 1.3)),
        title=str(rng.choice(["along", "end", "above"])),
        label=str(rng.choice(["end", "start"])),
        thousands=str(rng.choice(["", ",", " "])),
    )


def draft(
    scene: Scene, look: Style, width: float = 432.0, height: float = 360.0, top: float = 0.0,
    page: Drawing | None = None,
) -> tuple[Drawing, list[Box]]:  # fmt: skip
    """(drawing, plot boxes) of a scene; the chart is added to a `page` from `top` down."""
    drawing = page or Drawing(width, height)
    shift = (drawing.width - width) / 2
    left, right = (_margin(scene, look, side) for side in ("left", "right"))
    y = top + 12.0
    for k, line in enumerate(scene.heading):
        size = look.size + (2 if k == 0 else 0)
        drawing.text((shift + left, y), _written(line, look), size, look.font, align="left")
        y += look.size + 5
    above = look.size * (1.9 if look.title != "along" else 0.6)
    tops = 3.4 * look.size if any(a.side == "top" for a in scene.panels[0].axes) else 0.0
    gap = look.size * 2.1 + above + (look.size * 1.6 if look.title == "along" else 0)
    bottom = top + height - look.size * 4.2
    shares = np.array([p.height for p in scene.panels])
    free = bottom - (y + above + tops) - gap * (len(scene.panels) - 1)
    boxes: list[Box] = []
    at = y + above + tops
    for panel, tall in zip(scene.panels, free * shares / shares.sum(), strict=True):
        box = (shift + left, at, shift + width - right, at + float(tall))
        _panel(drawing, panel, box, look, scene)
        boxes.append(box)
        at += float(tall) + gap
    return drawing, boxes


def _written(text: str, look: Style) -> str:
    """Text as that hand writes it: a draughtsman letters words in capitals, units as they are."""
    if look.font != "hand":
        return text
    units = {"m", "kW", "mm", "n", "l/s", "L/s", "m3/h", "m³/h", "1/min"}
    return " ".join(w if w.strip("[](),") in units else w.upper() for w in text.split())


def _margin(scene: Scene, look: Style, side: str) -> float:
    columns = max(sum(a.side.startswith(side) for a in p.axes) for p in scene.panels)
    spare = look.size * 2.0 if look.label == "end" and side == "right" else 0.0
    return 18.0 + look.size * 4.3 * columns + (spare if not columns else 0.0)


def place(panel: PanelSpec, line: LineSpec, box: Box, offset: float = 0.0) -> Array:
    """(n, 2) points of a line on the page [pt]."""
    u = panel.axis(line.flow_axis).fraction(line.flow)
    v = panel.axis(line.axis).fraction(line.value)
    x0, y0, x1, y1 = box
    return np.c_[x0 + u * (x1 - x0), y1 - v * (y1 - y0)]


def _panel(drawing: Drawing, panel: PanelSpec, box: Box, look: Style, scene: Scene) -> None:
    x0, y0, x1, y1 = box
    if panel.shaded:
        a, b = x0 + panel.axis("bottom").fraction(np.array(panel.shaded)) * (x1 - x0)
        drawing.area([(a, y0), (b, y0), (b, y1), (a, y1)], (0.88, 0.92, 0.88))
    _grid(drawing, panel, box, look)
    _frame(drawing, panel, box, look)
    lift = 3.2 * look.size if any(a.side == "top" for a in panel.axes) else 0.0
    for axis in panel.axes:
        _axis(drawing, axis, box, look, scene, lift)
    for k, line in enumerate(panel.lines):
        xy = place(panel, line, box)
        colour = look.colours[k % len(look.colours)]
        thin = 0.75 if line.path else 1.0
        dash = look.dashes[k % len(look.dashes)]
        drawing.line(xy, look.width * thin, colour, dash)
        if line.points is not None:
            _markers(drawing, place(panel, _points(line), box), colour, look)
    _labels(drawing, panel, box, look)


def _frame(drawing: Drawing, panel: PanelSpec, box: Box, look: Style) -> None:
    x0, y0, x1, y1 = box
    sides = {"left": [(x0, y0), (x0, y1)], "bottom": [(x0, y1), (x1, y1)],
             "right": [(x1, y0), (x1, y1)], "top": [(x0, y0), (x1, y0)]}  # fmt: skip
    if not look.open:
        drawing.line([(x0, y0), (x1, y0), (x1, y1), (x0, y1), (x0, y0)], look.frame)
        return
    for side in dict.fromkeys(a.side.partition(".")[0] for a in panel.axes):
        drawing.line(sides[side], look.frame)


def _points(line: LineSpec) -> LineSpec:
    assert line.points is not None
    return replace(line, flow=line.points[0], value=line.points[1])


def _markers(drawing: Drawing, xy: Array, colour: Colour, look: Style) -> None:
    r, turn = 2.2 * look.width, np.linspace(0, 2 * np.pi, 25)
    for x, y in xy:
        ring = np.c_[x + r * np.cos(turn), y + r * np.sin(turn)]
        drawing.area(ring, WHITE)
        drawing.line(ring, look.width * 0.7, colour)


def _grid(drawing: Drawing, panel: PanelSpec, box: Box, look: Style) -> None:
    if look.grid == "none":
        return
    x0, y0, x1, y1 = box
    width, dash = {
        "fine": (0.35, ()), "dotted": (0.5, (0.8, 2.2)), "heavy": (0.9, ()), "minor": (0.6, ()),
        "graph": (1.1, ()),
    }[look.grid]  # fmt: skip
    for side in ("bottom", "left"):
        axis = panel.axis(side)
        for value, major in _ticks(axis, look):
            f = float(axis.fraction(np.array(value)))
            if not 0.002 < f < 0.998:
                continue
            w = width if major else width * 0.45
            if side == "bottom":
                x = x0 + f * (x1 - x0)
                drawing.line([(x, y0), (x, y1)], w, look.grid_colour, dash)
            else:
                y = y1 - f * (y1 - y0)
                drawing.line([(x0, y), (x1, y)], w, look.grid_colour, dash)


def _ticks(axis: AxisSpec, look: Style) -> list[tuple[float, bool]]:
    """(value, numbered) of every tick."""
    ticks = [(t, True) for t in axis.ticks]
    parts = {"minor": axis.minor, "graph": 10}.get(look.grid, 1)
    if axis.scale == "linear":
        for a, b in itertools.pairwise(axis.ticks):
            ticks += [(a + (b - a) * k / parts, False) for k in range(1, parts)]
    return sorted(ticks)


def number(value: float, axis: AxisSpec, comma: bool, thousands: str = "") -> str:
    """A tick number as printed."""
    if axis.scale == "log":
        text = f"{value:g}"
    else:
        step = axis.ticks[1] - axis.ticks[0]
        places = next(p for p in range(5) if abs(round(step, p) - step) < 1e-9 * step)
        text = f"{value:.{places}f}"
        if thousands and abs(value) >= 1000:
            text = f"{value:,.{places}f}".replace(",", thousands)
    return text.replace(".", ",") if comma else text


def _axis(
    drawing: Drawing, axis: AxisSpec, box: Box, look: Style, scene: Scene, lift: float
) -> None:
    x0, y0, x1, y1 = box
    side, _, rank = axis.side.partition(".")
    out = (int(rank or 1) - 1) * look.size * 4.3
    edge = {"bottom": y1, "top": y0, "left": x0 - out, "right": x1 + out}[side]
    sign = {"bottom": 1.0, "top": -1.0, "left": -1.0, "right": 1.0}[side]
    flat = side in ("bottom", "top")
    if out:
        drawing.line([(edge, y0), (edge, y1)], look.frame)
    thousands = "" if scene.comma and look.thousands == "," else look.thousands
    reach = 0.0
    for value, major in _ticks(axis, look):
        f = float(axis.fraction(np.array(value)))
        t = look.tick * (1.0 if major else 0.5) * sign
        x, y = x0 + f * (x1 - x0), y1 - f * (y1 - y0)
        tick = [(x, edge), (x, edge + t)] if flat else [(edge, y), (edge + t, y)]
        if look.tick:
            drawing.line(tick, look.frame * 0.8)
        if not major:
            continue
        away = edge + sign * (max(look.tick, 0.0) + 3.0)
        text = number(value, axis, scene.comma, thousands)
        reach = max(reach, text_width(text, look.size, look.font))
        spot = (x, away + sign * 0.45 * look.size) if flat else (away, y)
        align = "centre" if flat else ("right" if side == "left" else "left")
        drawing.text(spot, text, look.size, look.font, align=align)
        if not scene.numbers:
            _paint_over(drawing, spot, text, align, look)
    _title(drawing, axis, box, edge, sign, reach, look, lift)


def _paint_over(
    drawing: Drawing, spot: tuple[float, float], text: str, align: str, look: Style
) -> None:
    wide, half = text_width(text, look.size, look.font), 0.62 * look.size
    left = spot[0] - {"left": 0.0, "centre": wide / 2, "right": wide}[align] - 1.0
    low, high = spot[1] - half, spot[1] + half
    right = left + wide + 2.0
    drawing.area([(left, low), (right, low), (right, high), (left, high)], WHITE)


def _title(drawing: Drawing, axis: AxisSpec, box: Box, edge: float, sign: float, reach: float,
           look: Style, lift: float) -> None:  # fmt: skip
    """The title; `lift` is the height of a flow axis on top, which value titles clear."""
    x0, y0, x1, y1 = box
    side = axis.side.partition(".")[0]
    size, title = look.size, _written(axis.title, look)
    if side in ("bottom", "top"):
        y = edge + sign * (max(look.tick, 0) + 3.0 + 1.9 * size)
        if look.title == "end":
            drawing.text((x1, y), title, size, look.font, align="right")
        else:
            drawing.text(((x0 + x1) / 2, y), title, size, look.font)
    elif look.title == "along":
        x = edge + sign * (max(look.tick, 0) + 5.0 + reach + 0.7 * size)
        turn = 90.0 if side == "left" or look.frame < 1.0 else -90.0
        drawing.text((x, (y0 + y1) / 2), title, size, look.font, angle=turn)
    else:
        stagger = 1.3 * size * (axis.side.count(".") and 1)
        x = edge - 2.2 * size if side == "left" else edge + 2.2 * size
        drawing.text((x, y0 - 1.25 * size - stagger - lift), title, size, look.font,
                     align="left" if side == "left" else "right")  # fmt: skip


def _labels(drawing: Drawing, panel: PanelSpec, box: Box, look: Style) -> None:
    """The lines' labels, in the style's place."""
    if look.label == "legend":
        _legend(drawing, panel, box, look)
    elif look.label in ("on", "leader"):
        for k, line in enumerate(panel.lines):
            if line.label:
                xy = place(panel, line, box)
                colour = look.colours[k % len(look.colours)]
                spot = xy[int(len(xy) * (0.5 + 0.06 * (k % 4)))]
                (_on if look.label == "on" else _leader)(drawing, spot, line.label, colour, look)
    else:
        _end_labels(drawing, panel, box, look)


def _on(drawing: Drawing, spot: Array, label: str, colour: Colour, look: Style) -> None:
    """A label that stands on its line, the line left out behind it."""
    wide, half = text_width(label, look.size, look.font) / 2 + 2.0, 0.6 * look.size
    x, y = spot
    corners = [
        (x - wide, y - half),
        (x + wide, y - half),
        (x + wide, y + half),
        (x - wide, y + half),
    ]
    drawing.area(corners, WHITE)
    drawing.text((x, y), label, look.size, look.font, colour)


def _leader(drawing: Drawing, spot: Array, label: str, colour: Colour, look: Style) -> None:
    """A label off the line, tied to it by a thin line."""
    x, y = spot[0] + 22.0, spot[1] - 20.0
    drawing.line([spot, (x, y), (x + 4, y)], 0.5)
    drawing.text((x + 6, y), label, look.size, look.font, align="left")


def _legend(drawing: Drawing, panel: PanelSpec, box: Box, look: Style) -> None:
    """A framed list of lines and their labels in the lower left of the box."""
    named = [(k, line) for k, line in enumerate(panel.lines) if line.label and not line.path]
    wide = 34.0 + max(text_width(line.label, look.size, look.font) for _, line in named)
    tall = 1.4 * look.size * len(named) + 4.0
    x, y = box[0] + 12.0, box[3] - tall - 10.0
    frame = [(x, y), (x + wide, y), (x + wide, y + tall), (x, y + tall), (x, y)]
    drawing.area(frame, WHITE)
    drawing.line(frame, 0.6)
    for row, (k, line) in enumerate(named):
        at = y + 2.0 + (row + 0.5) * 1.4 * look.size
        colour, dash = look.colours[k % len(look.colours)], look.dashes[k % len(look.dashes)]
        drawing.line([(x + 5, at), (x + 25, at)], look.width, colour, dash)
        drawing.text((x + 30, at), line.label, look.size, look.font, align="left")


def _end_labels(drawing: Drawing, panel: PanelSpec, box: Box, look: Style) -> None:
    """Labels at the lines' ends, pushed apart where they would touch."""
    x1 = box[2]
    spots = []
    for k, line in enumerate(panel.lines):
        if not line.label:
            continue
        xy = place(panel, line, box)
        length = text_width(line.label, look.size, look.font)
        colour = look.colours[k % len(look.colours)]
        if line.path:
            x, y = xy[-1] if k % 2 else xy[0]
            spots.append([x, y - 0.8 * look.size, line.label, "centre", colour])
        elif look.label == "end" or not _falls(line):
            x, y = xy[-1]
            inside = x + 4 + length < x1 - 2 or not any(a.side == "right" for a in panel.axes)
            if inside:
                spots.append([x + 4, y, line.label, "left", colour])
            else:
                spots.append([x1 - 4, y - 1.1 * look.size, line.label, "right", colour])
        else:
            x, y = xy[len(xy) // 30]
            spots.append([x + 5, y - 0.85 * look.size, line.label, "left", colour])
    spots.sort(key=lambda s: s[1])
    for above, below in itertools.pairwise(spots):
        if abs(above[0] - below[0]) < 40 and below[1] - above[1] < 1.15 * look.size:
            below[1] = above[1] + 1.15 * look.size
    for x, y, label, align, colour in spots:
        drawing.text((x, y), label, look.size, look.font, colour, align=align)


def _falls(line: LineSpec) -> bool:
    return bool(line.value[-1] < line.value[0])
