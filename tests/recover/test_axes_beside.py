"""What the axes of one box say of each other."""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np

from curvefit.calibrate import calibrate, pixels
from curvefit.notes import PageNotes
from curvefit.records import Page

sys.path.insert(0, str(Path(__file__).parents[1] / "bands"))
from corrupted_axes import Scale, drawn, steps

FLOW = steps("bottom", 0, 500, 100, title="Q [m³/h]")
HEAD = steps("left", 0, 80, 20, title="H [m]")


def _panel(monkeypatch, *scales):
    evidence = drawn([FLOW, *scales], np.random.default_rng(3))
    monkeypatch.setattr(pixels, "gather", lambda *_: (evidence,))
    page = Page("drawn.png", "", 1, np.zeros((10, 10, 3), np.uint8), (10, 10))
    (panel,) = calibrate(page, PageNotes(), ())
    return panel


def test_a_nameless_scale_to_100_beside_a_head_is_a_stated_efficiency(monkeypatch):
    panel = _panel(monkeypatch, HEAD, steps("right", 0, 100, 20))
    right = panel.axis("right")
    assert (right.quantity, right.unit, right.guessed) == ("efficiency", "%", True)
    (said,) = [f for f in panel.findings if f.where.axis == right.name]
    assert (said.code, said.severity) == ("axis.unit-guessed", "warning")


def test_a_nameless_scale_to_60_is_not_guessed(monkeypatch):
    right = _panel(monkeypatch, HEAD, steps("right", 0, 60, 20)).axis("right")
    assert right.quantity is None


def test_feet_beside_metres_are_known_by_their_ratio(monkeypatch):
    feet = 80 / 0.3048
    values = tuple(np.arange(0, feet, 50.0))
    panel = _panel(monkeypatch, HEAD, Scale("right", 0, feet, values))
    right = panel.axis("right")
    assert (right.quantity, right.unit, right.guessed) == ("head", "[ft_i]", False)
    unlike = _panel(monkeypatch, HEAD, Scale("right", 0, 0.9 * feet, values[:-1]))
    assert unlike.axis("right").unit is None
