"""A second look: the page is read afresh where a label should stand and none was found."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from curvefit.identify.placing import Label, label_of
from curvefit.records import Page, Panel, Trace, Word

__all__ = ["again", "missing"]

Array = NDArray[np.float64]

_ALPHABETS = (None, "0123456789Øø⌀=.,/\"'% ", "0123456789.%")


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
    place = _usual_place(named, height)
    boxes = []
    for trace in unnamed:
        centre = place(trace)
        corners = centre + np.array([[-1, -1], [1, -1], [1, 1], [-1, 1]]) * (half + 0.12 * height)
        boxes.append(panel.warp.to_page(corners))
    return _read(panel, boxes)


def again(panel: Panel, labels: Sequence[Label]) -> tuple[Label, ...]:
    """The same labels read afresh from the page's pixels."""
    if panel.page.vector:
        return ()
    return _read(panel, [_grown(w.word.box, 0.1 * w.word.height) for w in labels])


class _Place:
    """Centre of a label from its line: anchor 0 its left end, 1 its right end, or between."""

    def __init__(self, share: float, offset: Array) -> None:
        self.share, self.offset = share, offset

    def __call__(self, trace: Trace) -> Array:
        return _anchor(trace, self.share) + self.offset


def _anchor(trace: Trace, share: float) -> Array:
    return np.asarray(trace.flat[round(share * (len(trace.flat) - 1))])


def _usual_place(named: Sequence[tuple[Trace, Label]], height: float) -> _Place:
    best: tuple[float, _Place] | None = None
    for share in (1.0, 0.0, *np.linspace(0.02, 0.98, 25)):
        offsets = np.array([w.centre - _anchor(t, share) for t, w in named])
        spread = float(np.abs(offsets - np.median(offsets, axis=0)).max())
        far = float(np.hypot(*np.median(offsets, axis=0)))
        cost = spread + 0.2 * far + (0.0 if share in (0.0, 1.0) else 0.1 * height)
        if best is None or cost < best[0]:
            best = cost, _Place(float(share), np.median(offsets, axis=0))
    assert best is not None
    return best[1]


def _grown(box: Array, by: float) -> Array:
    """A box of text widened on all sides [px]."""
    along = (box[1] - box[0]) / max(float(np.hypot(*(box[1] - box[0]))), 1e-9)
    down = (box[3] - box[0]) / max(float(np.hypot(*(box[3] - box[0]))), 1e-9)
    signs = np.array([[-1, -1], [1, -1], [1, 1], [-1, 1]]) * by
    return np.asarray(box + signs[:, :1] * along + signs[:, 1:] * down)


def _read(panel: Panel, boxes: Sequence[Array]) -> tuple[Label, ...]:
    from curvefit.ocr import readings

    crops, kept = [], []
    for box in boxes:
        crop = _crop(panel.page, box)
        if crop is not None:
            crops.append(crop)
            kept.append(box)
    found = []
    for box, texts in zip(kept, readings(crops, _ALPHABETS), strict=True):
        for text, score in dict(texts).items():
            if len(text.strip()) > 1 and score > 0.3:
                found.append(label_of(panel, Word(text, box, score)))
    return tuple(found)


def _crop(page: Page, box: Array) -> NDArray[np.uint8] | None:
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
    return np.asarray(crop, np.uint8)
