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
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

if __package__ in (None, ""):
    sys.path.insert(0, str(Path(__file__).resolve().parent.parent))

from sample_charts import drafted, plotted
from sample_charts.canvas import Drawing, ink, raster
from sample_charts.canvas import pdf as vector
from sample_charts.damage import damage as spoil
from sample_charts.scenes import KINDS, PanelSpec, Scene, scene

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
    mono: bool | None = None, as_pdf: bool = False, name: str | None = None,
    size: tuple[float, float] | None = None, **choices: Any,
) -> Chart:  # fmt: skip
    """One seeded chart.

    Parameters
    ----------
    kind : one of `scenes.KINDS`
    look : "plotted" (a plotting library), "inked" (own layout, own strokes), "lettered" (the same
        by an unsteady hand) or "vector" (own layout, PDF operators)
    damage : one of `damage.KINDS`
    dpi : resolution of the damaged picture; `as_pdf` : a vector PDF instead of a picture
    choices : what else the kind of scene takes (units, language, number of lines …)
    """
    rng = np.random.default_rng([seed, KINDS.index(kind)])
    what = scene(kind, rng, **choices)
    tall = len(what.panels) > 1
    width, height = size or ((396.0, 540.0) if tall else (468.0, 360.0))
    if mono is None:
        mono = bool(rng.random() < 0.4)
    if look == "plotted":
        figure, boxes = plotted.plot(what, rng, mono, width, height)
        document = plotted.pdf(figure) if as_pdf else None
        draw = lambda fine: plotted.raster(figure, fine)  # noqa: E731
    else:
        style = drafted.style(rng, mono, look == "lettered")
        sheet, boxes = drafted.draft(what, style, width, height)
        document = vector([sheet]) if as_pdf or look == "vector" else None
        draw = lambda fine: _paint(sheet, document, fine, rng, look)  # noqa: E731
    name = name or f"{kind}_{seed}_{look}_{damage}"
    if as_pdf:
        assert document is not None
        to_px = lambda xy: np.asarray(xy) * 300 / 72 - 0.5  # noqa: E731
        size_px = (round(width * 300 / 72), round(height * 300 / 72))
        return Chart(
            name, ".pdf", document, truth(what, boxes, to_px, size_px, name, look, "vector")
        )
    fine = 1 if damage == "clean" else 2
    clean = draw(dpi * fine)
    picture, where = spoil(clean, damage, rng, fine)
    scale = np.array(clean.shape[1::-1]) / [width, height]
    to_px = lambda xy: where(np.asarray(xy) * scale - 0.5)  # noqa: E731
    suffix, data = encode(picture, damage, dpi)
    facts = truth(what, boxes, to_px, picture.shape[1::-1], name, look, damage)
    return Chart(name, suffix, data, facts, picture)


def _paint(sheet: Drawing, document: bytes | None, dpi: float, rng: np.random.Generator, look: str
           ) -> NDArray[np.uint8]:  # fmt: skip
    if document is not None:
        return raster(document, dpi)
    return np.asarray(ink(sheet, dpi, 4 if dpi < 260 else 2, rng))


def encode(picture: NDArray[np.uint8], damage: str, dpi: float) -> tuple[str, bytes]:
    """(suffix, bytes) of the file that such a damaged picture comes in."""
    from PIL import Image

    image, out = Image.fromarray(picture), io.BytesIO()
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
    what: Scene, boxes: list[drafted.Box], to_px: Any, size: tuple[int, ...], name: str, look: str,
    damage: str, page: int = 1,
) -> dict[str, Any]:  # fmt: skip
    """What a perfect reader would say of the chart.

    Pixels are those of the stored image (a vector page: 300 to the inch), the centre of the
    top-left pixel at (0, 0); values are in the printed units, named by UCUM codes.
    """
    return {
        "format": "curvefit-sample-truth",
        "version": 1,
        "name": name,
        "kind": what.kind,
        "look": look,
        "damage": damage,
        "source": what.source,
        "page": page,
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
    "single-head": dict(kind="single", seed=11, look="plotted", damage="clean"),
    "diameters-scan": dict(kind="family", seed=12, look="inked", damage="scan", mono=True),
    "head-efficiency": dict(kind="twin", seed=13, look="vector", damage="photo", dpi=220),
    "stack-fax": dict(kind="stacked", seed=14, look="plotted", damage="fax", mono=True),
}


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
