"""The pages of a file, as the decoding child sends them, made into Page records."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from curvefit.errors import ChartError, InputError, LimitError, Location, NoChart, OpenError
from curvefit.load.guard import Guard
from curvefit.load.limits import Limits
from curvefit.load.turning import rgb, stored_from_shown, turned
from curvefit.records import Page, Stroke

__all__ = ["pages_of"]

Array = NDArray[np.float64]
SQUARE = 1.02  #: pixels less square than this are made so
MAGIC = (
    (b"\x89PNG\r\n\x1a\n", "image"),
    (b"\xff\xd8\xff", "image"),
    (b"II*\0", "image"),
    (b"MM\0*", "image"),
    (b"II+\0", "image"),
    (b"MM\0+", "image"),
    (b"BM", "image"),
)


@dataclass(frozen=True, slots=True)
class Source:
    """The file that a page came from."""

    file: str
    sha256: str
    pages: int


def pages_of(path: Path, page: int | None, limits: Limits | None) -> Iterator[Page]:
    """The pages of a file; see :func:`curvefit.load.load`."""
    allowed = limits or Limits()
    try:
        kind = _kind(path, allowed)
        with Guard(path, kind, allowed) as guard:
            pages = int(guard.open()["pages"])
            source = Source(str(path), _sha256(path), pages)
            yield from _pages(guard, source, page, allowed)
    except ChartError as error:
        error.at(file=str(path))
        raise
    except OSError as error:
        raise OpenError(
            f"it cannot be read: {error.strerror or error}.",
            Location(file=str(path)),
            "Check the name of the file and whether you may read it.",
        ) from error


def _pages(guard: Guard, source: Source, page: int | None, limits: Limits) -> Iterator[Page]:
    if page is not None and not 1 <= page <= source.pages:
        has = "has one page" if source.pages == 1 else f"has pages 1 to {source.pages}"
        raise InputError(f"there is no page {page}: the file {has}.", remedy="Change --page.")
    wanted = range(1, source.pages + 1) if page is None else (page,)
    largest: tuple[int, int] | None = None
    gave = False
    for number in wanted:
        try:
            header, arrays = guard.page(number)
            if number == wanted[-1]:
                guard.close()  # its memory is free again before the page is worked on
            one = _page(header, arrays, source, number)
        except ChartError as error:
            error.at(page=number)
            raise
        if min(one.size) < limits.least_side:
            largest = max(largest or (0, 0), one.size)
            continue
        gave = True
        yield one
    if not gave and largest is not None:
        least = limits.least_side
        raise NoChart(
            f"the picture is {largest[0]} × {largest[1]} px; a chart needs {least} × {least}.",
            Location(page=page),
            "Give the chart itself, scanned at 150 dpi or more.",
        )


def _kind(path: Path, limits: Limits) -> str:
    """ "image" or "pdf", by the file's first bytes, never by its name."""
    if not path.exists():
        raise OpenError("there is no such file.", remedy="Check the name.")
    if not path.is_file():
        raise OpenError("this is not a file.", remedy="Name an image or a PDF file.")
    size = path.stat().st_size
    if size > limits.file_bytes:
        raise LimitError(
            f"the file has {size / 2**20:.0f} MiB; at most {limits.file_bytes / 2**20:.0f} MiB "
            "are read.",
            remedy="Save the page with the chart alone.",
        )
    if size == 0:
        raise OpenError("the file is empty (0 bytes).", remedy="Save or send it again.")
    with path.open("rb") as stream:
        start = stream.read(1024)
    if b"%PDF-" in start:
        return "pdf"
    if start[:4] == b"RIFF" and start[8:12] == b"WEBP":
        return "image"
    for magic, kind in MAGIC:
        if start.startswith(magic):
            return kind
    raise OpenError(
        "its content is none of the formats that are read: PNG, JPEG, TIFF, BMP, WebP, PDF.",
        remedy="Save the chart as PNG or PDF.",
    )


def _sha256(path: Path) -> str:
    with path.open("rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()


def _page(header: dict[str, Any], arrays: list[bytes], source: Source, number: int) -> Page:
    width, height = header["size"]
    pixels = rgb(arrays[0], header["mode"], (width, height), header["full"])
    orientation = header["orientation"]
    swapped = orientation >= 5
    stored = (height, width) if header["turned"] and swapped else (width, height)
    shown = pixels if header["turned"] else turned(pixels, orientation)
    matrix = stored_from_shown(orientation, stored)
    dpi = header["dpi"]
    if dpi is not None:
        across, down = dpi[::-1] if swapped else dpi
        shown, stretch = _squared(shown, across, down)
        matrix = matrix @ stretch
    page = Page(
        source.file,
        source.sha256,
        number,
        shown,
        stored,
        matrix,
        round(float(max(dpi)), 2) if dpi is not None else None,
        pages=source.pages,
    )
    return _with_drawing(page, header, arrays) if len(arrays) > 1 else page


def _with_drawing(page: Page, header: dict[str, Any], arrays: list[bytes]) -> Page:
    """The page with the words of its text layer and, where lines are drawn on it, its strokes."""
    from curvefit.load.drawing import strokes_of
    from curvefit.load.words import words_of

    points = np.vstack([header["from_points"], [0.0, 0.0, 1.0]])
    to_page = np.linalg.inv(page.stored_from_page) @ points
    words, findings = words_of(arrays[1], to_page)
    strokes: tuple[Stroke, ...] = ()
    if header["kind"] == "drawn":
        strokes = strokes_of(header["paths"], arrays[2], arrays[3], to_page, page.size)
    return replace(page, words=words, strokes=strokes, findings=findings)


def _squared(
    pixels: NDArray[np.uint8], across: float, down: float
) -> tuple[NDArray[np.uint8], Array]:
    """Pixels of a fax, less fine in one direction, made square; and new px → old px."""
    ratio = across / down
    if 1 / SQUARE < ratio < SQUARE or not 1 / 3 < ratio < 3:
        return pixels, np.eye(3)
    import cv2

    rows, cols = pixels.shape[:2]
    size = (cols, round(rows * ratio)) if ratio > 1 else (round(cols / ratio), rows)
    kx, ky = cols / size[0], rows / size[1]
    square = cv2.resize(pixels, size, interpolation=cv2.INTER_LINEAR)
    back = np.array([[kx, 0, 0.5 * kx - 0.5], [0, ky, 0.5 * ky - 0.5], [0, 0, 1]])
    return np.asarray(square, np.uint8), back
