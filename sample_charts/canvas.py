"""A list of strokes, fills and texts in points, and two ways to put it on paper: ink and PDF.

Coordinates are points (1/72 inch), origin at the top left, y down. A place x lies in pixel
x·dpi/72 − 0.5 of a picture, where the centre of the top-left pixel is (0, 0).
"""

from __future__ import annotations

import io
from dataclasses import dataclass, field
from functools import lru_cache
from pathlib import Path
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from sample_charts.lettering import strokes

Array = NDArray[np.float64]
Colour = tuple[float, float, float]
BLACK: Colour = (0.0, 0.0, 0.0)
WHITE: Colour = (1.0, 1.0, 1.0)
SHIFT = 6  # fractional bits of the drawing routine

FONTS = {
    "roman": "STIXGeneral.ttf",
    "bold": "STIXGeneralBol.ttf",
    "sans": "DejaVuSans.ttf",
    "mono": "DejaVuSansMono.ttf",
    "serif": "DejaVuSerif.ttf",
}


@dataclass(frozen=True)
class Line:
    """A polyline, or a filled area where `fill` is set."""

    xy: Array
    width: float = 0.8
    colour: Colour = BLACK
    dash: tuple[float, ...] = ()
    fill: bool = False


@dataclass(frozen=True)
class Text:
    """A line of text; `at` is the middle of its height at the left, centre or right of it."""

    at: tuple[float, float]
    text: str
    size: float
    font: str = "sans"
    colour: Colour = BLACK
    angle: float = 0.0  # degrees, counter-clockwise
    align: Literal["left", "centre", "right"] = "centre"


@dataclass
class Drawing:
    """All that stands on one page, in drawing order."""

    width: float
    height: float
    marks: list[Line | Text] = field(default_factory=list)

    def line(self, xy: object, width: float = 0.8, colour: Colour = BLACK,
             dash: tuple[float, ...] = ()) -> None:  # fmt: skip
        """Add a stroke."""
        self.marks.append(Line(np.asarray(xy, float), width, colour, dash))

    def area(self, xy: object, colour: Colour) -> None:
        """Add a filled area."""
        self.marks.append(Line(np.asarray(xy, float), 0.0, colour, (), True))

    def text(self, at: tuple[float, float], text: str, size: float, font: str = "sans",
             colour: Colour = BLACK, angle: float = 0.0,
             align: Literal["left", "centre", "right"] = "centre") -> None:  # fmt: skip
        """Add a line of text."""
        self.marks.append(Text(at, text, size, font, colour, angle, align))


def font_file(name: str) -> str:
    """Path of a font that matplotlib ships, so that every machine draws the same."""
    import matplotlib

    return str(Path(matplotlib.get_data_path()) / "fonts" / "ttf" / FONTS[name])


@lru_cache(maxsize=64)
def _font(name: str, size: int):  # type: ignore[no-untyped-def]
    from PIL import ImageFont

    return ImageFont.truetype(font_file(name), size)


def text_width(text: str, size: float, font: str) -> float:
    """Length of a line of text [pt]."""
    if font == "hand":
        return strokes(text, size)[1]
    return float(_font(font, 200).getlength(text)) * size / 200


# -- ink ------------------------------------------------------------------------------------------


def ink(drawing: Drawing, dpi: float, fine: int = 4, hand: np.random.Generator | None = None):  # type: ignore[no-untyped-def]
    """The drawing as (height, width, 3) uint8: `fine`-times finer strokes, then averaged."""
    import cv2

    scale = dpi / 72 * fine
    size = (round(drawing.height * dpi / 72) * fine, round(drawing.width * dpi / 72) * fine)
    paper = np.full((*size, 3), 255, np.uint8)
    for mark in drawing.marks:
        if isinstance(mark, Line):
            _ink_line(paper, mark, scale)
        elif mark.font == "hand":
            _ink_hand(paper, mark, scale, hand)
        else:
            _ink_text(paper, mark, scale)
    small = (size[1] // fine, size[0] // fine)
    return cv2.resize(paper, small, interpolation=cv2.INTER_AREA)


def _ink_line(paper: NDArray[np.uint8], mark: Line, scale: float) -> None:
    import cv2

    colour = tuple(round(255 * c) for c in mark.colour)
    xy = mark.xy * scale - 0.5
    if mark.fill:
        cv2.fillPoly(paper, [_fixed(xy)], colour, cv2.LINE_8, SHIFT)
        return
    width = max(1, round(mark.width * scale))
    for piece in dashes(xy, tuple(d * scale for d in mark.dash)):
        cv2.polylines(paper, [_fixed(piece)], False, colour, width, cv2.LINE_8, SHIFT)


def _fixed(xy: Array) -> NDArray[np.int32]:
    return np.round(xy * (1 << SHIFT)).astype(np.int32).reshape(-1, 1, 2)


def dashes(xy: Array, pattern: tuple[float, ...]) -> list[Array]:
    """A polyline cut into its dashes; `pattern` holds lengths on, off, on, off …"""
    if not pattern:
        return [xy]
    steps = np.hypot(*np.diff(xy, axis=0).T)
    along = np.r_[0.0, np.cumsum(steps)]
    pieces, at, k = [], 0.0, 0
    while at < along[-1]:
        end = min(at + pattern[k % len(pattern)], along[-1])
        if k % 2 == 0:
            inner = along[(along > at) & (along < end)]
            where = np.r_[at, inner, end]
            pieces.append(
                np.c_[np.interp(where, along, xy[:, 0]), np.interp(where, along, xy[:, 1])]
            )
        at, k = end, k + 1
    return pieces


def _ink_text(paper: NDArray[np.uint8], mark: Text, scale: float) -> None:
    from PIL import Image, ImageDraw

    font = _font(mark.font, max(4, round(mark.size * scale)))
    wide = round(font.getlength(mark.text)) + 4
    up, down = font.getmetrics()
    stamp = Image.new("L", (wide, up + down), 0)
    ImageDraw.Draw(stamp).text((2, 0), mark.text, fill=255, font=font)
    middle = up - font.getbbox("0", anchor="ls")[1] * -0.5  # half the height of a digit
    cover = np.asarray(stamp.rotate(mark.angle, expand=True, resample=Image.Resampling.BICUBIC))
    lead = {"left": -wide / 2, "centre": 0.0, "right": wide / 2}[mark.align]
    turn = np.radians(mark.angle)
    shift = np.array([-lead, (up + down) / 2 - middle])  # stamp centre from the anchor, unturned
    shift = np.array([shift[0] * np.cos(turn) + shift[1] * np.sin(turn),
                      -shift[0] * np.sin(turn) + shift[1] * np.cos(turn)])  # fmt: skip
    corner = np.array(mark.at) * scale + shift - np.array(cover.shape[::-1]) / 2
    _blend(paper, cover, round(corner[0]), round(corner[1]), mark.colour)


def _blend(paper: NDArray[np.uint8], cover: NDArray[np.uint8], x: int, y: int, c: Colour) -> None:
    y0, x0 = max(y, 0), max(x, 0)
    y1, x1 = min(y + cover.shape[0], paper.shape[0]), min(x + cover.shape[1], paper.shape[1])
    if y1 <= y0 or x1 <= x0:
        return
    part = cover[y0 - y : y1 - y, x0 - x : x1 - x, None].astype(float) / 255
    under = paper[y0:y1, x0:x1].astype(float)
    paper[y0:y1, x0:x1] = np.round(under * (1 - part) + 255 * np.array(c) * part)


def _ink_hand(
    paper: NDArray[np.uint8], mark: Text, scale: float, rng: np.random.Generator | None
) -> None:
    lines, length = strokes(mark.text, mark.size, rng)
    lead = {"left": 0.0, "centre": length / 2, "right": length}[mark.align]
    turn = np.radians(mark.angle)
    matrix = np.array([[np.cos(turn), np.sin(turn)], [-np.sin(turn), np.cos(turn)]])
    for line in lines:
        xy = (line - [lead, 0.0]) @ matrix.T + np.array(mark.at)
        _ink_line(paper, Line(xy, 0.085 * mark.size, mark.colour), scale)


# -- PDF ------------------------------------------------------------------------------------------


def pdf(drawings: list[Drawing], compress: bool = True) -> bytes:
    """The drawings as the pages of a vector PDF."""
    from reportlab import rl_config
    from reportlab.pdfgen.canvas import Canvas

    rl_config.invariant = 1
    out = io.BytesIO()
    canvas = Canvas(out, pageCompression=int(compress), invariant=1)
    for drawing in drawings:
        canvas.setPageSize((drawing.width, drawing.height))
        for mark in drawing.marks:
            (_pdf_line if isinstance(mark, Line) else _pdf_text)(canvas, mark, drawing.height)  # type: ignore[arg-type]
        canvas.showPage()
    canvas.save()
    return out.getvalue()


def _pdf_line(canvas, mark: Line, height: float) -> None:  # type: ignore[no-untyped-def]
    path = canvas.beginPath()
    path.moveTo(mark.xy[0, 0], height - mark.xy[0, 1])
    for x, y in mark.xy[1:]:
        path.lineTo(x, height - y)
    if mark.fill:
        canvas.setFillColorRGB(*mark.colour)
        canvas.drawPath(path, stroke=0, fill=1)
        return
    canvas.setStrokeColorRGB(*mark.colour)
    canvas.setLineWidth(mark.width)
    canvas.setDash(*((list(mark.dash), 0) if mark.dash else ([], 0)))
    canvas.drawPath(path, stroke=1, fill=0)


def _pdf_text(canvas, mark: Text, height: float) -> None:  # type: ignore[no-untyped-def]
    from reportlab.pdfbase import pdfmetrics

    font = _pdf_font(mark.font, mark.text)
    canvas.saveState()
    canvas.setFillColorRGB(*mark.colour)
    canvas.translate(mark.at[0], height - mark.at[1])
    canvas.rotate(mark.angle)
    canvas.setFont(font, mark.size)
    length = pdfmetrics.stringWidth(mark.text, font, mark.size)
    lead = {"left": 0.0, "centre": length / 2, "right": length}[mark.align]
    canvas.drawString(-lead, -0.36 * mark.size, mark.text)
    canvas.restoreState()


def _pdf_font(name: str, text: str) -> str:
    """A standard PDF font where it has the letters, otherwise a shipped one."""
    from reportlab.pdfbase import pdfmetrics
    from reportlab.pdfbase.ttfonts import TTFont

    standard = {"sans": "Helvetica", "roman": "Times-Roman", "bold": "Helvetica-Bold",
                "mono": "Courier"}  # fmt: skip
    if name in standard and all(ord(c) < 256 for c in text):
        return standard[name]
    shipped = f"shipped-{name if name in FONTS else 'sans'}"
    if shipped not in pdfmetrics.getRegisteredFontNames():
        pdfmetrics.registerFont(TTFont(shipped, font_file(shipped.removeprefix("shipped-"))))
    return shipped


def raster(document: bytes, dpi: float, page: int = 0) -> NDArray[np.uint8]:
    """One page of a PDF as (height, width, 3) uint8."""
    import pypdfium2

    with pypdfium2.PdfDocument(document) as opened:
        picture = opened[page].render(scale=dpi / 72).to_numpy()
    return np.ascontiguousarray(picture[:, :, 2::-1] if picture.ndim == 3 else
                                np.repeat(picture[:, :, None], 3, 2))  # fmt: skip
