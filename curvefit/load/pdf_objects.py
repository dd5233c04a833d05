"""What is painted on a PDF page, found in the child process: paths and images, forms opened."""

from __future__ import annotations

import ctypes
from array import array
from dataclasses import dataclass
from typing import Any

from curvefit.load.refusal import Refusal

__all__ = ["Drawing", "Matrix", "Picture", "then"]

Matrix = tuple[float, float, float, float, float, float]
Box = tuple[float, float, float, float]
UNIT: Matrix = (1.0, 0.0, 0.0, 1.0, 0.0, 0.0)
MOVE, LINE, BEZIER, CLOSE = 0, 1, 2, 4
SKEW = 2e-3  #: share by which an upright image may lean


def then(first: Matrix, second: Matrix) -> Matrix:
    """The PDF matrix that applies the first, then the second."""
    a, b, c, d, e, f = first
    p, q, r, s, t, u = second
    return (
        a * p + b * r,
        a * q + b * s,
        c * p + d * r,
        c * q + d * s,
        e * p + f * r + t,
        e * q + f * s + u,
    )


@dataclass(frozen=True, slots=True)
class Path:
    """A painted path: raw segments, and style as [red, green, blue, alpha] and lengths [pt]."""

    raw: Any
    matrix: Matrix
    segments: int
    stroked: bool
    filled: bool


@dataclass(frozen=True, slots=True)
class Picture:
    """An image on the page: the unit square through `matrix`; share of the page that it covers."""

    raw: Any
    matrix: Matrix
    size: tuple[int, int]
    share: float

    @property
    def upright(self) -> bool:
        """Whether rows run to the right and columns down."""
        a, b, c, d, _, _ = self.matrix
        return a > 0 and d > 0 and abs(b) < SKEW * a and abs(c) < SKEW * d

    @property
    def dpi(self) -> float:
        """Samples to the inch, the finer direction."""
        a, b, c, d, _, _ = self.matrix
        across, up = (a * a + b * b) ** 0.5, (c * c + d * d) ** 0.5
        return 72.0 * float(max(self.size[0] / max(across, 1e-3), self.size[1] / max(up, 1e-3)))

    def samples(self) -> Any:
        """The samples as a Pillow image in mode L or RGB; None where they are not plain."""
        import pypdfium2.raw as raw
        from PIL import Image

        bitmap = raw.FPDFImageObj_GetBitmap(self.raw)
        if not bitmap:
            return None
        modes = {
            raw.FPDFBitmap_Gray: ("L", "L", 1),
            raw.FPDFBitmap_BGR: ("RGB", "BGR", 3),
            raw.FPDFBitmap_BGRx: ("RGB", "BGRX", 4),
        }
        mode = modes.get(raw.FPDFBitmap_GetFormat(bitmap))
        size = raw.FPDFBitmap_GetWidth(bitmap), raw.FPDFBitmap_GetHeight(bitmap)
        if mode is None or size != self.size:
            return None
        stride = raw.FPDFBitmap_GetStride(bitmap)
        address = raw.FPDFBitmap_GetBuffer(bitmap)
        data = ctypes.string_at(address, stride * size[1])
        raw.FPDFBitmap_Destroy(bitmap)
        return Image.frombuffer(mode[0], size, data, "raw", mode[1], stride, 1)


class Drawing:
    """The paths and images of a page, in the order in which they are painted."""

    def __init__(self, page: Any, box: Box, limits: dict[str, Any]) -> None:
        import pypdfium2.raw as raw

        self.paths: list[Path] = []
        self.images: list[Picture] = []
        self._box, self._limits, self._objects, self._segments = box, limits, 0, 0
        for i in range(self._count(raw.FPDFPage_CountObjects(page.raw))):
            self._take(raw.FPDFPage_GetObject(page.raw, i), UNIT, 0)

    def _count(self, number: int) -> int:
        self._objects += number
        if self._objects > self._limits["objects"]:
            raise _too_much(self._limits["objects"], "drawn objects")
        return number

    def _take(self, item: Any, outer: Matrix, depth: int) -> None:
        import pypdfium2.raw as raw

        kind = raw.FPDFPageObj_GetType(item)
        if kind == raw.FPDF_PAGEOBJ_FORM and depth < self._limits["depth"]:
            inner = then(_matrix(item), outer)
            for i in range(self._count(max(raw.FPDFFormObj_CountObjects(item), 0))):
                self._take(raw.FPDFFormObj_GetObject(item, i), inner, depth + 1)
        elif kind == raw.FPDF_PAGEOBJ_PATH:
            self._take_path(item, then(_matrix(item), outer))
        elif kind == raw.FPDF_PAGEOBJ_IMAGE:
            self._take_image(item, then(_matrix(item), outer))

    def _take_path(self, item: Any, matrix: Matrix) -> None:
        import pypdfium2.raw as raw

        fill, stroke = ctypes.c_int(), ctypes.c_int()
        segments = raw.FPDFPath_CountSegments(item)
        if not raw.FPDFPath_GetDrawMode(item, fill, stroke) or segments < 2:
            return
        if not (fill.value or stroke.value):
            return
        self._segments += segments
        if self._segments > self._limits["segments"]:
            raise _too_much(self._limits["segments"], "pieces of lines")
        self.paths.append(Path(item, matrix, segments, bool(stroke.value), bool(fill.value)))

    def _take_image(self, item: Any, matrix: Matrix) -> None:
        import pypdfium2.raw as raw

        width, height = ctypes.c_uint(), ctypes.c_uint()
        if not raw.FPDFImageObj_GetImagePixelSize(item, width, height):
            return
        share = _share(matrix, self._box)
        if share > 0 and width.value and height.value:
            self.images.append(Picture(item, matrix, (width.value, height.value), share))

    def packed(self) -> tuple[list[dict[str, Any]], list[bytes]]:
        """Each path's style, and all points [pt] and kinds of segments one after the other."""
        points, kinds = array("d"), bytearray()
        styles = []
        for path in self.paths:
            style = _style(path)
            if style is not None:
                style["segments"] = _pack(path, points, kinds)
                styles.append(style)
        return styles, [points.tobytes(), bytes(kinds)]


def _too_much(limit: int, what: str) -> Refusal:
    return Refusal(
        "limit",
        f"the page holds more than the {limit} {what} allowed.",
        "Save the page with the chart as PNG.",
    )


def _matrix(item: Any) -> Matrix:
    import pypdfium2.raw as raw

    m = raw.FS_MATRIX()
    if not raw.FPDFPageObj_GetMatrix(item, m):
        return UNIT
    return m.a, m.b, m.c, m.d, m.e, m.f


def _share(matrix: Matrix, box: Box) -> float:
    """Share of the page's box that the image's own box covers."""
    a, b, c, d, e, f = matrix
    xs, ys = (e, e + a, e + c, e + a + c), (f, f + b, f + d, f + b + d)
    width = min(max(xs), box[2]) - max(min(xs), box[0])
    height = min(max(ys), box[3]) - max(min(ys), box[1])
    if width <= 0 or height <= 0:
        return 0.0
    return width * height / ((box[2] - box[0]) * (box[3] - box[1]))


def _style(path: Path) -> dict[str, Any] | None:
    """Colours on white, width and dashes in the path's own space; None where nothing shows."""
    import pypdfium2.raw as raw

    stroke = _colour(raw.FPDFPageObj_GetStrokeColor, path.raw) if path.stroked else None
    fill = _colour(raw.FPDFPageObj_GetFillColor, path.raw) if path.filled else None
    if stroke is None and fill is None:
        return None
    width, phase = ctypes.c_float(0.0), ctypes.c_float(0.0)
    raw.FPDFPageObj_GetStrokeWidth(path.raw, width)
    count = min(max(raw.FPDFPageObj_GetDashCount(path.raw), 0), 32) if stroke else 0
    dash = (ctypes.c_float * count)()
    if count:
        raw.FPDFPageObj_GetDashArray(path.raw, dash, count)
        raw.FPDFPageObj_GetDashPhase(path.raw, phase)
    return {
        "matrix": path.matrix,
        "stroke": stroke,
        "fill": fill,
        "width": width.value,
        "dash": list(dash),
    }


def _colour(getter: Any, item: Any) -> tuple[float, float, float] | None:
    r, g, b, a = ctypes.c_uint(), ctypes.c_uint(), ctypes.c_uint(), ctypes.c_uint()
    if not getter(item, r, g, b, a) or a.value == 0:
        return None
    share = a.value / 255
    red, green, blue = (1 - share * (1 - v.value / 255) for v in (r, g, b))
    return red, green, blue


def _pack(path: Path, points: Any, kinds: bytearray) -> int:
    import pypdfium2.raw as raw

    codes = {
        raw.FPDF_SEGMENT_MOVETO: MOVE,
        raw.FPDF_SEGMENT_LINETO: LINE,
        raw.FPDF_SEGMENT_BEZIERTO: BEZIER,
    }
    segment, point = raw.FPDFPath_GetPathSegment, raw.FPDFPathSegment_GetPoint
    kind, close = raw.FPDFPathSegment_GetType, raw.FPDFPathSegment_GetClose
    x, y = ctypes.c_float(), ctypes.c_float()
    a, b, c, d, e, f = path.matrix
    for i in range(path.segments):
        one = segment(path.raw, i)
        point(one, x, y)
        points.append(a * x.value + c * y.value + e)
        points.append(b * x.value + d * y.value + f)
        kinds.append(codes.get(kind(one), MOVE) | (CLOSE if close(one) else 0))
    return path.segments
