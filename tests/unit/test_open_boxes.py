"""Axes drawn without a frame: what their ticks tell of the perspective."""

from __future__ import annotations

import numpy as np
import pytest

from curvefit.calibrate.open_box import skew_px, tilted
from curvefit.geometry import project

SLANT = np.array([[1.0, 0.03, 5.0], [-0.02, 1.0, 3.0], [6e-5, -4e-5, 1.0]])
BOX = np.array([[100, 80], [1000, 80], [1000, 700], [100, 700]], float)


def _affine_places(foot, end, far):
    """Fractions, seen from the foot, of points on the page along one side."""
    return ((far - foot) @ (end - foot)) / ((end - foot) @ (end - foot))


@pytest.mark.parametrize("foot", [3, 2], ids=["axes left and bottom", "axes right and bottom"])
@pytest.mark.parametrize("stray", [False, True], ids=["ticks", "ticks and a curve's end"])
def test_even_ticks_tell_the_perspective(foot, stray):
    seen = (False, foot == 2, True, foot == 3)
    truth = project(SLANT, BOX)
    t = np.linspace(0, 1, 7)
    ticks = {}
    for name, a, b in (
        ("bottom", 3, 2),
        ("left", 3, 0) if foot == 3 else ("right", 2, 1),
    ):
        flat = BOX[a] + t[:, None] * (BOX[b] - BOX[a])
        places = _affine_places(truth[a], truth[b], project(SLANT, flat))
        ticks[name] = [np.sort(np.r_[places, 0.774]) if stray else places]
    start = truth.copy()
    far = (foot + 2) % 4
    start[far] = truth[far - 1] + truth[(far + 1) % 4] - truth[foot]
    assert np.abs(start[far] - truth[far]).max() > 20  # a parallelogram is far off
    found = tilted(start, seen, ticks)
    assert found is not None
    assert np.abs(found - truth).max() < 0.5


def test_uneven_or_few_ticks_tell_nothing():
    seen = (False, False, True, True)
    even = [np.linspace(0, 1, 6)]
    assert tilted(BOX, seen, {"bottom": even}) is None
    assert tilted(BOX, seen, {"bottom": even, "left": [np.array([0, 0.3, 0.45, 1.0])]}) is None


def test_square_axes_leave_no_doubt_and_skew_ones_do():
    assert skew_px(BOX) == (0.0, 0.0)
    x, y = skew_px(project(SLANT, BOX))
    assert min(x, y) > 5


def test_scattered_ticks_of_a_flat_page_make_no_perspective():
    rng = np.random.default_rng(4)
    seen = (False, False, True, True)
    for _ in range(20):
        rows = {s: [np.linspace(0, 1, 7) + rng.normal(0, 3e-4, 7)] for s in ("bottom", "left")}
        found = tilted(BOX, seen, rows)
        assert found is not None
        assert np.abs(found - BOX).max() < 5
    assert np.allclose(tilted(BOX, seen, {s: [np.linspace(0, 1, 7)] for s in rows}), BOX)
