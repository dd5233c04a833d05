"""Boxes stacked on one page: whose title, whose flow scale."""

from __future__ import annotations

import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from curvefit.calibrate import calibrate, pixels
from curvefit.calibrate.evidence import TickRow
from curvefit.notes import PageNotes
from curvefit.records import Page, Word

sys.path.insert(0, str(Path(__file__).parents[1] / "bands"))
from corrupted_axes import drawn, steps

TITLES = ["Head in m", "η in %", "Power P2 in kW", "NPSHr in m"]
TOPS = [60, 100, 40, 8]
PITCH, TALL = 330.0, 220.0


def _text(text, x0, y):
    """A line of text from x0 on, its middle at height y."""
    w, h = 14.0 * len(text), 26.0
    box = np.array([[x0, y - h / 2], [x0 + w, y - h / 2], [x0 + w, y + h / 2], [x0, y + h / 2]])
    return Word(text, box, 0.99)


def _stack(monkeypatch, own_flow, title_lift=34.0, left_ticks=True):
    """The panels of four boxes of one flow scale; titles stand above each box's top left."""
    rng = np.random.default_rng(11)
    evidences = []
    for k, top in enumerate(TOPS):
        y = 200 + PITCH * k
        values = steps("left", 0, top, top / 4)
        flow = steps("bottom", 0, 80, 20, title="Capacity in L/s" if k == 3 else "")
        last = own_flow or k == 3
        e = drawn([values, flow] if last else [values], rng, (1200.0, TALL), (300.0, y))
        if not last:  # the flow's ticks are drawn, without numbers
            at = np.linspace(0, 1, 5)
            row = TickRow("bottom", "outside", at, np.full(5, 1e-4), np.ones(5))
            e = replace(e, ticks=(*e.ticks, row))
        if not left_ticks:  # curves that start on the side count as ticks there
            rows = [r for r in e.ticks if r.side != "left" or r.kind == "end"]
            at = np.array([0.0, 0.25, 0.5, 0.75, 0.86, 1.0])
            row = TickRow("left", "outside", at, np.full(6, 5e-4), np.ones(6))
            e = replace(e, ticks=(*rows, row))
        evidences.append(replace(e, words=(*e.words, _text(TITLES[k], 250.0, y - title_lift))))
    words = tuple(w for e in evidences for w in e.words)
    evidences = tuple(replace(e, words=words) for e in evidences)
    monkeypatch.setattr(pixels, "gather", lambda *_: evidences)
    page = Page("drawn.png", "", 1, np.zeros((10, 10, 3), np.uint8), (10, 10))
    return calibrate(page, PageNotes(), ())


@pytest.mark.parametrize("lift", [34.0, 50.0, 62.0])
def test_titles_above_each_box_stay_with_it(monkeypatch, lift):
    panels = _stack(monkeypatch, own_flow=False, title_lift=lift)
    got = [(p.axis("left").quantity, p.axis("left").unit) for p in panels]
    assert got == [
        ("head", "m"), ("efficiency", "%"), ("shaft_power", "kW"), ("npsh_required", "m"),
    ]  # fmt: skip


def test_boxes_without_flow_numbers_share_those_of_the_lowest(monkeypatch):
    panels = _stack(monkeypatch, own_flow=False, left_ticks=False)
    assert [p.name for p in panels] == ["A", "B", "C", "D"]
    for p, top in zip(panels, TOPS, strict=True):
        np.testing.assert_allclose(p.axis("bottom").value(np.array([0.0, 1.0])), [0, 80], atol=0.05)
        np.testing.assert_allclose(p.axis("left").value(np.array([0.0, 1.0]))[1], top, rtol=2e-3)
