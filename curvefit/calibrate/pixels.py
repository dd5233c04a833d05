"""Evidence from pixels: the plot boxes of a scanned, faxed or photographed page."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from curvefit.calibrate.boxes import Box, find_boxes
from curvefit.calibrate.evidence import Evidence
from curvefit.calibrate.ink import ink_of
from curvefit.calibrate.lines import long_lines
from curvefit.calibrate.rectify import rectification, segments
from curvefit.calibrate.sides import on_page, side_lines, warp_of
from curvefit.notes import PageNotes, PanelNotes
from curvefit.records import Page

__all__ = ["Settings", "gather"]

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Settings:
    """work : long side [px] of the copy on which lines are looked for; shortest : the shortest
    line of interest, as a share of that side; smallest : the smallest plot box, as a share of the
    page's area.
    """

    work: int = 2000
    shortest: float = 0.04
    smallest: float = 0.008


def gather(
    page: Page,
    page_notes: PageNotes,
    panel_notes: tuple[PanelNotes, ...],
    settings: Settings | None = None,
) -> tuple[Evidence, ...]:
    """What the pixels show of each plot box on the page, from top to bottom."""
    s = settings or Settings()
    ink = ink_of(page.pixels)
    evidence = []
    for corners, _box in _boxes(ink, s):
        warp = warp_of(corners)
        evidence.append(Evidence(corners, warp, 0, (), ()))
    return tuple(evidence)


def _boxes(ink: NDArray[np.uint8], s: Settings) -> list[tuple[Array, Box]]:
    """Corners on the page (sub-pixel) of each plot box, from top to bottom."""
    import cv2

    scale = min(1.0, s.work / max(ink.shape))
    small = ink
    if scale < 1:
        small = cv2.resize(ink, None, fx=scale, fy=scale, interpolation=cv2.INTER_AREA)
    size = (small.shape[1], small.shape[0])
    shortest = s.shortest * max(size)
    matrix = rectification(segments(small, 0.5 * shortest), size)
    flat = cv2.warpPerspective(small, matrix, size)
    across = long_lines(flat, True, int(shortest))
    upright = long_lines(flat, False, int(shortest))
    to_small = np.array([[scale, 0, scale / 2 - 0.5], [0, scale, scale / 2 - 0.5], [0, 0, 1]])
    found = []
    for box in find_boxes(across, upright, 0.3 * shortest):
        if box.area < s.smallest * size[0] * size[1]:
            continue
        rough = on_page(matrix @ to_small, (box.left, box.top, box.right, box.bottom))
        corners, _ = side_lines(ink, rough, box.seen, 4.0 / scale + 1)
        found.append((corners, box))
    return sorted(found, key=lambda f: (round(f[0][:, 1].mean() / 20), f[0][:, 0].mean()))


