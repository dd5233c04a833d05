"""Legends inside the box, framed and not, beside solid and dashed black lines."""

import numpy as np
import pytest
from test_trace_raster import HEIGHT, WIDTH, Sheet, X, head, matched

from curvefit.records import Word
from curvefit.trace import trace

DASHES = (None, (16, 9), (7, 6))
TEXTS = ("D 210 mm", "D 200 mm", "D 190 mm")


def with_legend(framed, colour=(0, 0, 0)):
    """Three heads and their legend in the lower left of the box."""
    sheet, words = Sheet(), []
    sheet.grid(95)
    if framed:
        sheet.image[340:440, 80:250] = 255
        sheet.line([[50, 310], [220, 310], [220, 410], [50, 410], [50, 310]], 1, colour)
    for i, (dash, text) in enumerate(zip(DASHES, TEXTS, strict=True)):
        sheet.curve(X, head(top=60.0 + 60 * i, fall=200.0), dash=dash)
        y = 335 + 25 * i
        x = np.linspace(62, 102, 40)
        sheet.curve(x, np.full(40, float(y)), dash=dash)
        sheet.text(text, 115, y + 5)
        box = np.array([[114, y - 8], [205, y - 8], [205, y + 8], [114, y + 8]]) + 30
        words.append(Word(text, box))
    return sheet.panel(4.0, words=tuple(words))


@pytest.mark.parametrize("framed", [True, False])
def test_a_legend_holds_no_curves_and_hides_none(framed):
    traces = trace(with_legend(framed))
    assert len(traces) == 3
    for i in range(3):
        y = head(top=60.0 + 60 * i, fall=200.0)
        _, rms, cover, *_ = matched(traces, X, y)
        assert rms < 0.35
        assert cover > 0.96


def test_a_pale_frame_is_a_frame():
    traces = trace(with_legend(True, (205, 205, 205)))
    assert len(traces) == 3


def test_a_rectangle_that_a_curve_runs_through_hides_nothing():
    sheet = Sheet()
    sheet.curve(X, head(top=90.0))
    sheet.line([[250, 60], [450, 60], [450, 300], [250, 300], [250, 60]], 1)
    sheet.text("Use here", 270, 280)
    box = np.array([[268, 268], [345, 268], [345, 284], [268, 284]]) + 30
    traces = trace(sheet.panel(4.0, words=(Word("Use here", box),)))
    _, rms, cover, *_ = matched(traces, X, head(top=90.0))
    assert rms < 0.5
    assert cover > 0.98


def test_graph_paper_as_heavy_as_the_curves_leaves_them_seen():
    sheet = Sheet()
    for step, colour, width in ((19, (120, 170, 230), 1), (95, (100, 150, 220), 2)):
        for x in range(0, WIDTH, step):
            sheet.line([[x, 0], [x, HEIGHT]], width, colour)
        for y in range(0, HEIGHT, step):
            sheet.line([[0, y], [WIDTH, y]], width, colour)
    curves = [head(top=60.0 + 60 * i, fall=200.0) for i in range(3)]
    for y, dash in zip(curves, DASHES, strict=True):
        sheet.curve(X, y, width=2, dash=dash)
    traces = trace(sheet.panel(4.0))
    assert len(traces) == 3
    for y in curves:
        _, rms, cover, *_ = matched(traces, X, y)
        assert rms < 0.6
        assert cover > 0.95
