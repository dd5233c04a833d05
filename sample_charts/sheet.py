"""What stands on a page around a chart: headings, paragraphs, a ruled table, a drawing."""

from __future__ import annotations

import numpy as np

from sample_charts.canvas import Drawing
from sample_charts.kinds import SI
from sample_charts.scenes import Scene

PAGE = (594.0, 846.0)  # [pt]; whole pixels at 100, 200 and 300 dpi
MARGIN = 54.0

PROSE = (
    "All pumps, places and figures on this page are invented. The curves hold for clean water at",
    "20 degrees and for the speed stated above the chart. Readings between the curves may be",
    "interpolated; no guarantee is given for flows beyond the ends of the lines.",
)
LETTER = (
    "Waterworks of an invented valley, office of the pump keeper",
    "",
    "Dear colleague,",
    "the second page of this file holds the chart that came with the pump of the lower",
    "station. The paper copy hung beside the switchboard for nineteen years and its left edge",
    "is worn, so please keep the file. Station 3 starts at 06:40 and stops at 21:15; the wet",
    "well holds 84 m3 and fills in 52 minutes in a dry month, in 17 minutes after rain.",
    "",
    "Before the next inspection we should know at which flow the pump meets the rising main,",
    "how far that is from its best flow, and what a smaller impeller would save in a year of",
    "8760 hours.",
    "",
    "With kind regards from an office that does not exist",
)


def page(font: str = "roman") -> Drawing:
    """An empty page with a running head."""
    sheet = Drawing(*PAGE)
    sheet.text((MARGIN, 34.0), "Pump binder of an invented waterworks", 9.0, font, align="left")
    sheet.text((PAGE[0] - MARGIN, 34.0), "sheet 27", 9.0, font, align="right")
    sheet.line([(MARGIN, 42.0), (PAGE[0] - MARGIN, 42.0)], 0.6)
    return sheet


def letter(font: str = "roman") -> Drawing:
    """A page of text without a chart."""
    sheet = page(font)
    prose(sheet, 80.0, font, LETTER, 10.5)
    return sheet


def prose(
    sheet: Drawing, top: float, font: str, lines: tuple[str, ...] = PROSE, size: float = 9.5
) -> float:
    """Write lines of text from `top` down; where they end."""
    for k, line in enumerate(lines):
        sheet.text((MARGIN, top + 1.45 * size * k), line, size, font, align="left")
    return top + 1.45 * size * len(lines)


def table(sheet: Drawing, top: float, what: Scene, font: str) -> float:
    """A ruled table of flows and heads of the first curve; where it ends."""
    line = what.panels[0].lines[0]
    flow_unit, unit = what.panels[0].axis(line.flow_axis).unit, what.panels[0].axis(line.axis).unit
    assert flow_unit in SI
    flows = np.linspace(line.flow[0], line.flow[-1], 7)
    rows = (
        [f"Q {flow_unit}", *(f"{q:.3g}" for q in flows)],
        [f"H {unit}", *(f"{v:.1f}" for v in np.interp(flows, line.flow, line.value))],
        ["NPSH", *(f"{2.1 + 0.4 * k:.1f}" for k in range(7))],
    )
    rows = tuple([c.replace(".", ",") if what.comma else c for c in row] for row in rows)
    left, wide, tall = MARGIN, (PAGE[0] - 2 * MARGIN) / 8, 17.0
    for r in range(4):
        y = top + r * tall
        sheet.line([(left, y), (left + 8 * wide, y)], 0.7)
    for c in range(9):
        x = left + c * wide
        sheet.line([(x, top), (x, top + 3 * tall)], 0.7)
    for r, row in enumerate(rows):
        for c, cell in enumerate(row):
            sheet.text((left + (c + 0.5) * wide, top + (r + 0.5) * tall), cell, 8.5, font)
    return top + 3 * tall


def section(sheet: Drawing, left: float, top: float) -> None:
    """A small line drawing of a casing with its dimensions, which is no chart."""
    turn = np.linspace(0, 2 * np.pi, 80)
    for radius in (34.0, 12.0):
        sheet.line(np.c_[left + 50 + radius * np.cos(turn), top + 50 + radius * np.sin(turn)], 1.1)
    sheet.line([(left, top + 92), (left + 118, top + 92), (left + 118, top + 86)], 1.1)
    sheet.line([(left + 84, top + 50), (left + 118, top + 30), (left + 118, top + 86)], 1.1)
    sheet.line([(left, top + 102), (left + 118, top + 102)], 0.5)
    sheet.text((left + 59, top + 110), "412", 7.5, "sans")
