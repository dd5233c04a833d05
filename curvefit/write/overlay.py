"""STEM.overlay.png: the page with what was read drawn over it.

At a glance each line stands out as if marked with a pen of its own colour and dash; on a close
look a thin line runs along the centre of the ink, which stays visible on both sides of it.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import arc_length, resample
from curvefit.records import BRIDGED, BUNDLED, Curve, Finding, Panel, Reading, Trace

if TYPE_CHECKING:
    from PIL.ImageDraw import ImageDraw as Draw

__all__ = ["COLOURS", "jpeg", "overlay", "png"]

Array = NDArray[np.float64]
Picture = NDArray[np.uint8]

#: colours that people of every colour vision tell apart (Okabe & Ito, Color Universal Design, 2008)
COLOURS = (
    (0, 114, 178),
    (213, 94, 0),
    (0, 158, 115),
    (204, 121, 167),
    (230, 159, 0),
    (86, 180, 233),
)
#: lengths on and off along the line, in widths of the pen; () is solid
DASHES: tuple[tuple[float, ...], ...] = ((), (4, 1.5), (1.5, 1), (6, 1, 1.5, 1))
_BOX = (60, 60, 60)
_DOUBT = (200, 0, 60)


@dataclass(frozen=True, slots=True)
class Settings:
    """paper : share of white mixed into the page. pixels : the largest picture [px].

    pen : width of the marked line; text : height of letters [px]; both grow with the scale.
    """

    paper: float = 0.45
    pixels: float = 7e6
    most: float = 3.0
    pen: float = 7.0
    text: float = 13.0


def overlay(reading: Reading, settings: Settings | None = None) -> Picture:
    """The picture, (height, width, 3) uint8 RGB: small pages enlarged, very large ones reduced."""
    import cv2
    from PIL import Image, ImageDraw

    s = settings or Settings()
    width, height = reading.page.size
    scale = min(s.most, max(1.0, np.floor(np.sqrt(s.pixels / (width * height)))))
    if width * height > 2 * s.pixels:
        scale = float(np.sqrt(2 * s.pixels / (width * height)))
    grain = max(1.0, scale * min(width, height) / 1000)
    paper = np.array(reading.page.pixels)
    if scale != 1:
        kind = cv2.INTER_CUBIC if scale > 1 else cv2.INTER_AREA
        paper = cv2.resize(paper, None, fx=scale, fy=scale, interpolation=kind)
    # lighter, and in 16 steps, so that the grain of a scan does not fill the file
    lighter = np.arange(256) * (1 - s.paper) + 255 * s.paper
    paper = cv2.LUT(paper, np.minimum(lighter // 16 * 16 + 15, 255).astype(np.uint8))
    canvas = _Canvas(paper, scale, grain, s)
    lines = _lines(reading)
    for line in lines:
        canvas.pen(line)
    canvas.blend()
    for panel in reading.panels:
        canvas.box(panel)
    for line in lines:
        canvas.centre(line)
    image = Image.fromarray(canvas.picture)
    points = np.concatenate([resample(line.xy, 8) for line in lines] or [np.zeros((0, 2))])
    write = _Writing(ImageDraw.Draw(image), scale, s.text * grain, points)
    for panel in reading.panels:
        write.axes(panel)
    for finding in reading.findings:
        write.doubt(finding)
    for line in lines:
        write.name(line)
    return np.asarray(_with_key(image, reading, write))


def png(picture: Picture) -> bytes:
    """The picture as PNG, without metadata."""
    import cv2

    flags = [cv2.IMWRITE_PNG_COMPRESSION, 2]
    done, data = cv2.imencode(".png", cv2.cvtColor(picture, cv2.COLOR_RGB2BGR), flags)
    assert done
    return bytes(data)


def jpeg(picture: Picture, width: int = 2000, quality: int = 75) -> bytes:
    """The picture as JPEG of at most a given width, without metadata."""
    import cv2

    if picture.shape[1] > width:
        f = width / picture.shape[1]
        picture = cv2.resize(picture, None, fx=f, fy=f, interpolation=cv2.INTER_AREA)
    bgr = cv2.cvtColor(picture, cv2.COLOR_RGB2BGR)
    done, data = cv2.imencode(".jpg", bgr, [cv2.IMWRITE_JPEG_QUALITY, quality])
    assert done
    return bytes(data)


@dataclass(frozen=True, slots=True, eq=False)
class _Line:
    """One line to draw: page px, flags, colour, dash, and the name at its end."""

    xy: Array
    flags: NDArray[np.uint8]
    width: float
    colour: tuple[int, int, int]
    dash: tuple[float, ...]
    name: str
    doubtful: bool


def _lines(reading: Reading) -> list[_Line]:
    """Every curve, and every trace that became none; those are named "?"."""
    found: list[tuple[Trace, Curve | None]] = [
        (c.trace, c) for c in reading.curves if c.trace is not None
    ]
    taken = {(t.panel.name, t.name) for t, _ in found}  # a curve's trace may be cut to its box
    found += [(t, None) for t in reading.traces if (t.panel.name, t.name) not in taken]
    lines = []
    for i, (trace, curve) in enumerate(found):
        doubtful = curve is None or any(
            f.severity != "info" and f.where.curve == curve.name for f in reading.findings
        )
        lines.append(
            _Line(
                trace.xy,
                trace.flags,
                trace.width,
                COLOURS[i % len(COLOURS)],
                DASHES[i % len(DASHES)],
                curve.name if curve is not None else trace.name,
                doubtful,
            )
        )
    return lines


class _Canvas:
    """The picture while lines are drawn on it; works in page px."""

    def __init__(self, paper: Picture, scale: float, grain: float, settings: Settings) -> None:
        self.picture = paper
        self.tint = np.full_like(paper, 255)
        self.scale, self.grain, self.settings = scale, grain, settings

    def _draw(
        self, on: Picture, xy: Array, colour: Any, width: float, closed: bool = False
    ) -> None:
        import cv2

        # a pixel's centre is a whole number, also after enlarging; 4 binary places below it
        points = np.round(((xy + 0.5) * self.scale - 0.5) * 16).astype(np.int32)
        width = max(1, round(width))
        cv2.polylines(on, [points.reshape(-1, 1, 2)], closed, colour, width, cv2.LINE_AA, 4)

    def pen(self, line: _Line) -> None:
        """Marks a line with a broad pen; hollow where it was carried over a gap."""
        width = max(self.settings.pen * self.grain, 2 * line.width * self.scale + 4 * self.grain)
        light = tuple(int(255 - 0.5 * (255 - c)) for c in line.colour)
        for piece in _dashed(line.xy, [d * width / self.scale for d in line.dash]):
            self._draw(self.tint, piece, light, width)
        for piece in _stretches(line, BRIDGED):
            self._draw(self.tint, piece, (255, 255, 255), width)

    def blend(self) -> None:
        """Lays what the pen marked over the page, which stays visible through it."""
        import cv2

        self.picture = np.asarray(cv2.multiply(self.picture, self.tint, scale=1 / 255))

    def box(self, panel: Panel) -> None:
        """The plot box."""
        t = np.linspace(0, 1, 40)
        sides = [
            panel.at(t, t * 0),
            panel.at(t * 0 + 1, t),
            panel.at(t, t * 0 + 1),
            panel.at(t * 0, t),
        ]
        for side in sides:
            for piece in _dashed(side, [9 * self.grain / self.scale, 6 * self.grain / self.scale]):
                self._draw(self.picture, piece, _BOX, 1)

    def centre(self, line: _Line) -> None:
        """The centre of the ink, a pixel wide; dotted over gaps, ruled across where bundled."""
        normal = tuple(int(0.75 * c) for c in line.colour)
        bright = tuple(int(255 - 0.1 * (255 - c)) for c in line.colour)
        self._draw(self.picture, line.xy, bright, 1)
        step = self.grain / self.scale
        for piece in _stretches(line, BRIDGED):
            self._draw(self.picture, piece, (255, 255, 255), 1)
            for dash in _dashed(piece, [3 * step, 3 * step]):
                self._draw(self.picture, dash, _DOUBT, 1.5 * self.grain)
        for piece in _stretches(line, BUNDLED):
            for rule in _rules(piece, 10 * step, 5 * step):
                self._draw(self.picture, rule, normal, 1)


def _stretches(line: _Line, flag: int) -> list[Array]:
    """The parts of a line whose points carry a flag, at least two points each."""
    on = np.r_[False, (line.flags & flag) > 0, False]
    edges = np.flatnonzero(np.diff(on.astype(int)))
    pairs = zip(edges[::2], edges[1::2], strict=True)
    return [line.xy[max(a - 1, 0) : b + 1] for a, b in pairs if len(line.xy) > 1]


def _dashed(xy: Array, lengths: list[float]) -> list[Array]:
    """A polyline cut into dashes: lengths on, off, … [px]; no lengths leave it whole."""
    if not lengths or len(xy) < 2:
        return [xy]
    s = arc_length(xy)
    cuts = np.cumsum(np.tile(lengths, int(s[-1] / sum(lengths)) + 1))
    starts = np.r_[0.0, cuts[1::2]]
    pieces = []
    for a, b in zip(starts, cuts[::2], strict=False):
        if a >= s[-1]:
            break
        inner = s[(s > a) & (s < b)]
        at = np.r_[a, inner, min(b, s[-1])]
        pieces.append(np.c_[np.interp(at, s, xy[:, 0]), np.interp(at, s, xy[:, 1])])
    return pieces


def _rules(xy: Array, every: float, half: float) -> list[Array]:
    """Short strokes across a polyline."""
    if len(xy) < 2:
        return []
    s = arc_length(xy)
    at = np.arange(0, s[-1] + 1e-9, every)
    p = np.c_[np.interp(at, s, xy[:, 0]), np.interp(at, s, xy[:, 1])]
    d = np.c_[np.interp(at, s, np.gradient(xy[:, 0])), np.interp(at, s, np.gradient(xy[:, 1]))]
    n = np.c_[-d[:, 1], d[:, 0]] / np.maximum(np.hypot(d[:, 0], d[:, 1]), 1e-9)[:, None]
    return [np.array([a, b]) for a, b in zip(p - half * n, p + half * n, strict=True)]


class _Writing:
    """Names and values, none over another, each with a light rim.

    lines : (n, 2) points of all lines, page px, which names had better not cover.
    """

    def __init__(self, draw: Draw, scale: float, size: float, lines: Array) -> None:
        self.draw, self.scale, self.size = draw, scale, size
        self.font, self.small = _font(size), _font(0.8 * size)
        self.taken: list[tuple[float, float, float, float]] = []
        self.lines = self.to_picture(lines)

    def to_picture(self, xy: Array) -> Array:
        return np.asarray((np.asarray(xy, float) + 0.5) * self.scale - 0.5)

    def axes(self, panel: Panel) -> None:
        """A cross at every mark with its value; a circle at marks the scale does not rest on."""
        r = 0.35 * self.size
        centre = self.to_picture(panel.corners.mean(0))
        for axis in panel.axes:
            further = axis.name.rpartition(".")[2].isdigit()  # a second scale on this side
            colour = COLOURS[3] if further else COLOURS[0]
            for mark in axis.marks:
                x, y = self.to_picture(mark.xy)
                if not mark.used or mark.value is None:
                    self.draw.ellipse([x - r, y - r, x + r, y + r], outline=_DOUBT)
                    continue
                self.draw.line([(x - r, y), (x + r, y)], fill=colour, width=1)
                self.draw.line([(x, y - r), (x, y + r)], fill=colour, width=1)
                # inside the box, where the page's own numbers do not stand
                wide, high = self.extent(f"{mark.value:g}", self.small)
                left = x + r if x < centre[0] else x - r - wide
                top = y + 0.3 * r if y < centre[1] else y - 0.3 * r - high
                if axis.along_flow and abs(x - centre[0]) < 0.9 * abs(centre[0] - left):
                    left = x - wide / 2
                self._put(f"{mark.value:g}", left, top, colour, self.small, [(0, 0)], keep=False)
        x, y = self.to_picture(panel.corners[0])
        shown = f"panel {panel.name}"
        self._put(shown, x + 3 * self.size, y + r, _BOX, self.font, [(0, 0)])

    def doubt(self, finding: Finding) -> None:
        """A frame about the place of a warning."""
        box = finding.where.box_px
        if box is None or finding.severity == "info":
            return
        (x0, y0), (x1, y1) = self.to_picture(np.array(box).reshape(2, 2))
        self.draw.rectangle([x0, y0, x1, y1], outline=_DOUBT, width=2)
        ways = [(0.0, -1.1 * self.size), (0.0, y1 - y0), (0.0, 0.0)]
        self._put(f"! {finding.code}", x0, y0, _DOUBT, self.small, ways)

    def name(self, line: _Line) -> None:
        """The line's name beside its right end, where the least is covered."""
        end = line.xy[-1] if line.xy[-1, 0] >= line.xy[0, 0] else line.xy[0]
        x, y = self.to_picture(end)
        text = f"{line.name} ?" if line.doubtful else line.name
        colour = tuple(int(0.75 * c) for c in line.colour)
        wide, high = self.extent(text, self.font)
        gap = 0.6 * self.size
        sides = [(gap, -high / 2), (gap, gap), (gap, -gap - high), (-wide / 2, -gap - high)]
        sides += [(-wide / 2, gap), (-wide - gap, gap), (-wide - gap, -gap - high)]
        ways = [(dx, dy + k * high) for k in (0, 1, -1, 2, -2, 3, -3) for dx, dy in sides]
        self._put(text, x, y, colour, self.font, ways)

    def extent(self, text: str, font: Any) -> tuple[float, float]:
        """Width and height of a text [px of the picture]."""
        return self.draw.textlength(_shown(text), font=font), 1.2 * font.size

    def _put(
        self,
        text: str,
        x: float,
        y: float,
        colour: Any,
        font: Any,
        ways: list[tuple[float, float]],
        keep: bool = True,
    ) -> None:
        """Writes a text beside a place, in the first way that is free, else the least bad one.

        With `keep` False it is left out where there is another text already.
        """
        wide, high = self.extent(text, font)
        limit_x, limit_y = self.draw.im.size
        best, least = None, np.inf
        for k, (dx, dy) in enumerate(ways):
            left = min(max(x + dx, 1), max(limit_x - wide - 1, 1))
            box = (left, y + dy, left + wide, y + dy + high)
            if box[1] < 0 or box[3] > limit_y:
                continue
            cost = 1000.0 * sum(_meet(box, other) for other in self.taken) + 0.2 * k
            if len(ways) > 1:
                cost += self._covered(box)
            if cost < least:
                best, least = box, cost
        if best is None or (not keep and least >= 1000):
            return
        self.taken.append(best)
        self.draw.text(
            best[:2], _shown(text), fill=colour, font=font, stroke_width=2, stroke_fill="white"
        )

    def _covered(self, box: tuple[float, float, float, float]) -> float:
        """How many points of lines lie in a box."""
        x, y = self.lines[:, 0], self.lines[:, 1]
        return float(((x > box[0]) & (x < box[2]) & (y > box[1]) & (y < box[3])).sum())


def _shown(text: str) -> str:
    return "".join(c if c.isprintable() else "�" for c in text)[:60]


def _meet(a: tuple[float, ...], b: tuple[float, ...]) -> bool:
    return a[0] < b[2] and b[0] < a[2] and a[1] < b[3] and b[1] < a[3]


def _font(size: float) -> Any:
    """A font that knows Ø, η and the like: the one that comes with the plotting library."""
    from importlib.util import find_spec
    from pathlib import Path

    from PIL import ImageFont

    spec = find_spec("matplotlib")
    if spec is not None and spec.origin is not None:
        path = Path(spec.origin).parent / "mpl-data" / "fonts" / "ttf" / "DejaVuSans.ttf"
        if path.is_file():
            return ImageFont.truetype(str(path), size)
    return ImageFont.load_default(size)


def _with_key(image: Any, reading: Reading, writing: _Writing) -> Any:
    """The picture with a strip below it that explains the marks."""
    from PIL import Image, ImageDraw

    texts = (
        "bright thin line: centre of the ink",
        "red dots: no ink here, carried over a gap",
        "strokes across: runs together with a neighbour",
        "cross: mark of an axis with its value",
        "name with ?: see the findings",
    )
    size, font = writing.size, writing.small
    rows: list[str] = []
    row = ""
    for text in texts:
        longer = f"{row}   ·   {text}" if row else text
        if row and writing.draw.textlength(longer, font=font) > image.width - 2 * size:
            rows, longer = [*rows, row], text
        row = longer
    rows = [*rows, row] if reading.panels else ["no plot box was found on this page"]
    whole = Image.new("RGB", (image.width, image.height + round((len(rows) + 1) * 1.3 * size)))
    whole.paste((255, 255, 255), (0, 0, *whole.size))
    whole.paste(image, (0, 0))
    draw = ImageDraw.Draw(whole)
    for i, text in enumerate(rows):
        draw.text((size, image.height + (i + 0.5) * 1.3 * size), text, fill=_BOX, font=font)
    return whole
