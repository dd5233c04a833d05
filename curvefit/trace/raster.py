"""Lines followed through the pixels of one plot box."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import arc_length, resample
from curvefit.records import Panel
from curvefit.trace.branches import branches, carried_to
from curvefit.trace.bundle import Member, untangled
from curvefit.trace.centre import Line, centred, width_along
from curvefit.trace.ends import settled
from curvefit.trace.grid import Inked, without_lines
from curvefit.trace.ink import MARGIN, Flat, Layer, hues, straightened, stroke_width
from curvefit.trace.joins import bridged, joined
from curvefit.trace.legend import without_legends
from curvefit.trace.linked import Loose, linked_lines, without
from curvefit.trace.sift import is_frame, own_ink, pointers, without_doubles
from curvefit.trace.text import beside_markers, label_boxes, lettering, markers, spread
from curvefit.trace.track import Track, Tracking, across, best_track, peel

__all__ = ["Found", "Settings", "line_along", "lines_of"]

Image = NDArray[np.float32]
Mask = NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Settings:
    """Tolerances of the tracing, lengths as a share of the panel's width unless they say px."""

    tracking: Tracking = field(default_factory=Tracking)
    shortest: float = 0.05  #: ink that a line must show
    loose: float = 0.035  #: ink that a line in any direction must show
    long: float = 0.4  #: length across of a line that needs no second look
    contact: float = 0.03  #: contact of two lines that makes a bundle
    gap: float = 0.12  #: what a label in a line may take of it
    label: float = 0.045  #: what a label may hide of the end of a line across a family
    misses: int = 4  #: tracks without enough clean ink after which no more are tried
    at_most: int = 40  #: lines of one ink


@dataclass(frozen=True, slots=True, eq=False)
class Found:
    """A line with the ink that it was seen in; loose: found by linking, in any direction."""

    line: Line
    colour: tuple[float, float, float]
    loose: bool = False
    closed: bool = False
    bundled: Member | None = None


def lines_of(panel: Panel, settings: Settings | None = None) -> list[Found]:
    """The lines of the panel, in array px."""
    tolerances = settings or Settings()
    flat, inked, width, letters, blots = _prepared(panel)
    least = 0.6 * tolerances.shortest * panel.warp.size[0]

    def frame(line: Line) -> bool:
        return is_frame(line, inked.rows, inked.cols, flat.dark.shape, MARGIN)

    found: list[Found] = []
    for member, colour in hues(flat, inked.ink, width):
        layer = _layer(flat, inked, member, letters, blots)
        lines = [
            x for x in _follow(layer, width, tolerances) if not frame(x) and _convincing(x, least)
        ]
        lines = [lines[i] for i in without_doubles(lines, least)]
        lines, loose = _sorted_out(panel, layer, lines, width, tolerances)
        lines, loose = joined(lines, loose, layer, 20.0 + 4.0 * width)
        lines = bridged(lines, layer, tolerances.gap * panel.warp.size[0])
        alone, members = untangled(lines, layer, tolerances.contact * panel.warp.size[0])
        found += [Found(line, colour) for line in alone]
        found += [Found(m.line, colour, bundled=m) for m in members]
        found += [Found(x.line, colour, True, x.closed) for x in loose if not frame(x.line)]
    led = 0.15 * float(np.hypot(*panel.warp.size))
    leaders = pointers([f.line for f in found], label_boxes(panel), led)
    found = [f for i, f in enumerate(found) if i not in leaders]
    family = [f.line for f in found if not f.loose]
    family = [x for x in family if np.ptp(x.xy[:, 0]) > tolerances.long * panel.warp.size[0]]
    reach = tolerances.label * panel.warp.size[0]
    found = [part for one in found for part in _across(one, family, reach)]
    tied = [f for f in found if f.bundled is not None]
    known = [f.line for f in tied]
    free = [f for f in found if f.bundled is None and own_ink(f.line, known) >= least]
    kept = without_doubles([f.line for f in free], least)
    return tied + [free[i] for i in kept]


def _across(one: Found, family: list[Line], reach: float) -> list[Found]:
    """A line across a family from curve to curve, its branches apart; other lines as they are."""
    if len(family) < 2 or one.closed or one.bundled is not None:
        return [one]
    if any(one.line is curve for curve in family):
        return [one]
    line = carried_to(one.line, family, reach)
    return [replace(one, line=part, loose=True) for part in branches(line, family)]


def _prepared(panel: Panel) -> tuple[Flat, Inked, float, Mask, Mask]:
    """The straightened panel, its ink without paper lines, stroke width, letters, markers."""
    flat = straightened(panel)
    inked = without_legends(panel, flat.dark, without_lines(flat.dark, MARGIN))
    width = stroke_width(inked.ink, 0.02 * panel.warp.size[0], inked.known < 0.3)
    blots = markers(inked.ink, width)
    letters = lettering(panel, np.where(blots | (inked.known < 0.6), 0, inked.ink), width)
    letters &= ~beside_markers(letters, blots, width)
    return flat, inked, width, letters, blots


def line_along(panel: Panel, path: NDArray[np.float64]) -> Found | None:
    """The line of ink along a path (n, 2) array px between its ends, None where there is none."""
    flat, inked, width, letters, blots = _prepared(panel)
    layer = _layer(flat, inked, np.ones_like(flat.dark), letters, blots)
    smooth = _rounded(path)
    own = width_along(layer.lines, layer.known, resample(smooth, 2.0), 2.0 * width + 2)
    own = float(np.clip(own, 0.5 * width, 1.6 * width)) if np.isfinite(own) else width
    line = centred(layer.lines, layer.known, smooth, own, slack=max(5.0, own))
    if line.good.sum() < 0.2 * (line.known > 0.5).sum() + 3:
        return None
    at = np.round(line.xy[line.good]).astype(int)
    r, g, b = 1.0 - np.median(flat.channels[at[:, 1], at[:, 0]], axis=0)
    return Found(line, (float(r), float(g), float(b)), loose=True)


def _rounded(path: NDArray[np.float64]) -> NDArray[np.float64]:
    """A smooth curve through the points of a polyline, by chord length."""
    from scipy.interpolate import PchipInterpolator

    s = arc_length(path)
    keep = np.r_[True, np.diff(s) > 1e-6]
    if keep.sum() < 3:
        return path
    at = np.linspace(0, s[-1], max(int(s[-1]), 8))
    return np.asarray(PchipInterpolator(s[keep], path[keep])(at))


def _sorted_out(
    panel: Panel, layer: Layer, lines: list[Line], width: float, settings: Settings
) -> tuple[list[Line], list[Loose]]:
    """Long lines first; short ones only where linking in any direction does not see more."""
    size = panel.warp.size[0]
    long = [x for x in lines if np.ptp(x.xy[:, 0]) > settings.long * size]
    short = [x for x in lines if np.ptp(x.xy[:, 0]) <= settings.long * size]
    loose = linked_lines(panel, layer, long, width, settings.loose * size)
    for line in short:
        over = [x for x in loose if own_ink(line, [x.line]) < 0.4 * line.good.sum()]
        if any(x.line.good.sum() > 1.06 * line.good.sum() for x in over):
            continue
        loose = [x for x in loose if all(x is not o for o in over)]
        long.append(line)
    return long, loose


def _layer(flat: Flat, inked: Inked, member: Image, letters: Mask, blots: Mask) -> Layer:
    """One ink alone: the others are neither ink nor blank, nor are letters and markers."""
    own = np.clip(inked.ink * (member / _depth(inked.ink * member)), 0.0, 1.0)
    other = inked.ink * (1.0 - member)
    known = inked.known * np.clip(1.0 - 1.5 * other, 0, 1)
    known = np.where(spread(letters), 0.3 * known, known)
    known = np.where(blots, 0.0, known).astype(np.float32)
    lines = np.where(letters | blots, 0.0, own).astype(np.float32)
    weak = np.where(letters, 0.3 * own, own).astype(np.float32)
    return Layer(weak, lines, known)


def _depth(ink: Image) -> float:
    """How dark the strokes of an ink are in their middle: pale ones are as solid as black ones."""
    seen = ink[ink > 0.35]
    return float(np.clip(np.quantile(seen, 0.75), 0.6, 1.0)) if len(seen) > 50 else 1.0


def _follow(layer: Layer, width: float, settings: Settings) -> list[Line]:
    import cv2

    rows, cols = layer.ink.shape
    k = float(np.clip(settings.tracking.stroke / max(width, 1.0), 0.15, 1.0))
    if width < 1.3:
        k = 1.5
    size = (max(round(cols * k), 16), max(round(rows * k), 16))
    how = cv2.INTER_AREA if k < 1 else cv2.INTER_LINEAR
    small = cv2.resize(layer.ink, size, interpolation=how)
    known = cv2.resize(layer.known, size, interpolation=how)
    scale = np.array([cols / size[0], rows / size[1]])
    lines: list[Line] = []
    misses = 0
    for _ in range(settings.at_most):
        track = best_track(across(small, known, settings.tracking), settings.tracking)
        if track is None or track.score < settings.shortest * size[0]:
            break
        line, own = _refined(layer, lines, track, scale, width)
        if line is None or line.good.sum() < 0.6 * settings.shortest * cols:
            misses += 1
        if misses > settings.misses:
            break
        if line is None:
            peel(small, known, track.x, track.y, 0.5 * own * k + 0.3)
            continue
        x, y = ((line.xy + 0.5) / scale - 0.5).T
        peel(small, known, x, y, 0.5 * own * k + 0.3)
        lines.append(line)
    return lines


def _refined(
    layer: Layer, lines: list[Line], track: Track, scale: NDArray[np.float64], width: float
) -> tuple[Line | None, float]:
    """The track at sub-pixel precision between its true ends, and the width of its stroke."""
    rough = (np.stack([track.x, track.y], 1) + 0.5) * scale - 0.5
    own = width_along(layer.lines, layer.known, resample(rough, 2.0), 3.0 * width + 2)
    if not np.isfinite(own):
        own = width
    own = float(np.clip(own, 0.4 * width, 2.5 * width))
    layer = without(layer, lines)
    line = centred(layer.lines, layer.known, rough, own)
    return settled(layer, line, 0.08 * layer.ink.shape[1]), own


def _convincing(line: Line, least: float) -> bool:
    """Whether there is enough clean ink, on a smooth line: letters in a row show neither."""
    return bool(line.good.sum() >= least and line.scatter < 0.15 * line.width + 0.25)
