"""Lines that are missing altogether: a panel that holds none, or fewer than its labels say."""

import pytest
from identify_scene import ModelPump, Scene, family

from curvefit.notes import CurveNotes, Notes

HEAD = ("head", "m", 0.0, 50.0)
pump = ModelPump()


def codes(findings):
    return [(f.code, f.where.panel) for f in findings if f.severity == "warning"]


def test_a_panel_without_any_curve_is_not_passed_over():
    scene = Scene()
    scene.box(HEAD).line(pump.head)
    scene.box(("efficiency", "%", 0.0, 100.0))
    curves, _, findings = scene.read()
    assert len(curves) == 1
    assert codes(findings) == [("curve.none-in-panel", "B")]


def test_a_curve_that_the_user_dropped_is_not_missed():
    scene = Scene()
    scene.box(HEAD).line(pump.head)
    curves, _, findings = scene.read(Notes(curves=(CurveNotes(name="head", drop=True),)))
    assert not curves
    assert not codes(findings)


@pytest.mark.parametrize(
    "labels", [["⌀200", "195", "190", "185"], ["200 mm", "190 mm"], ["2900 rpm", "2600 rpm"]]
)
def test_more_labels_than_lines_are_said(labels):
    scene = Scene()
    box = scene.box(HEAD)
    box.line(pump.head)
    for k, label in enumerate(labels):
        box.word(label, 120.0, 200.0 + 60.0 * k)
    _, _, findings = scene.read()
    assert codes(findings) == [("curve.fewer-than-labels", "A")]
    assert f"{len(labels)} labels" in next(f.message for f in findings if f.severity == "warning")


def test_one_label_for_each_line_and_other_numbers_raise_nothing():
    scene = Scene()
    box = scene.box(HEAD)
    family(box, ["Ø210", "Ø200", "Ø190"], [1.0, 0.95, 0.9])
    for k, text in enumerate(["12", "Fig. 3", "n = 2900 rpm", "205 kg"]):
        box.word(text, 60.0, 300.0 + 40.0 * k)
    _, _, findings = scene.read()
    assert not codes(findings)
