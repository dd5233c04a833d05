"""PDF in the child process: a page → its pixels and, where lines are drawn on it, the drawing.

All coordinates that leave here are page points before /Rotate, with the matrices of nested forms
composed (the reader itself gives what lies in a form in the form's own space).
"""

from __future__ import annotations

import ctypes
from typing import Any

from curvefit.load.pdf_objects import Drawing
from curvefit.load.pdf_text import Text
from curvefit.load.refusal import Refusal

__all__ = ["Document"]

Answer = tuple[dict[str, Any], list[Any]]
DPI = 300.0
TURNS = {0: 1, 1: 6, 2: 3, 3: 8}  # /Rotate in quarter turns → EXIF orientation
WHOLE = 0.8  #: share of the page that a scan covers at least
PICTURE = 0.08  #: share from which an image may hold a chart
CURVE = 8  #: segments that make a path more than a rule or a box
FEW = 100  #: segments that make no drawing
ALIKE = 12.0  #: mean difference, of 255, of an image and the page that shows it


class Document:
    """A PDF file, opened in the child."""

    def __init__(self, path: str, limits: dict[str, Any]) -> None:
        import pypdfium2
        import pypdfium2.raw

        self.limits = limits
        try:
            self._document: Any = pypdfium2.PdfDocument(path)
            self.pages = len(self._document)
        except pypdfium2.PdfiumError as error:
            raise _refused(error) from error
        if self.pages == 0:
            raise Refusal("open", "the PDF has no pages.", "Save or send the file again.")

    def page(self, number: int) -> Answer:
        """One page: an image as stored, or a rendered page with its strokes and characters."""
        import pypdfium2
        import pypdfium2.raw as raw

        try:
            page = self._document[number - 1]
        except pypdfium2.PdfiumError as error:
            raise Refusal(
                "open", "this page of the PDF cannot be read.", "Name another page with --page."
            ) from error
        turn = int(raw.FPDFPage_GetRotation(page.raw)) % 4
        raw.FPDFPage_SetRotation(page.raw, 0)
        box = _shown(page)
        drawing = Drawing(page, box, self.limits)
        text = Text(page, box, self.limits)
        view = _View(page, box, TURNS[turn], self.limits)
        largest = max((i.share for i in drawing.images), default=0.0)
        curves = max((p.segments for p in drawing.paths), default=0) >= CURVE
        few = sum(p.segments for p in drawing.paths) < FEW
        if largest > WHOLE and not curves:
            return _scan(view, drawing, text)
        if largest > PICTURE and not curves and few:
            return _picture(view, drawing, text)
        header, arrays = view.rendered(DPI)
        header["kind"] = "drawn"
        header["paths"], stroke_arrays = drawing.packed()
        return header, [*arrays, text.packed(), *stroke_arrays]


def _refused(error: Any) -> Refusal:
    if getattr(error, "err_code", None) == 4:
        what = "the PDF is encrypted: it opens only with a password."
        return Refusal("open", what, "Save it without a password (print it into a new PDF).")
    return Refusal(
        "open",
        "the PDF cannot be opened: it is damaged, cut short or has no pages.",
        "Save or send it again, or print it into a new PDF.",
    )


def _shown(page: Any) -> tuple[float, float, float, float]:
    """Left, bottom, right, top of what is shown of the page [pt]."""
    media, crop = page.get_mediabox(), page.get_cropbox()
    left, bottom = max(media[0], crop[0]), max(media[1], crop[1])
    right, top = min(media[2], crop[2]), min(media[3], crop[3])
    width, height = page.get_size()
    if right - left < 1 or top - bottom < 1:  # boxes that make no sense: what the reader shows
        return 0.0, 0.0, width, height
    return left, bottom, right, top


class _View:
    """Renders what is shown of a page, before /Rotate."""

    def __init__(self, page: Any, box: tuple[float, ...], orientation: int, limits: Any) -> None:
        self.page, self.box, self.orientation, self.limits = page, box, orientation, limits
        self.width, self.height = box[2] - box[0], box[3] - box[1]

    def scale(self, dpi: float) -> float:
        """Px to the point: as asked for, or what the limits allow."""
        k = dpi / 72.0
        most = (self.limits["drawn_pixels"] / (self.width * self.height)) ** 0.5
        return float(min(k, most, self.limits["drawn_side"] / max(self.width, self.height)))

    def header(self, k: float, size: tuple[int, int], mode: str) -> dict[str, Any]:
        """How the pixels are to be shown, and the map from page points to them."""
        left, _, _, top = self.box
        return {
            "kind": "image",
            "mode": mode,
            "size": size,
            "full": 255,
            "orientation": self.orientation,
            "turned": False,
            "dpi": (72.0 * k, 72.0 * k),
            "from_points": [[k, 0.0, -k * left - 0.5], [0.0, -k, k * top - 0.5]],
        }

    def rendered(self, dpi: float) -> Answer:
        """The page as pixels, at exactly this resolution or the largest allowed."""
        k = self.scale(dpi)
        size = max(round(self.width * k - 1e-3), 1), max(round(self.height * k - 1e-3), 1)
        return self.header(k, size, "BGR"), [self.pixels(k, size)]

    def pixels(self, k: float, size: tuple[int, int]) -> Any:
        """A buffer of blue, green, red, row by row."""
        import pypdfium2.raw as raw

        width, height = size
        data = ctypes.create_string_buffer(width * height * 3)
        bitmap = raw.FPDFBitmap_CreateEx(width, height, raw.FPDFBitmap_BGR, data, width * 3)
        if not bitmap:
            raise MemoryError
        raw.FPDFBitmap_FillRect(bitmap, 0, 0, width, height, 0xFFFFFFFF)
        raw.FPDF_RenderPageBitmapWithMatrix(
            bitmap,
            self.page.raw,
            raw.FS_MATRIX(k, 0, 0, k, 0, 0),
            raw.FS_RECTF(0, 0, width, height),
            raw.FPDF_ANNOT,
        )
        raw.FPDFBitmap_Destroy(bitmap)
        return data


def _picture(view: _View, drawing: Drawing, text: Text) -> Answer:
    """The page at the resolution of the finest image that may hold a chart."""
    finest = max(i.dpi for i in drawing.images if i.share > PICTURE)
    header, arrays = view.rendered(min(max(finest, 100.0), 1200.0))
    return header, [*arrays, text.packed()]


def _scan(view: _View, drawing: Drawing, text: Text) -> Answer:
    """The one image that is the page, sample by sample where it stands alone and upright.

    Where it does not (drawn in layers, turned, masked, written over) the page is rendered at the
    image's own resolution instead, so that nothing that a reader sees is missing.
    """
    image = max(drawing.images, key=lambda i: i.share)
    alone = len(drawing.images) == 1 and not text.count and not drawing.paths
    small_enough = image.size[0] * image.size[1] <= view.limits["drawn_pixels"]
    if alone and image.upright and small_enough:
        answer = _stored(view, image)
        if answer is not None:
            return answer
    header, arrays = view.rendered(min(image.dpi, 1200.0))
    return header, [*arrays, text.packed()]


def _stored(view: _View, image: Any) -> Answer | None:
    """The image's own samples, cut to what is shown; None where the page shows it otherwise."""
    from PIL import Image, ImageChops, ImageStat

    samples = image.samples()
    if samples is None:
        return None
    kx, ky = image.size[0] / image.matrix[0], image.size[1] / image.matrix[3]  # px to the point
    left, top = image.matrix[4], image.matrix[5] + image.matrix[3]
    x0, y0 = (view.box[0] - left) * kx, (top - view.box[3]) * ky
    x1, y1 = (view.box[2] - left) * kx, (top - view.box[1]) * ky
    low = max(round(x0), 0), max(round(y0), 0)
    cut = *low, min(round(x1), image.size[0]), min(round(y1), image.size[1])
    part = samples.crop(cut)
    k = kx / max(min(part.size) // 200, 1)
    size = max(round(view.width * k), 1), max(round(view.height * k), 1)
    seen = Image.frombuffer("RGB", size, view.pixels(k, size), "raw", "BGR", 0, 1)
    area = tuple(
        round((v - begin) / per_point * k)
        for v, begin, per_point in zip(cut, (x0, y0, x0, y0), (kx, ky, kx, ky), strict=True)
    )
    seen = seen.crop(area)
    small = part.convert("RGB").resize(seen.size, Image.Resampling.BOX)
    difference = ImageStat.Stat(ImageChops.difference(seen, small)).mean
    if max(difference) > ALIKE:
        return None
    header = view.header(kx, part.size, part.mode)
    header["dpi"] = (72.0 * kx, 72.0 * ky)
    header["from_points"] = [
        [kx, 0.0, -kx * left - cut[0] - 0.5],
        [0.0, -ky, ky * top - cut[1] - 0.5],
    ]
    return header, [part.tobytes()]
