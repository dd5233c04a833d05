"""A second look: the page is read afresh where a label should stand and none was found.

Text that touches a line or a grid is missed where words are searched for over the whole page; a
reader that is shown the right spot reads it all the same.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.identify.placing import Label, label_of, on_scale
from curvefit.records import Page, Panel, Trace, Word

__all__ = ["again", "along", "at_ends", "missing"]

Array = NDArray[np.float64]
Image = NDArray[np.uint8]
_Place = tuple[float, float, float]

_PERCENT = "0123456789.%"
_ALPHABETS = (None, "0123456789Øø⌀=.,/\"'% ", _PERCENT)
# fmt: off
# outwards along the line, to the right, down, in heights of the text
_AT_ENDS = [[(0.0, 0.0, 0.0), (0.0, 0.0, -0.6), (0.8, 0.0, 0.0), (1.5, 0.0, 0.0), (0.8, 0.0, -0.6)],
            [(0.0, 0.0, 0.6), (0.0, 0.0, 1.2), (0.0, 1.7, 0.0), (0.0, -1.7, 0.0), (2.3, 0.0, 0.0)]]
# fmt: on
_LABELS = re.compile(
    r"[Øø⌀∅]\s?\d{2,4}(?:\s?mm)?|(?<!\d)\d{3,4}\s?(?:mm|rpm|1/min)|\d{1,2}(?:[- ]?\d/\d{1,2})?\s?\""
)
_SAMPLED = 3  #: lines of a kind that are searched in full; the others where these had theirs


def missing(
    panel: Panel, named: Sequence[tuple[Trace, Label]], unnamed: Sequence[Trace]
) -> tuple[Label, ...]:
    """Labels read where those of the unnamed lines should stand, as those of their kin do.

    Parameters
    ----------
    named : lines with their labels; unnamed : lines of the same kind without one.

    Notes
    -----
    Kin carry their labels alike: at the right end, at the left end, or a part of the way along.
    The way in which the offsets of the labels agree best foretells where the others stand.
    """
    if panel.page.vector or not named or not unnamed:
        return ()
    half = np.median([w.half for _, w in named], axis=0)
    height = float(np.median([w.height for _, w in named]))
    share, offset = _usual_place(named, height)
    boxes = []
    for trace in unnamed:
        centre = _anchor(trace, share) + offset
        boxes += [_box(panel, centre, half + k * height) for k in (0.12, 0.3)]
    return _read(panel, boxes)


def again(panel: Panel, labels: Sequence[Label]) -> tuple[Label, ...]:
    """The same labels read afresh from the page's pixels."""
    if panel.page.vector:
        return ()
    grown = [_box(panel, w.centre, w.half + 0.1 * w.height) for w in labels]
    return _read(panel, grown)


def at_ends(panel: Panel, traces: Sequence[Trace], height: float) -> tuple[Label, ...]:
    """Levels in % read about the ends of lines, over whatever they are printed on.

    Parameters
    ----------
    height : of the text [box px].

    Notes
    -----
    Some lines are searched all about both ends, the others where these had their level.
    """
    if panel.page.vector or not traces:
        return ()
    sample = [traces[round(k)] for k in np.linspace(0, len(traces) - 1, min(_SAMPLED, len(traces)))]
    first = _levels_at(panel, sample, _AT_ENDS[0], height)
    if len(first) < len(sample):
        first += _levels_at(panel, sample, _AT_ENDS[1], height)
    hits = {where for where, _ in first}
    rest = [t for t in traces if not any(t is s for s in sample)]
    places = sorted(hits, key=lambda p: -sum(where == p for where, _ in first))[:3]
    second = _levels_at(panel, rest, places, height) if places else []
    return _once([label for _, label in (*first, *second)], height)


def _once(labels: Sequence[Label], height: float) -> tuple[Label, ...]:
    """Labels without repeats of the same print, the surest reading of each."""
    kept: list[Label] = []
    for label in sorted(labels, key=lambda w: -w.word.score):
        near = [k for k in kept if np.hypot(*(k.centre - label.centre)) < 2.0 * height]
        if not near:
            kept.append(label)
    return tuple(kept)


def _about(trace: Trace, end: int, place: _Place, height: float) -> Array:
    """A point about the end of a line: so far outwards along it, to the right and down."""
    xy = trace.flat if end == -1 else trace.flat[::-1]
    back = np.flatnonzero(np.hypot(*(xy - xy[-1]).T) > 2.0 * height)
    direction = xy[-1] - xy[back[-1] if len(back) else 0]
    direction = direction / max(float(np.hypot(*direction)), 1e-9)
    return np.asarray(xy[-1] + (place[0] * direction + np.array(place[1:])) * height)


def _levels_at(
    panel: Panel, traces: Sequence[Trace], places: Sequence[_Place], height: float
) -> list[tuple[_Place, Label]]:
    from curvefit.ocr import readings

    wanted = [
        (place, _box(panel, _about(trace, end, place, height), np.array([1.6, 0.72]) * height))
        for trace in traces
        for end in (0, -1)
        for place in places
    ]
    crops = [(place, box, _crop(panel.page, box)) for place, box in wanted]
    kept = [(place, box, crop) for place, box, crop in crops if crop is not None]
    found = []
    texts = readings([c for _, _, c in kept], (None, _PERCENT))
    for (place, box, _), read in zip(kept, texts, strict=True):
        for text, score in read:
            match = re.search(r"(?<!\d)(\d{2}(?:\.\d)?)\s?%", text)
            if match and score > 0.75:
                found.append((place, label_of(panel, Word(match[0], box, score))))
                break
    return found


def along(
    panel: Panel, traces: Sequence[Trace], height: float, wanted: Callable[[Label], bool]
) -> tuple[Label, ...]:
    """Labels read behind the ends of lines and along them: above, in and below them.

    Parameters
    ----------
    height : of the text [box px]; wanted : whether a text is one of the labels that are missed.

    Notes
    -----
    The strip beside a line is straightened along it, so that text that follows it is level. Two
    lines are searched in full; a kind of place in which neither has a label is left out. The
    strip above one line may be that below another: which label is whose is decided later.
    """
    if panel.page.vector or not traces:
        return ()
    every: list[Label] = []
    for place in (_behind, _before, _above, _over, _below):
        found: list[Label] = []
        for k, trace in enumerate(_ends_first(traces)):
            if k == 2 and not found:
                break
            read = _read_strips(panel, place(panel, trace, height), height)
            hits = [w for w in read if wanted(w) and not on_scale(w, panel)]
            found += [max(hits, key=lambda w: w.word.score)] if hits else []
        every += found
        if place is _behind and len(found) == len(traces) > 1:
            break
    return tuple(every)


def _ends_first(traces: Sequence[Trace]) -> list[Trace]:
    return [*traces[:1], *traces[-1:], *traces[1:-1]] if len(traces) > 1 else list(traces)


@dataclass(frozen=True, slots=True, eq=False)
class _Strip:
    """Pixels in which a label may stand: its middle [box px], and where in it text is looked for.

    side : 1 text starts at `centre`, −1 it ends there, 0 it may be anywhere about it.
    """

    crop: Image
    centre: Array
    side: int = 0


def _behind(panel: Panel, trace: Trace, height: float) -> list[_Strip]:
    return _level_strip(panel, trace.flat[-1], 1, height)


def _before(panel: Panel, trace: Trace, height: float) -> list[_Strip]:
    return _level_strip(panel, trace.flat[0], -1, height)


def _level_strip(panel: Panel, end: Array, side: int, height: float) -> list[_Strip]:
    middle = end + np.array([3.2 * side * height, 0])
    crop = _crop(panel.page, _box(panel, middle, np.array([3.0, 0.75]) * height))
    return [] if crop is None else [_Strip(crop, end + np.array([0.4 * side * height, 0]), side)]


def _above(panel: Panel, trace: Trace, height: float) -> list[_Strip]:
    return _beside(panel, trace, height, -0.9)


def _over(panel: Panel, trace: Trace, height: float) -> list[_Strip]:
    return _beside(panel, trace, height, 0.0)


def _below(panel: Panel, trace: Trace, height: float) -> list[_Strip]:
    return _beside(panel, trace, height, 0.9)


def _beside(panel: Panel, trace: Trace, height: float, shift: float) -> list[_Strip]:
    """Strips nine heights long beside a line: along the first fifth of it and the last."""
    import cv2

    x, y = trace.flat.T
    width = 9.0 * height
    starts = np.arange(x[0] - height, x[-1] - width, 4.5 * height)
    part = (x[-1] - x[0]) / 5
    strips = []
    for start in starts[(starts < x[0] + part) | (starts > x[-1] - part - width)]:
        across = np.arange(start, start + width)
        middle = np.interp(across, x, y) + shift * height
        up = np.arange(-0.75 * height, 0.75 * height)
        flat = np.stack(np.broadcast_arrays(across, middle + up[:, None]), axis=-1)
        xy = panel.warp.to_page(flat.reshape(-1, 2)).reshape(flat.shape).astype(np.float32)
        crop = cv2.remap(
            panel.page.pixels,
            xy[..., 0],
            xy[..., 1],
            cv2.INTER_CUBIC,
            borderMode=cv2.BORDER_REPLICATE,
        )
        centre = np.array([start + width / 2, middle[len(middle) // 2]])
        if _inked(crop):
            strips.append(_Strip(np.asarray(crop, np.uint8), centre))
    return strips


def _read_strips(panel: Panel, strips: Sequence[_Strip], height: float) -> list[Label]:
    from curvefit.ocr import recognise

    found = []
    texts = recognise([s.crop for s in strips])
    for strip, (text, score) in zip(strips, texts, strict=True):
        if score < 0.6:
            continue
        for part in _labels_in(text):
            half = np.array([0.28 * len(part), 0.5]) * height
            centre = strip.centre + np.array([strip.side * half[0], 0])
            found.append(label_of(panel, Word(part, _box(panel, centre, half), score)))
    return found


def _labels_in(text: str) -> Iterator[str]:
    """The text, and what in it looks like a label of its own."""
    clean = re.sub(r"^[^\w⌀∅@(]+|[^\w%\"')]+$", "", text)
    if len(clean) > 1:
        yield clean
    for match in _LABELS.finditer(text):
        if match[0].strip() != clean:
            yield match[0].strip()


def _anchor(trace: Trace, share: float) -> Array:
    return np.asarray(trace.flat[round(share * (len(trace.flat) - 1))])


def _usual_place(named: Sequence[tuple[Trace, Label]], height: float) -> tuple[float, Array]:
    """Where labels stand: the share of the way along their lines, and the offset from there."""
    best: tuple[float, float, Array] | None = None
    for share in (1.0, 0.0, *np.linspace(0.02, 0.98, 25)):
        offsets = np.array([w.centre - _anchor(t, share) for t, w in named])
        usual = np.median(offsets, axis=0)
        cost = float(np.abs(offsets - usual).max() + 0.2 * np.hypot(*usual))
        cost += 0.0 if share in (0.0, 1.0) else 0.1 * height
        if best is None or cost < best[0]:
            best = cost, float(share), usual
    assert best is not None
    return best[1], best[2]


def _box(panel: Panel, centre: Array, half: Array) -> Array:
    """Page px corners of an upright box in box px."""
    return panel.warp.to_page(centre + np.array([[-1, -1], [1, -1], [1, 1], [-1, 1]]) * half)


def _read(panel: Panel, boxes: Sequence[Array]) -> tuple[Label, ...]:
    from curvefit.ocr import readings

    crops = [(box, _crop(panel.page, box)) for box in boxes]
    kept = [(box, crop) for box, crop in crops if crop is not None]
    found = []
    texts = readings([c for _, c in kept], _ALPHABETS)
    for (box, _), read in zip(kept, texts, strict=True):
        for text, score in dict(read).items():
            if len(text.strip()) > 1 and score > 0.3:
                found.append(label_of(panel, Word(text, box, score)))
    return tuple(found)


def _crop(page: Page, box: Array) -> Image | None:
    """The upright pixels of a box; None where it leaves the page or is too small to read."""
    import cv2

    width = round(float(np.hypot(*(box[1] - box[0]))))
    height = round(float(np.hypot(*(box[3] - box[0]))))
    low, high = box.min(0), box.max(0)
    if height < 5 or width < 5 or (low < 0).any() or (high > np.array(page.size) - 1).any():
        return None
    source = box[[0, 1, 3]].astype(np.float32)
    target = np.array([[0, 0], [width, 0], [0, height]], np.float32)
    matrix = cv2.getAffineTransform(source, target)
    crop = cv2.warpAffine(
        page.pixels, matrix, (width, height), flags=cv2.INTER_CUBIC, borderMode=cv2.BORDER_REPLICATE
    )
    return np.asarray(crop, np.uint8) if _inked(crop) else None


def _inked(crop: NDArray[np.uint8]) -> bool:
    """Whether there is anything to read: blank paper is not shown to the reader."""
    light = crop.min(2)
    return bool(np.ptp(np.percentile(light, (1, 90))) > 40)
