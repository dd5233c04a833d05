"""Labels that the words of a panel lack are read from the pixels, where their lines say."""

from dataclasses import replace

import numpy as np
import pytest
from chart_harness import chart, page_of, panels_of, true_line

from curvefit.identify import identify
from curvefit.records import Trace


def true_trace(panel, curve, name):
    """A true line as a trace."""
    across, up = true_line(panel, curve)
    size = np.array(panel.warp.size)
    flat = np.c_[across, 1 - up] * size
    flat = flat[((flat > -1) & (flat < size + 1)).all(1)]
    n, path = len(flat), bool(curve["path"])
    sigma, flags = np.full(n, 0.1), np.zeros(n, np.uint8)
    return Trace(name, panel, flat, sigma, flags, 10.0, 1.0 if path else 2.0, path=path)


def read(kind, seed, look, damage):
    """What identify makes of true panels and lines without a single word; the true curves."""
    drawn = chart(kind, seed, look, damage)
    page = page_of(drawn)
    panels = panels_of(drawn.truth, page)
    traces, truth = [], []
    for panel, spec in zip(panels, drawn.truth["panels"], strict=True):
        for curve in spec["curves"]:
            traces.append(true_trace(panel, curve, f"line {len(traces)}"))
            truth.append(curve)
    curves, _, said = identify(page, panels, tuple(traces))
    findings = said + tuple(f for c in curves for f in c.findings)
    by_trace = {id(c.trace): c for c in curves}
    return [by_trace[id(t)] for t in traces], truth, findings


@pytest.mark.parametrize(
    ("seed", "look", "damage"),
    [(0, "plotted", "clean"), (1, "inked", "scan"), (1, "plotted", "fax")],
)
def test_diameters_behind_the_ends_of_lines(seed, look, damage):
    curves, truth, findings = read("family", seed, look, damage)
    assert [round(c.diameter_si * 1000) for c in curves] == [t["diameter"] for t in truth]
    assert not [f for f in findings if f.severity != "info"]


def test_speeds():
    curves, truth, _ = read("speeds", 0, "plotted", "clean")
    scale = {"/min": 60.0, "Hz": 1.0}[truth[0]["speed_unit"]]
    assert [round(c.speed_si * scale) for c in curves] == [t["speed"] for t in truth]


def test_levels_at_the_ends_of_lines_and_diameters_along_them():
    curves, truth, findings = read("hill", 1, "plotted", "clean")
    assert [c.iso for c in curves] == [t["quantity"].startswith("iso") for t in truth]
    levels = [round(100 * c.level_si, 1) for c in curves if c.iso]
    assert levels == [t["level"] for t in truth if t["level"]]
    diameters = [round(c.diameter_si * 1000) for c in curves if not c.iso]
    assert diameters == [t["diameter"] for t in truth if t["diameter"]]
    assert not [f for f in findings if f.severity != "info"]


def test_what_cannot_be_read_is_not_known():
    """With the text painted over nothing is invented."""
    drawn = chart("family", 0, "plotted", "clean")
    page = page_of(drawn)
    empty = replace(page, pixels=np.full_like(page.pixels, 255))
    panel = replace(panels_of(drawn.truth, page)[0], page=empty)
    lines = drawn.truth["panels"][0]["curves"]
    traces = tuple(true_trace(panel, c, f"line {k}") for k, c in enumerate(lines))
    curves, _, said = identify(empty, (panel,), traces)
    assert all(c.diameter_si is None for c in curves)
    codes = {f.code for f in said} | {f.code for c in curves for f in c.findings}
    assert codes == {"curve.unlabelled"}
