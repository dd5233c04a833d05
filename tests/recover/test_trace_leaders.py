"""Thin lines that lead from a label to a curve, on a picture."""

import numpy as np
import pytest
from test_trace_raster import Sheet, X, head, matched

from curvefit.records import Word
from curvefit.trace import trace


def drawn(thickness, bend, text="D 210"):
    """Two heads; a line from each to a label above it."""
    sheet, words = Sheet(), []
    for i in range(2):
        y = head(top=120.0 + 130 * i, fall=180.0)
        sheet.curve(X, y)
        tip = np.array([X[200], y[200]])
        end = tip + np.array([60.0, -58.0])
        sheet.line([tip, end, end + np.array([bend, 0.0])], thickness)
        x, base = end[0] + bend + 4, end[1] + 5
        sheet.text(text, x, base)
        box = np.array([[x, base - 13], [x + 52, base - 13], [x + 52, base + 1], [x, base + 1]])
        words.append(Word(text, box + 30))
    return sheet.panel(3.0, words=tuple(words))


@pytest.mark.parametrize("bend", [0.0, 14.0])
def test_leaders_are_no_curves(bend):
    traces = trace(drawn(1, bend))
    assert len(traces) == 2
    for i in range(2):
        y = head(top=120.0 + 130 * i, fall=180.0)
        _, rms, cover, *_ = matched(traces, X, y)
        assert rms < 0.3
        assert cover > 0.98


def test_a_branch_as_broad_as_the_curves_is_no_leader():
    assert len(trace(drawn(3, 0.0))) > 2


@pytest.mark.parametrize("text", ["11", "1-", "l I", "\u2014 1 1"])
def test_dashes_read_as_characters_hide_no_line(text):
    sheet = Sheet()
    sheet.curve(X, head(), dash=(12, 9))
    word = Word(text, np.array([[230, 75], [430, 75], [430, 185], [230, 185]]) + 30.0, 0.9)
    traces = trace(sheet.panel(3.0, words=(word,)))
    assert len(traces) == 1
    one, rms, cover, *_ = matched(traces, X, head())
    assert rms < 0.3
    assert cover > 0.96
    assert one.dash == "dashed"
