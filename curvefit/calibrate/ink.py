"""Ink on paper: how dark each pixel is against the paper around it."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

__all__ = ["ink_of", "stroke_reach"]


def stroke_reach(shape: tuple[int, ...]) -> int:
    """Widest stroke still taken for ink [px], odd: 0.8 % of the long side, at least 9."""
    return max(9, round(0.008 * max(shape[:2])) // 2 * 2 + 1)


def ink_of(pixels: NDArray[np.uint8], reach: int | None = None) -> NDArray[np.uint8]:
    """Share of the paper's light that each pixel swallows, 0 (paper) to 255 (black).

    Parameters
    ----------
    pixels : array of shape (height, width, 3), uint8
    reach : int, optional
        Strokes wider than this [px] count as paper.

    Returns
    -------
    array of shape (height, width), uint8

    Notes
    -----
    The darkest channel keeps pale coloured grids. Its grey closing is the paper (shade, tone and
    tinted bands included, since they are wider than any stroke); ink = 1 − value / paper.
    """
    import cv2

    darkest = pixels.min(axis=2) if pixels.ndim == 3 else pixels
    k = reach or stroke_reach(pixels.shape)
    paper = cv2.morphologyEx(darkest, cv2.MORPH_CLOSE, np.ones((k, k), np.uint8))
    paper = np.maximum(paper, 24)  # in deep shade a grey level or two is no stroke
    share = cv2.divide(cv2.subtract(paper, darkest), paper, scale=255.0)
    return np.asarray(share, np.uint8)
