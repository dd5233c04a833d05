"""Draws the sample charts, each with the exact truth beside it.

    python sample_charts/draw.py [--out DIR] [--only NAME…]

Tests draw hundreds of others by `chart(kind, seed, look, damage)`. Everything is invented but the
chart whose truth names its source.
"""

from __future__ import annotations

import argparse
import io
import json
import sys
import time
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

if __package__ in (None, ""):
    sys.path.insert(0, str(Path(__file__).resolve().parent.parent))

from sample_charts import drafted, plotted, sheet
from sample_charts.canvas import Drawing, ink, raster
from sample_charts.canvas import pdf as vector
from sample_charts.damage import damage as spoil
from sample_charts.kinds import KINDS, scene
from sample_charts.scenes import PanelSpec, Scene

Array = NDArray[np.float64]
LOOKS = ("plotted", "inked", "lettered", "vector")


@dataclass(frozen=True)
class Chart:
    """A drawn chart: the bytes of its file, the picture where it has one, and the truth."""

    name: str
    suffix: str
    data: bytes
    truth: dict[str, Any]
    picture: NDArray[np.uint8] | None = None

    def save(self, folder: Path) -> Path:
        """Write the file and its truth; the path of the file."""
        folder.mkdir(parents=True, exist_ok=True)
        path = folder / f"{self.name}{self.suffix}"
        path.write_bytes(self.data)
        text = json.dumps(self.truth, ensure_ascii=False, separators=(",", ":"))
        path.with_suffix(".truth.json").write_text(text + "\n", encoding="utf-8")
        return path


def chart(
    kind: str, seed: int, look: str = "plotted", damage: str = "clean", *, dpi: float = 200.0,
    mono: bool | None = None, setting: str = "alone", as_pdf: bool = False,
    name: str | None = None, size: tuple[float, float] | None = None,
    style: dict[str, Any] | None = None, **choices: Any,
) -> Chart:  # fmt: skip
    """One seeded chart.

    Parameters
    ----------
    kind : one of `kinds.KINDS`
    look : "plotted" (a plotting library), "inked" (own layout, own strokes), "lettered" (the same
        by an unsteady hand) or "vector" (own layout, PDF operators)
    damage : one of `damage.KINDS`; dpi : resolution of the damaged picture
    setting : "alone", "page" (on a page with text and a table) or "report" (on the second of two
        pages); not for the look "plotted"
    as_pdf : a PDF, of vectors where nothing is damaged, else of the damaged picture
    style : fields of `drafted.Style` that are not left to chance
    choices : what else the kind of scene takes (units, language, comma, number of lines …)
    """
    rng = np.random.default_rng([seed, KINDS.index(kind)])
    what = scene(kind, rng, **choices)
    mono = bool(rng.random() < 0.4) if mono is None else mono
    width, height = size or ((396.0, 540.0) if len(what.panels) > 1 else (468.0, 360.0))
    if look == "plotted":
        figure, boxes = plotted.plot(what, rng, mono, width, height)
        pages: list[Drawing] = []
        draw = lambda fine: plotted.raster(figure, fine)  # noqa: E731
    else:
        drawn = replace(drafted.style(rng, mono, look == "lettered"), **(style or {}))
        pages, boxes = _pages(what, drawn, width, height, setting)
        width, height = pages[-1].width, pages[-1].height
        draw = lambda fine: _paint(pages[-1], fine, rng, look)  # noqa: E731
    name = name or f"{kind}_{seed}_{look}_{damage}"
    if as_pdf and damage == "clean":
        document = vector(pages) if pages else plotted.pdf(figure)
        size_px = (round(width * 300 / 72), round(height * 300 / 72))
        facts = truth(what, boxes, lambda xy: np.asarray(xy) * 300 / 72 - 0.5, size_px)
        facts |= {"name": name, "look": look, "damage": "vector", "page": max(len(pages), 1)}
        return Chart(name, ".pdf", document, facts)
    fine = 1 if damage == "clean" else 2
    clean = draw(dpi * fine)
    picture, where = spoil(clean, damage, rng, fine)
    scale = np.array(clean.shape[1::-1]) / [width, height]
    facts = truth(what, boxes, lambda xy: where(np.asarray(xy) * scale - 0.5),
                  picture.shape[1::-1])  # fmt: skip
    facts |= {"name": name, "look": look, "damage": damage, "page": 1}
    suffix, data = encode(picture, damage, dpi, as_pdf)
    return Chart(name, suffix, data, facts, picture)


def _pages(
    what: Scene, style: drafted.Style, width: float, height: float, setting: str
) -> tuple[list[Drawing], list[drafted.Box]]:
    """The drawn pages, the chart on the last one, and its plot boxes."""
    if setting == "alone":
        alone, boxes = drafted.draft(what, style, width, height)
        return [alone], boxes
    font = "roman" if style.font == "hand" else style.font
    paper = sheet.page(font)
    top = sheet.prose(paper, 70.0, font) + 14.0
    _, boxes = drafted.draft(what, style, width, height, top, paper)
    end = sheet.table(paper, top + height + 26.0, what, font)
    sheet.section(paper, sheet.MARGIN, end + 20.0)
    return [*([sheet.letter(font)] if setting == "report" else []), paper], boxes


def _paint(page: Drawing, dpi: float, rng: np.random.Generator, look: str) -> NDArray[np.uint8]:
    if look == "vector":
        return raster(vector([page]), dpi)
    return np.asarray(ink(page, dpi, 4 if dpi < 260 else 2, rng))


def encode(
    picture: NDArray[np.uint8], damage: str, dpi: float, as_pdf: bool = False
) -> tuple[str, bytes]:
    """(suffix, bytes) of the file that such a damaged picture comes in."""
    from PIL import Image

    image, out = Image.fromarray(picture), io.BytesIO()
    if as_pdf:
        still = time.gmtime(0)
        image.save(out, "PDF", resolution=dpi, quality=70, creationDate=still, modDate=still)
        return ".pdf", out.getvalue()
    if damage == "fax":
        image.convert("1", dither=Image.Dither.NONE).save(
            out, "TIFF", compression="group4", dpi=(dpi, dpi))  # fmt: skip
        return ".tif", out.getvalue()
    if damage in ("clean", "coarse"):
        image.quantize(64, dither=Image.Dither.NONE).save(out, "PNG", optimize=True, dpi=(dpi, dpi))
        return ".png", out.getvalue()
    quality = {"photo": 85, "turned": 82, "copy": 75}.get(damage, 78)
    image.save(out, "JPEG", quality=quality, dpi=(round(dpi), round(dpi)))
    return ".jpg", out.getvalue()


# -- truth ----------------------------------------------------------------------------------------


def truth(
    what: Scene, boxes: list[drafted.Box], to_px: Any, size: tuple[int, ...]
) -> dict[str, Any]:
    """What a perfect reader would say of the chart.

    Pixels are those of the stored image (a vector page: 300 to the inch), the centre of the
    top-left pixel at (0, 0); values are in the printed units, named by UCUM codes.
    """
    return {
        "format": "curvefit-sample-truth",
        "version": 1,
        "kind": what.kind,
        "source": what.source,
        "size_px": [int(s) for s in size],
        "speed": what.speed,
        **what.facts,
        "panels": [_panel(p, b, to_px) for p, b in zip(what.panels, boxes, strict=True)],
    }


def _panel(panel: PanelSpec, box: drafted.Box, to_px: Any) -> dict[str, Any]:
    x0, y0, x1, y1 = box
    corners = to_px(np.array([[x0, y0], [x1, y0], [x1, y1], [x0, y1]]))
    axes = [
        {"side": a.side, "quantity": a.quantity, "unit": a.unit, "title": a.title, "lo": a.lo,
         "hi": a.hi, "scale": a.scale, "ticks": list(a.ticks)}
        for a in panel.axes
    ]  # fmt: skip
    return {
        "corners_px": np.round(corners, 3).tolist(),
        "axes": axes,
        "curves": [_curve(panel, c, box, to_px) for c in panel.lines],
    }


def _curve(panel: PanelSpec, line: Any, box: drafted.Box, to_px: Any) -> dict[str, Any]:
    xy = to_px(drafted.place(panel, line, box))
    return {
        "quantity": line.quantity,
        "axis": line.axis,
        "flow_axis": line.flow_axis,
        "flow_unit": panel.axis(line.flow_axis).unit,
        "unit": panel.axis(line.axis).unit,
        "label": line.label,
        "diameter": line.diameter,
        "diameter_unit": line.diameter_unit,
        "speed": line.speed,
        "speed_unit": line.speed_unit,
        "level": line.level,
        "path": line.path,
        "flow": [float(f"{v:.8g}") for v in line.flow],
        "value": [float(f"{v:.8g}") for v in line.value],
        "ends_px": np.round(xy[[0, -1]], 2).tolist(),
    }


# -- the samples ----------------------------------------------------------------------------------

SAMPLES: dict[str, dict[str, Any]] = {
    "single-head": {"kind": "single", "seed": 11},
    "diameters-scan": {"kind": "family", "seed": 12, "look": "inked", "damage": "scan",
                       "mono": True},
    "head-efficiency-photo": {"kind": "twin", "seed": 13, "look": "vector", "damage": "photo",
                              "dpi": 220},
    "stack-fax": {"kind": "stacked", "seed": 14, "damage": "fax", "mono": True},
    "four-curves-scan": {"kind": "quad", "seed": 15, "look": "inked", "damage": "scan",
                         "mono": True, "units": "m3/h"},
    "hill-vector": {"kind": "hill", "seed": 16, "look": "vector", "as_pdf": True, "mono": False},
    "hill": {"kind": "hill", "seed": 17, "mono": True},
    "comma-two-flows": {"kind": "top", "seed": 108, "look": "inked", "language": "de",
                        "units": "l/s"},
    "logarithmic": {"kind": "logs", "seed": 19},
    "axes-not-from-zero": {"kind": "offset", "seed": 20, "look": "vector", "damage": "copy",
                           "units": "l/s"},
    "test-points-tinted": {"kind": "twin", "seed": 21, "look": "vector", "damage": "tinted",
                           "points": True},
    "speeds-curled": {"kind": "speeds", "seed": 22, "look": "inked", "damage": "curl",
                      "hertz": False},
    "inverter-hertz": {"kind": "speeds", "seed": 23, "hertz": True, "damage": "coarse",
                       "dpi": 110},
    "inches-copy": {"kind": "inches", "seed": 24, "look": "vector", "damage": "copy", "mono": True},
    "lettered-turned": {"kind": "single", "seed": 25, "look": "lettered", "damage": "turned",
                        "units": "m3/h", "language": "en", "style": {"grid": "minor"}},
    "catalogue-page": {"kind": "family", "seed": 26, "look": "vector", "damage": "scan",
                       "setting": "page", "as_pdf": True, "size": (468.0, 330.0)},
    "two-page-report": {"kind": "twin", "seed": 27, "look": "vector", "setting": "report",
                        "as_pdf": True, "size": (468.0, 330.0)},
    "plotted-vector": {"kind": "stacked", "seed": 28, "as_pdf": True},
    "published-test": {"kind": "published", "seed": 29},
}  # fmt: skip


def main() -> None:
    """Draw the samples into a folder."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--out", type=Path, default=Path(__file__).resolve().parent)
    parser.add_argument("--only", nargs="*", default=list(SAMPLES))
    options = parser.parse_args()
    for name in options.only:
        path = chart(name=name, **SAMPLES[name]).save(options.out)
        print(f"{path.name}  {path.stat().st_size / 1024:.0f} KiB")


if __name__ == "__main__":
    main()
