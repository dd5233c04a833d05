"""Files that hold no chart, made here: broken, empty, huge, locked, or of something else."""

from __future__ import annotations

import io
import struct
import zlib
from pathlib import Path

import numpy as np


def text_as_png(path: Path) -> None:
    path.write_text("flow 10 20 30\nhead 40 38 31\n")


def empty(path: Path) -> None:
    path.write_bytes(b"")


def truncated_png(path: Path) -> None:
    _cut(path, "PNG")


def truncated_jpeg(path: Path) -> None:
    _cut(path, "JPEG")


def truncated_tiff(path: Path) -> None:
    _cut(path, "TIFF")


def _cut(path: Path, kind: str) -> None:
    from PIL import Image

    rng = np.random.default_rng(1)
    out = io.BytesIO()
    Image.fromarray(rng.integers(0, 255, (200, 300, 3), np.uint8)).save(out, kind)
    path.write_bytes(out.getvalue()[: len(out.getvalue()) // 8])


def truncated_pdf(path: Path) -> None:
    path.write_bytes(_pdf()[:180])


def locked_pdf(path: Path) -> None:
    from reportlab.lib.pdfencrypt import StandardEncryption

    path.write_bytes(_pdf(encrypt=StandardEncryption("owl", "heron", canPrint=0)))


def no_pages(path: Path) -> None:
    path.write_bytes(
        b"%PDF-1.4\n1 0 obj<</Type/Catalog/Pages 2 0 R>>endobj\n"
        b"2 0 obj<</Type/Pages/Kids[]/Count 0>>endobj\n"
        b"trailer<</Root 1 0 R/Size 3>>\n%%EOF\n"
    )


def _pdf(size: tuple[float, float] = (300, 200), **more: object) -> bytes:
    from reportlab.pdfgen.canvas import Canvas

    out = io.BytesIO()
    canvas = Canvas(out, pagesize=size, **more)
    canvas.drawString(40, 100, "Nothing but a line of text.")
    canvas.line(20, 20, size[0] - 20, 20)
    canvas.showPage()
    canvas.save()
    return out.getvalue()


def huge_pdf_page(path: Path) -> None:
    path.write_bytes(_pdf((20000, 20000)))


def pdf_bomb(path: Path) -> None:
    """A content stream that unpacks to 1 GB of drawing operators."""
    packer = zlib.compressobj(9)
    piece = b"0 0 m 9 9 l S\n" * 50000
    packed = b"".join(packer.compress(piece) for _ in range(1430)) + packer.flush()
    head = (
        b"%PDF-1.4\n1 0 obj<</Type/Catalog/Pages 2 0 R>>endobj\n"
        b"2 0 obj<</Type/Pages/Kids[3 0 R]/Count 1>>endobj\n"
        b"3 0 obj<</Type/Page/Parent 2 0 R/MediaBox[0 0 300 200]/Contents 4 0 R>>endobj\n"
    )
    stream = f"4 0 obj<</Filter/FlateDecode/Length {len(packed)}>>stream\n".encode() + packed
    tail = b"\nendstream endobj\ntrailer<</Root 1 0 R/Size 5>>\n%%EOF\n"
    path.write_bytes(head + stream + tail)


def text_page(path: Path) -> None:
    from sample_charts.canvas import pdf
    from sample_charts.sheet import letter

    path.write_bytes(pdf([letter()]))


def text_page_scanned(path: Path) -> None:
    from PIL import Image

    from sample_charts.canvas import pdf, raster
    from sample_charts.sheet import letter

    Image.fromarray(raster(pdf([letter()]), 150)).save(path)


def cat(path: Path) -> None:
    """A photograph-like picture: a sitting cat before blurred leaves."""
    import cv2

    rng = np.random.default_rng(8)
    picture = np.zeros((900, 1200, 3), np.float32)
    for grid, weight in ((5, 90), (17, 60), (60, 25)):
        coarse = rng.random((grid, grid, 3)).astype(np.float32)
        picture += weight * cv2.resize(coarse, (1200, 900), interpolation=cv2.INTER_CUBIC)
    fur = (70, 95, 130)
    cv2.ellipse(picture, (600, 640), (190, 260), 0, 0, 360, fur, -1)
    cv2.circle(picture, (600, 340), 150, fur, -1)
    for side in (-1, 1):
        ear = np.array([[600 + side * 140, 290], [600 + side * 120, 130], [600 + side * 30, 205]])
        cv2.fillPoly(picture, [ear.astype(np.int32)], fur)
        cv2.ellipse(picture, (600 + side * 60, 320), (28, 20), 0, 0, 360, (60, 190, 170), -1)
        for tilt in (-12, 0, 12):
            end = (600 + side * 230, 400 + tilt * 3)
            cv2.line(picture, (600 + side * 40, 400), end, (235, 235, 235), 2)
    picture += rng.normal(0, 6, picture.shape)
    cv2.imwrite(str(path), np.clip(picture, 0, 255).astype(np.uint8))


def one_pixel(path: Path) -> None:
    from PIL import Image

    Image.new("RGB", (1, 1), "white").save(path)


def huge_picture(path: Path) -> None:
    """30000 × 30000 white pixels in a small file."""
    _png(path, 30000, 30000, rows=30000)


def picture_bomb(path: Path) -> None:
    """A PNG that says it is 200000 × 200000."""
    _png(path, 200000, 200000, rows=2000)


def _png(path: Path, width: int, height: int, rows: int) -> None:
    def chunk(kind: bytes, data: bytes) -> bytes:
        return (struct.pack(">I", len(data)) + kind + data
                + struct.pack(">I", zlib.crc32(kind + data)))  # fmt: skip

    packer = zlib.compressobj(9)
    row = b"\0" + b"\xff" * (width // 8)
    data = b"".join(packer.compress(row) for _ in range(rows)) + packer.flush()
    header = struct.pack(">IIBBBBB", width, height, 1, 0, 0, 0, 0)
    path.write_bytes(
        b"\x89PNG\r\n\x1a\n" + chunk(b"IHDR", header) + chunk(b"IDAT", data) + chunk(b"IEND", b"")
    )


def without_numbers(path: Path) -> None:
    from sample_charts.draw import chart

    path.write_bytes(chart("single", 61, "vector", "scan", numbers=False).data)
