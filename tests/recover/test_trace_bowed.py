"""A bowed page: its grid is bowed too, with the bend known to the panel or not."""

from dataclasses import replace

import numpy as np
import pytest
from test_trace_raster import HEIGHT, PAD, WIDTH, Sheet, X, head, matched

from curvefit.geometry import Warp
from curvefit.trace import trace


def bowed(known, bow):
    """A drawn box whose lines all sag by `bow` px in their middle."""
    bend = np.zeros((10, 2))
    bend[0, 1], bend[7, 1] = bow, -bow  # terms 1 and u²: straight = page + bow (1 − u²)
    warp = Warp(np.array([[1, 0, -PAD], [0, 1, -PAD], [0, 0, 1.0]]), (WIDTH, HEIGHT), bend)
    sheet = Sheet()
    sheet.image[:] = 255

    def line(x, y, width, colour=(0, 0, 0)):
        at = np.linspace(0, 1, 200)
        xy = np.c_[np.interp(at, np.linspace(0, 1, len(x)), x), y(at) if callable(y) else y]
        sheet.line(warp.to_page(xy) - PAD, width, colour)

    for x in (0, WIDTH):
        line([x, x], lambda t: HEIGHT * t, 2)
    for y in np.arange(0, HEIGHT + 1, 80):
        line([0, WIDTH], np.full(200, float(y)), 2 if y in (0, HEIGHT) else 1, (0, 0, 0))
    for x in range(95, WIDTH, 95):
        line([x, x], lambda t: HEIGHT * t, 1, (150, 150, 150))
    sheet.line(warp.to_page(np.c_[X, head()]) - PAD, 3)
    panel = sheet.panel(3.0)
    return replace(panel, warp=warp) if known else panel


@pytest.mark.parametrize("bow", [4.0, 7.0])
def test_a_bend_that_is_known_is_taken_out(bow):
    traces = trace(bowed(True, bow))
    assert len(traces) == 1
    _, rms, cover, *_ = matched(traces, X, head())
    assert rms < 0.3
    assert cover > 0.98


@pytest.mark.parametrize("bow", [2.0, 4.0, 7.0])
def test_bowed_grid_lines_are_no_curves(bow):
    traces = trace(bowed(False, bow))
    assert len(traces) == 1
