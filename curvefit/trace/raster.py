"""Lines followed through the pixels of one plot box."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from curvefit.records import Panel
from curvefit.trace.centre import Line, centred, width_along
from curvefit.trace.ends import extended, supported
from curvefit.trace.grid import Inked, without_lines
from curvefit.trace.ink import MARGIN, Flat, hues, straightened, stroke_width
from curvefit.trace.track import Track, Tracking, across, best_track, peel

__all__ = ["Found", "Settings", "lines_of"]

Image = NDArray[np.float32]


@dataclass(frozen=True, slots=True)
class Settings:
    """Tolerances of the tracing, lengths as a share of the panel's width unless they say px."""

    tracking: Tracking = field(default_factory=Tracking)
    shortest: float = 0.05  #: ink that a line must show
    at_most: int = 40  #: lines of one ink


@dataclass(frozen=True, slots=True, eq=False)
class Found:
    """A line with the ink that it was seen in."""

    line: Line
    colour: tuple[float, float, float]


def lines_of(panel: Panel, settings: Settings | None = None) -> list[Found]:
    """The lines of the panel, in array px."""
    tolerances = settings or Settings()
    flat = straightened(panel)
    inked = without_lines(flat.dark, MARGIN)
    width = stroke_width(inked.ink, 0.02 * panel.warp.size[0])
    found: list[Found] = []
    for member, colour in hues(flat, inked.ink, width):
        layer = _layer(flat, inked, member)
        found += [Found(line, colour) for line in _follow(layer, width, tolerances)]
    return found


def _layer(flat: Flat, inked: Inked, member: Image) -> Inked:
    """One ink alone: the others are neither ink nor blank."""
    own = inked.ink * member
    other = inked.ink * (1.0 - member)
    known = inked.known * np.clip(1.0 - 1.5 * other, 0, 1)
    return Inked(own, known.astype(np.float32), inked.rows, inked.cols)


def _follow(layer: Inked, width: float, settings: Settings) -> list[Line]:
    import cv2

    rows, cols = layer.ink.shape
    k = float(np.clip(settings.tracking.stroke / width, 0.15, 1.6))
    size = (max(round(cols * k), 16), max(round(rows * k), 16))
    how = cv2.INTER_AREA if k < 1 else cv2.INTER_LINEAR
    small = cv2.resize(layer.ink, size, interpolation=how)
    known = cv2.resize(layer.known, size, interpolation=how)
    reward = across(small, known, settings.tracking)
    scale = np.array([cols / size[0], rows / size[1]])
    lines: list[Line] = []
    for _ in range(settings.at_most):
        track = best_track(reward, settings.tracking)
        if track is None or track.score < settings.shortest * size[0]:
            break
        line, own = _refined(layer, track, scale, width)
        peel(reward, track, 0.5 * own * k + 0.5)
        if line is not None:
            lines.append(line)
    return lines


def _refined(
    layer: Inked, track: Track, scale: NDArray[np.float64], width: float
) -> tuple[Line | None, float]:
    """The track at sub-pixel precision between its true ends, and the width of its stroke."""
    rough = (np.stack([track.x, track.y], 1) + 0.5) * scale - 0.5
    own = width_along(layer.ink, rough_dense(rough), 3.0 * width + 2)
    if not np.isfinite(own):
        own = width
    own = float(np.clip(own, 0.4 * width, 2.5 * width))
    line = centred(layer.ink, layer.known, rough, own)
    reach = 24.0 + 3 * own
    longer = centred(layer.ink, layer.known, extended(line.xy, reach, 60.0), own, slack=1.5)
    first, last = supported(longer.ink, longer.known)
    if last - first < 12:
        return None, own
    return trimmed(longer, first, last), own


def rough_dense(rough: NDArray[np.float64]) -> NDArray[np.float64]:
    """A node polyline with a point every two px."""
    from curvefit.geometry import resample

    return resample(rough, 2.0)


def trimmed(line: Line, first: int, last: int) -> Line:
    """The line between two of its points, both kept."""
    part = slice(first, last + 1)
    return Line(
        line.xy[part],
        line.sigma[part],
        line.good[part],
        line.ink[part],
        line.known[part],
        line.side[part],
        line.width,
        line.scatter,
    )
