"""From page pixels to the ink of one straightened plot box: how dark, which colour, how thick."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.records import Panel

__all__ = ["MARGIN", "Flat", "Layer", "hues", "straightened", "stroke_width"]

Image = NDArray[np.float32]

MARGIN = 10  #: pixels kept around the plot box, so that a line on its edge is seen whole


@dataclass(frozen=True, slots=True, eq=False)
class Flat:
    """The straightened plot box with a margin: array pixel (row, col) = panel px + MARGIN.

    channels : (rows, cols, 3) float32, absorbance of red, green, blue light: 0 paper, 1 black.
    dark : (rows, cols) float32, the largest of the three, 0 where a mask or another drawing is.
    """

    channels: Image
    dark: Image


@dataclass(frozen=True, slots=True, eq=False)
class Layer:
    """One ink of the drawing, arrays of shape (rows, cols).

    ink : all of it, letters weakened; lines : without letters and markers;
    known : 0 where something hides whether there is ink, 1 where it is plain to see.
    """

    ink: Image
    lines: Image
    known: Image


def straightened(panel: Panel) -> Flat:
    """The absorbance of the panel, made straight by its warp.

    Notes
    -----
    Absorbance is 1 − I/B per channel; the background B is the grey-scale closing of I by a square
    a few strokes wide, so that paper tone, uneven light and shaded areas drop out, edges included.
    """
    import cv2

    pixels, origin = _surroundings(panel)
    k = int(0.011 * max(panel.warp.size)) | 1
    element = cv2.getStructuringElement(cv2.MORPH_RECT, (max(k, 15),) * 2)
    paper = cv2.morphologyEx(pixels, cv2.MORPH_CLOSE, element)
    paper = cv2.GaussianBlur(paper, (0, 0), max(k, 15) / 4)
    absorbed = 1.0 - pixels.astype(np.float32) / np.maximum(paper, 16).astype(np.float32)
    absorbed = np.clip(absorbed, 0.0, 1.0)
    channels = np.clip(_straighten(panel, absorbed, origin), 0.0, 1.0)
    dark = channels.max(2)
    for polygon in panel.masks:
        corners = panel.warp.to_panel(polygon) + MARGIN
        cv2.fillPoly(dark, [np.round(corners).astype(np.int32)], 0.0)
    return Flat(channels, dark)


def _surroundings(panel: Panel) -> tuple[NDArray[np.uint8], NDArray[np.float64]]:
    """The part of the page around the box and the page px of its top-left pixel."""
    pad = 0.03 * max(panel.warp.size) + 3 * MARGIN
    low = np.maximum(np.floor(panel.corners.min(0) - pad), 0).astype(int)
    high = np.ceil(panel.corners.max(0) + pad).astype(int)
    return panel.page.pixels[low[1] : high[1], low[0] : high[0]], low.astype(float)


def _straighten(panel: Panel, image: Image, origin: NDArray[np.float64]) -> Image:
    import cv2

    cols, rows = (int(np.ceil(side)) + 1 + 2 * MARGIN for side in panel.warp.size)
    if panel.warp.bend is None:
        shift = np.array([[1, 0, MARGIN], [0, 1, MARGIN], [0, 0, 1.0]])
        back = np.array([[1, 0, origin[0]], [0, 1, origin[1]], [0, 0, 1.0]])
        matrix = shift @ panel.warp.matrix @ back
        return np.asarray(cv2.warpPerspective(image, matrix, (cols, rows), flags=cv2.INTER_CUBIC))
    at = _places(panel, rows, cols) - origin
    return np.asarray(
        cv2.remap(
            image,
            at[..., 0].astype(np.float32),
            at[..., 1].astype(np.float32),
            cv2.INTER_CUBIC,
            borderMode=cv2.BORDER_CONSTANT,
        )
    )


def _places(panel: Panel, rows: int, cols: int) -> NDArray[np.float64]:
    """Page px of every array px, (rows, cols, 2): exact every 8 px, straight between."""
    y, x = (np.append(np.arange(0, n - 1, 8), n - 1) for n in (rows, cols))
    knots = np.stack(np.meshgrid(x, y), -1).reshape(-1, 2) - float(MARGIN)
    coarse = panel.warp.to_page(knots).reshape(len(y), len(x), 2)
    down, over = _between(rows, y), _between(cols, x)
    return np.stack([down @ coarse[..., k] @ over.T for k in (0, 1)], -1)


def _between(n: int, knots: NDArray[np.int64]) -> NDArray[np.float64]:
    """(n, knots) weights of linear interpolation at 0 … n − 1."""
    unit = np.eye(len(knots))
    return np.stack([np.interp(np.arange(n), knots, row) for row in unit], 1)


def stroke_width(ink: Image, shortest: float, hidden: NDArray[np.bool_]) -> float:
    """Width of the lines [px]: from components at least `shortest` px long, specks left out.

    hidden : (rows, cols) where nothing can be seen; strokes that it cuts into do not count.
    """
    import cv2

    mask = (ink > 0.4).astype(np.uint8)
    count, labels, stats, _ = cv2.connectedComponentsWithStats(mask, connectivity=8)
    extent = np.maximum(stats[:, cv2.CC_STAT_WIDTH], stats[:, cv2.CC_STAT_HEIGHT])
    long = extent >= shortest
    long[0] = False
    if count < 2 or not long.any():
        return 2.0
    keep = long[labels]
    distance = cv2.distanceTransform(mask, cv2.DIST_L2, 5)
    ridge = keep & (distance >= cv2.dilate(distance, np.ones((3, 3)))) & (distance > 0)
    free = cv2.distanceTransform((~hidden | (mask > 0)).astype(np.uint8), cv2.DIST_L2, 5)
    whole = ridge & (free > distance + 1.0)
    ridge = whole if whole.sum() > 100 else ridge
    # each ridge pixel speaks for its length; a line of width w has ridge distance (w + 1) / 2
    return float(np.clip(2.0 * np.median(distance[ridge]) - 1.0, 1.0, 40.0))


def hues(flat: Flat, ink: Image, width: float) -> list[tuple[Image, tuple[float, float, float]]]:
    """The inks of the drawing: for each a membership map (0–1) and its colour as printed.

    Hue clusters of saturated ink come first, the neutral ink (black, grey) last.
    """
    import cv2

    blurred = cv2.GaussianBlur(flat.channels * ink[..., None], (0, 0), max(0.35 * width, 0.8))
    top = blurred.max(2)
    saturation = (top - blurred.min(2)) / np.maximum(top, 1e-3)
    angle = _hue_angle(blurred)
    strong = (ink > 0.35) & (top > 0.2)
    coloured = strong & (saturation > 0.35)
    layers: list[tuple[Image, tuple[float, float, float]]] = []
    taken = np.zeros_like(top)
    for hue in _hue_peaks(angle[coloured], enough=0.0004 * ink.size):
        away = np.abs((angle - hue + 180.0) % 360.0 - 180.0)
        member = np.clip((50.0 - away) / 20.0, 0, 1) * np.clip((saturation - 0.2) / 0.15, 0, 1)
        member = (member * (1.0 - taken)).astype(np.float32)
        taken = np.clip(taken + member, 0, 1)
        layers.append((member, _printed(flat, strong & (member > 0.7))))
    if (strong & (taken < 0.3)).sum() > 0.0004 * ink.size or not layers:
        rest = (1.0 - taken).astype(np.float32)
        layers.append((rest, _printed(flat, strong & (rest > 0.7))))
    return layers


def _hue_angle(absorbed: Image) -> Image:
    """Direction in the plane of colour differences [degrees]."""
    r, g, b = (absorbed[..., i] for i in range(3))
    return np.asarray(np.degrees(np.arctan2(np.sqrt(3.0) * (g - b), 2.0 * r - g - b)), np.float32)


def _hue_peaks(angles: Image, enough: float) -> list[float]:
    """Centres of the clusters of hue angles that hold enough pixels, largest first."""
    count, _ = np.histogram(angles % 360.0, bins=72, range=(0, 360))
    peaks: list[float] = []
    while True:
        around = np.sum([np.roll(count, k) for k in range(-3, 4)], axis=0)
        best = int(np.argmax(around))
        if around[best] < max(enough, 30):
            return peaks
        near = (best + np.arange(-3, 4)) % 72
        offset = float((count[near] * np.arange(-3, 4)).sum() / count[near].sum())
        peaks.append((best + offset + 0.5) * 5.0)
        count[(best + np.arange(-8, 9)) % 72] = 0


def _printed(flat: Flat, where: NDArray[np.bool_]) -> tuple[float, float, float]:
    if not where.any():
        return (0.0, 0.0, 0.0)
    darkest = flat.channels[where]
    level = np.quantile(darkest.max(1), 0.6)
    r, g, b = 1.0 - np.median(darkest[darkest.max(1) >= level], axis=0)
    return (float(r), float(g), float(b))
