"""What opening one file may take."""

from __future__ import annotations

from dataclasses import dataclass

__all__ = ["Limits"]


@dataclass(frozen=True, slots=True)
class Limits:
    """Bounds on the decoding of a file; sizes as named, each for one page.

    pixels, side : of a stored image. drawn_pixels, drawn_side : of a rendered PDF page.
    least_side : a picture smaller than this holds no chart.
    segments, characters, objects : of a PDF page's drawing.
    """

    file_bytes: int = 1 << 30
    pixels: int = 100_000_000
    side: int = 60_000
    drawn_pixels: int = 40_000_000
    drawn_side: int = 20_000
    least_side: int = 64
    memory_bytes: int = 3 << 29
    seconds: float = 40.0
    segments: int = 1_500_000
    characters: int = 100_000
    objects: int = 200_000
    depth: int = 12
