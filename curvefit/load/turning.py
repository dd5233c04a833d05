"""The eight ways in which a stored image is shown, and its pixels made plain RGB."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

__all__ = ["rgb", "stored_from_shown", "turned"]

Array = NDArray[np.float64]
Pixels = NDArray[np.uint8]

# EXIF orientation: whether stored rows run along the shown columns, then which stored axes,
# x and y, run against the shown ones
_TURNS = {
    1: (False, False, False),
    2: (False, True, False),
    3: (False, True, True),
    4: (False, False, True),
    5: (True, False, False),
    6: (True, False, True),
    7: (True, True, True),
    8: (True, True, False),
}


def stored_from_shown(orientation: int, stored: tuple[int, int]) -> Array:
    """The 3×3 map from px as shown to px as stored.

    Parameters
    ----------
    orientation : EXIF orientation, 1–8
    stored : (width, height) of the stored image [px]
    """
    swapped, back_x, back_y = _TURNS[orientation]
    to_x = np.array([0.0, 1.0, 0.0] if swapped else [1.0, 0.0, 0.0])
    to_y = np.array([1.0, 0.0, 0.0] if swapped else [0.0, 1.0, 0.0])
    width, height = stored
    if back_x:
        to_x = np.array([0.0, 0.0, width - 1.0]) - to_x
    if back_y:
        to_y = np.array([0.0, 0.0, height - 1.0]) - to_y
    return np.stack([to_x, to_y, [0.0, 0.0, 1.0]])


def turned(pixels: Pixels, orientation: int) -> Pixels:
    """Stored pixels as shown; shape (rows, cols, 3)."""
    swapped, back_x, back_y = _TURNS[orientation]
    shown = pixels[:: -1 if back_y else 1, :: -1 if back_x else 1]
    return np.ascontiguousarray(shown.swapaxes(0, 1) if swapped else shown)


def rgb(data: bytes, mode: str, size: tuple[int, int], full: int = 65535) -> Pixels:
    """Raw samples as RGB; shape (rows, cols, 3).

    Parameters
    ----------
    data : samples row by row
    mode : "RGB", "BGR", "L", or deep grey: "I;16", "I;16B" (big-endian), "I", "F"
    size : (width, height)
    full : the sample that stands for white in a 16-bit image

    Notes
    -----
    32-bit samples do not say what white is: it is 65535 where no sample is larger, else the
    largest; for real numbers 1, 255 or the largest.
    """
    shape = size[1], size[0]
    if mode in ("RGB", "BGR"):
        pixels = np.frombuffer(data, np.uint8).reshape(*shape, 3)
        return pixels if mode == "RGB" else np.ascontiguousarray(pixels[:, :, ::-1])
    grey = _grey(data, mode, full).reshape(shape)
    return np.repeat(grey[:, :, None], 3, axis=2)


def _grey(data: bytes, mode: str, full: int) -> NDArray[np.uint8]:
    if mode == "L":
        return np.frombuffer(data, np.uint8)
    if mode == "F":
        real = np.nan_to_num(np.frombuffer(data, np.float32), nan=0.0, posinf=0.0, neginf=0.0)
        white = next((w for w in (1.0, 255.0) if real.max() <= w), float(real.max()))
        return np.asarray(np.clip(real / white * 255 + 0.5, 0, 255).astype(np.uint8))
    kind = {"I": "<i4", "I;16B": ">u2"}.get(mode, "<u2")
    deep = np.frombuffer(data, np.dtype(kind)).astype(np.uint32 if mode != "I" else np.int64)
    white_i = full if mode != "I" else max(65535, int(deep.max()))
    scaled = (np.clip(deep, 0, white_i) * 255 + white_i // 2) // white_i
    return np.asarray(scaled.astype(np.uint8))
