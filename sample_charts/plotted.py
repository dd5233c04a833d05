"""One look: the chart as a plotting library lays it out."""

from __future__ import annotations

import io
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sample_charts.drafted import Box, number
from sample_charts.scenes import AxisSpec, LineSpec, PanelSpec, Scene


def plot(
    scene: Scene, rng: np.random.Generator, mono: bool = False, width: float = 432.0,
    height: float = 360.0, hand: bool = False,
) -> tuple[Any, list[Box]]:  # fmt: skip
    """(figure, plot boxes [pt, y down]) of a scene."""
    import matplotlib

    family = str(rng.choice(["DejaVu Sans", "DejaVu Serif", "STIXGeneral", "DejaVu Sans Mono"]))
    rules = {
        "font.family": family,
        "font.size": float(rng.uniform(7.5, 9.0)) + (1.5 if family == "STIXGeneral" else 0),
        "axes.unicode_minus": False,
        "path.simplify": False,
        "xtick.direction": (way := str(rng.choice(["in", "out", "inout"]))),
        "ytick.direction": way,
        "lines.linewidth": float(rng.uniform(1.1, 1.9)),
        "axes.linewidth": float(rng.uniform(0.6, 1.1)),
        "pdf.fonttype": int(rng.choice([3, 42])),
        "svg.hashsalt": "sample",
    }
    with matplotlib.rc_context(rules):
        return _figure(scene, rng, mono, width, height)


def _figure(scene: Scene, rng: np.random.Generator, mono: bool, width: float, height: float
            ) -> tuple[Any, list[Box]]:  # fmt: skip
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=(width / 72, height / 72))
    FigureCanvasAgg(figure)
    columns = {s: max(sum(a.side.startswith(s) for a in p.axes) for p in scene.panels)
               for s in ("left", "right", "top")}  # fmt: skip
    grid = figure.add_gridspec(
        len(scene.panels), 1, height_ratios=[p.height for p in scene.panels],
        left=(14 + 42 * columns["left"]) / width,
        right=1 - (44 if not columns["right"] else 10 + 44 * columns["right"]) / width,
        bottom=42 / height, top=1 - (34 + 34 * columns["top"]) / height,
        hspace=0.28 if len(scene.panels) > 1 else 0,
    )  # fmt: skip
    colours = ["#000000"] if mono else list(
        rng.permutation(["#1f3d7a", "#a32020", "#176b3a", "#7a4a12", "#5b2a86"]))  # fmt: skip
    lined = bool(rng.random() < 0.7)
    all_numbers = len(scene.panels) == 1 or bool(rng.random() < 0.5)
    dashes = bool(mono and rng.random() < 0.5)
    for k, panel in enumerate(scene.panels):
        last = k == len(scene.panels) - 1
        _panel(figure.add_subplot(grid[k]), panel, scene, colours, lined, last, all_numbers, dashes)
    figure.text(0.03, 1 - 14 / height, "   ".join(scene.heading), ha="left", va="center",
                fontweight="bold")  # fmt: skip
    boxes = []
    for axes in figure.axes[: len(figure.axes)]:
        if getattr(axes, "is_plot_box", False):
            at = axes.get_position()
            boxes.append((at.x0 * width, (1 - at.y1) * height, at.x1 * width, (1 - at.y0) * height))
    return figure, boxes


def _panel(axes: Any, panel: PanelSpec, scene: Scene, colours: list[str], lined: bool, last: bool,
           all_numbers: bool, dashes: bool) -> None:  # fmt: skip
    axes.is_plot_box = True
    on = {"left": axes}
    bottom = panel.axis("bottom")
    for spec in panel.axes:
        if spec.side not in ("bottom", "left", "top"):
            on[spec.side] = axes.twinx()
            if spec.side == "right.2":
                on[spec.side].spines["right"].set_position(("outward", 42))
            elif spec.side == "left.2":
                twin = on[spec.side]
                twin.spines["left"].set_position(("outward", 42))
                twin.yaxis.set_label_position("left")
                twin.yaxis.set_ticks_position("left")
    for side, where in on.items():
        _scale(where, "y", panel.axis(side), scene)
    _scale(axes, "x", bottom, scene, numbers=last or all_numbers, title=last)
    if any(a.side == "top" for a in panel.axes):
        twin = axes.twiny()
        _scale(twin, "x", panel.axis("top"), scene)
    if lined:
        axes.grid(True, linewidth=0.5, color="#b8b8b8")
        if bottom.minor > 1 and bottom.scale == "linear":
            axes.minorticks_on()
            axes.grid(True, which="minor", linewidth=0.25, color="#d8d8d8")
    if panel.shaded:
        axes.axvspan(*panel.shaded, color="#dfe8df", linewidth=0)
    axes.set_axisbelow(True)
    styles = ["-", "--", "-.", (0, (4, 1.5))] if dashes else ["-"]
    height = axes.get_position().height * axes.figure.get_size_inches()[1] * 72
    pushes = _pushes(panel, height)
    for k, line in enumerate(panel.lines):
        colour = colours[k % len(colours)]
        drawn = on[line.axis]
        drawn.plot(line.flow, line.value, linestyle=styles[k % len(styles)], color=colour,
                   clip_on=False, solid_capstyle="butt", dash_capstyle="butt",
                   linewidth=1.0 if line.path else None)  # fmt: skip
        if line.points is not None:
            drawn.plot(*line.points, "os^D"[k % 4], color=colour, markersize=4.5, mfc="white")
        _label(drawn, line, colour, k, pushes.get(k, 0.0))


def _scale(axes: Any, way: str, spec: AxisSpec, scene: Scene, numbers: bool = True,
           title: bool = True) -> None:  # fmt: skip
    from matplotlib.ticker import FixedFormatter, FixedLocator, NullLocator

    axis = axes.xaxis if way == "x" else axes.yaxis
    if spec.scale == "log":
        (axes.set_xscale if way == "x" else axes.set_yscale)("log")
        axis.set_minor_locator(NullLocator())
    (axes.set_xlim if way == "x" else axes.set_ylim)(spec.lo, spec.hi)
    axis.set_major_locator(FixedLocator(list(spec.ticks)))
    texts = [number(t, spec, scene.comma) for t in spec.ticks]
    axis.set_major_formatter(
        FixedFormatter(texts if numbers and scene.numbers else [""] * len(texts))
    )
    if title:
        (axes.set_xlabel if way == "x" else axes.set_ylabel)(spec.title)


def _label(axes: Any, line: LineSpec, colour: str, k: int, push: float) -> None:
    if not line.label:
        return
    end = -1 if not line.path or k % 2 else 0
    axes.annotate(line.label, (line.flow[end], line.value[end]), (4, 6 if line.path else push),
                  textcoords="offset points", color=colour, va="center",
                  ha="center" if line.path else "left", annotation_clip=False)  # fmt: skip


def _pushes(panel: PanelSpec, height: float) -> dict[int, float]:
    """How far [pt] each label at a line's end is moved so that no two touch."""
    ends = sorted(
        (float(panel.axis(line.axis).fraction(line.value[-1])) * height, k)
        for k, line in enumerate(panel.lines)
        if line.label and not line.path
    )
    pushed, last = {}, -np.inf
    for at, k in ends:
        last = max(at, last + 10.0)
        pushed[k] = last - at
    return pushed


def raster(figure: Any, dpi: float) -> NDArray[np.uint8]:
    """The figure as (height, width, 3) uint8."""
    figure.set_dpi(dpi)
    figure.canvas.draw()
    return np.ascontiguousarray(np.asarray(figure.canvas.buffer_rgba())[:, :, :3])


def pdf(figure: Any) -> bytes:
    """The figure as a vector PDF."""
    out = io.BytesIO()
    figure.savefig(out, format="pdf", metadata={"CreationDate": None, "Producer": None,
                                                "Creator": None})  # fmt: skip
    return out.getvalue()
