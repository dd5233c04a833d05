"""Known charts for the tests of every stage: drawn, put into records, written to a file.

drawn = chart("family", seed=7, look="inked", damage="scan")
page = page_of(drawn)                      # what `load` would give
panels = panels_of(drawn.truth, page)      # what a perfect `calibrate` would give
flow, value = true_line(panels[0], drawn.truth["panels"][0]["curves"][0])   # box fractions
"""

from __future__ import annotations

import hashlib
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from curvefit.geometry import Warp, homography
from curvefit.records import Axis, Mark, Page, Panel
from sample_charts.draw import Chart, chart

__all__ = ["chart", "page_of", "panels_of", "true_line", "write_chart"]

Array = NDArray[np.float64]


def write_chart(drawn: Chart, folder: Path) -> Path:
    """The chart's file alone in a folder, without its truth."""
    folder.mkdir(parents=True, exist_ok=True)
    path = folder / f"{drawn.name}{drawn.suffix}"
    path.write_bytes(drawn.data)
    return path


def page_of(drawn: Chart) -> Page:
    """The Page of a chart that was drawn as a picture."""
    assert drawn.picture is not None, "a vector chart has no picture: load its file"
    pixels = drawn.picture
    if pixels.ndim == 2:
        pixels = np.repeat(pixels[:, :, None], 3, 2)
    digest = hashlib.sha256(drawn.data).hexdigest()
    return Page(drawn.name + drawn.suffix, digest, 1, pixels, (pixels.shape[1], pixels.shape[0]))


def panels_of(truth: dict[str, Any], page: Page, u_px: float = 0.02) -> tuple[Panel, ...]:
    """The true plot boxes with their true axes, known to `u_px` (a homography: not for curls)."""
    panels = []
    for k, spec in enumerate(truth["panels"]):
        corners = np.array(spec["corners_px"])
        name = chr(ord("A") + k)
        sides = np.hypot(*(corners - np.roll(corners, 1, 0)).T)  # left, top, right, bottom
        size = (float(max(sides[1], sides[3])), float(max(sides[0], sides[2])))
        square = np.array([[0, 0], [size[0], 0], size, [0, size[1]]], float)
        warp = Warp(homography(corners, square), size)
        axes = tuple(_axis(name, a, corners, u_px) for a in spec["axes"])
        panels.append(Panel(name, page, corners, warp, axes, turn=_turn(corners)))
    return tuple(panels)


def _turn(corners: Array) -> int:
    """Quarter turns clockwise that set the page upright."""
    along = corners[1] - corners[0]
    return int(np.round(-np.degrees(np.arctan2(along[1], along[0])) / 90)) % 4


def _axis(panel: str, spec: dict[str, Any], corners: Array, u_px: float) -> Axis:
    f = np.log10 if spec["scale"] == "log" else np.asarray
    lo, hi = float(f(spec["lo"])), float(f(spec["hi"]))
    side = spec["side"].partition(".")[0]
    start, end = {
        "bottom": (corners[3], corners[2]), "top": (corners[0], corners[1]),
        "left": (corners[3], corners[0]), "right": (corners[2], corners[1]),
    }[side]  # fmt: skip
    length = float(np.hypot(*(end - start)))
    u = u_px / length * abs(hi - lo)
    covariance = np.array([[1.0, -1.0], [-1.0, 2.0]]) * u**2
    marks = tuple(
        Mark(start + (float(f(v)) - lo) / (hi - lo) * (end - start), u_px, f"{v:g}", float(v))
        for v in spec["ticks"]
    )
    return Axis(f"{panel}.{spec['side']}", side, spec["quantity"], spec["unit"], spec["unit"],  # type: ignore[arg-type]
                spec["scale"], lo, hi - lo, covariance, marks, title=spec["title"])  # fmt: skip


def true_line(panel: Panel, curve: dict[str, Any]) -> tuple[Array, Array]:
    """(across, up) fractions of the box along a true curve."""
    across = panel.axis(curve["flow_axis"]).fraction(np.array(curve["flow"]))
    up = panel.axis(curve["axis"]).fraction(np.array(curve["value"]))
    return across, up
