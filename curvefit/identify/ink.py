"""Colours of words and of the line samples beside them in a legend, from the page's pixels."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.records import Page, Word

__all__ = ["Sample", "line_sample", "same_ink", "word_ink"]

Array = NDArray[np.float64]
Colour = tuple[float, float, float]


@dataclass(frozen=True, slots=True)
class Sample:
    """A piece of line printed beside a text: its colour 0–1 and how much of it is ink."""

    colour: Colour
    dash: str


def same_ink(a: Colour, b: Colour) -> bool:
    """Whether two inks are the same colour: alike in hue, or both without any."""
    ca, cb = _chroma(a), _chroma(b)
    strong = max(np.hypot(*ca), np.hypot(*cb))
    return bool(strong < 0.12 or np.hypot(*(ca - cb)) < 0.55 * strong)


def _chroma(colour: Colour) -> Array:
    """Two opponent axes (red–green, yellow–blue) of a colour."""
    r, g, b = colour
    return np.array([r - g, 0.5 * (r + g) - b])


def word_ink(page: Page, word: Word) -> Colour | None:
    """The colour of a word's letters; None outside the page."""
    low = np.floor(word.box.min(0)).astype(int)
    high = np.ceil(word.box.max(0)).astype(int) + 1
    patch = page.pixels[max(low[1], 0) : max(high[1], 0), max(low[0], 0) : max(high[0], 0)]
    return _ink(patch.reshape(-1, 3).astype(float) / 255.0)


def _ink(pixels: Array) -> Colour | None:
    """The colour of the tenth of the pixels that differs most from the paper."""
    if len(pixels) < 8:
        return None
    paper = np.percentile(pixels, 80, axis=0)
    drop = np.clip(paper - pixels, 0, None).max(1)
    if drop.max() < 0.15:
        return None
    strong = pixels[drop >= max(float(np.percentile(drop, 90)), 0.6 * float(drop.max()))]
    r, g, b = np.clip(np.median(strong, axis=0) + (1 - paper), 0, 1)
    return float(r), float(g), float(b)


def line_sample(page: Page, word: Word) -> Sample | None:
    """The sample of a line to the left of a text, or else to its right; None where there is none.

    Notes
    -----
    A strip as long as seven heights of the text is cut beside it. A sample is a thin row of ink
    that starts and ends within the strip (a grid line runs through it) and is at least one
    height long.
    """
    for side in (-1, 1):
        found = _sample_in(_strip(page, word, side), word.height)
        if found is not None:
            return found
    return None


def _strip(page: Page, word: Word, side: int) -> Array:
    """Pixels beside a word in its reading direction, 0–1, nearest column first."""
    box, height = word.box, max(word.height, 4.0)
    along = (box[1] - box[0]) / max(word.width, 1e-9)
    down = (box[3] - box[0]) / max(word.height, 1e-9)
    start = (box[0] + box[3]) / 2 if side < 0 else (box[1] + box[2]) / 2
    u = np.arange(0.15 * height, 7.0 * height)
    v = np.arange(-0.5 * height, 0.5 * height + 1)
    xy = start + side * u[None, :, None] * along + v[:, None, None] * down
    col, row = np.rint(xy[..., 0]).astype(int), np.rint(xy[..., 1]).astype(int)
    rows, cols = page.pixels.shape[:2]
    inside = (col >= 0) & (col < cols) & (row >= 0) & (row < rows)
    pixels = page.pixels[np.clip(row, 0, rows - 1), np.clip(col, 0, cols - 1)] / 255.0
    return np.where(inside[..., None], pixels, 1.0)


def _sample_in(strip: Array, height: float) -> Sample | None:
    paper = np.percentile(strip.reshape(-1, 3), 80, axis=0)
    drop = np.clip(paper - strip, 0, None).max(2)
    dark = drop > 0.25
    frame = np.flatnonzero(dark.mean(0) > 0.6)
    dark[:, frame] = False
    beyond = frame[frame > 1.5 * height]
    if len(beyond):  # what stands behind the frame of the legend is no part of it
        dark[:, int(beyond[0]) :] = False
    rows = dark.mean(1)
    line = int(np.argmax(rows))
    band = dark[max(line - 1, 0) : line + 2].any(0)
    on = np.flatnonzero(band)
    if len(on) < height or on[0] > 2.0 * height or band[-int(0.3 * height) - 1 :].any():
        return None
    length = int(on[-1] - on[0] + 1)
    filled = float(band[on[0] : on[-1] + 1].mean())
    stroke = float(dark[:, on].sum(0).mean())
    if length < height or filled < 0.25 or stroke > 0.45 * height:
        return None
    colour = _ink(strip[max(line - 1, 0) : line + 2].reshape(-1, 3))
    if colour is None:
        return None
    return Sample(colour, _dash(band[on[0] : on[-1] + 1], stroke))


def _dash(band: NDArray[np.bool_], stroke: float) -> str:
    """The kind of line that a row of ink and blank is."""
    edges = np.flatnonzero(np.diff(band.astype(int)))
    runs = np.diff(np.r_[0, edges + 1, len(band)])
    on, off = runs[::2], runs[1::2]
    if not len(off) or off.max() < 2:
        return "solid"
    if on.max() < 2.2 * stroke:
        return "dotted"
    inner = on[1:-1]  # the first and the last may be cut off
    return "dash-dotted" if len(inner) and inner.min() < 0.45 * on.max() else "dashed"
