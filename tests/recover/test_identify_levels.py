"""Lines of equal efficiency, power and NPSH: told from heads, each with its level."""

import numpy as np
import pytest
from identify_scene import ModelPump, Scene, family

from curvefit.identify.series import series_step, settle, unimodal

HEAD = ("head", "m", 0.0, 50.0)
RATIOS = [1.0, 0.93, 0.86]


def contour(level, branch):
    """Flow and head where pumps between the smallest and the largest have this efficiency."""
    flow, head = [], []
    for r in np.linspace(0.86, 1.0, 30):
        q = np.linspace(1, 180 * r, 4000)
        e = ModelPump(r).efficiency(q) - level
        peak = int(np.argmax(e))
        part = slice(None, peak) if branch == "left" else slice(peak, None)
        cross = np.flatnonzero(np.diff(np.sign(e[part])))
        if len(cross):
            k = cross[0] + (0 if branch == "left" else peak)
            flow.append(q[k])
            head.append(float(ModelPump(r).head(q[k])))
    return np.array(flow), np.array(head)


def hill(labels, path=True, **how):
    """A family crossed by six lines of equal efficiency; `labels` of 50 60 70 | 70 60 50."""
    scene = Scene()
    box = scene.box(HEAD)
    family(box, ["Ø210", "Ø195", "Ø180"], RATIOS)
    sides = [(50, "left"), (60, "left"), (70, "left"), (70, "right"), (60, "right"), (50, "right")]
    for (level, branch), label in zip(sides, labels, strict=True):
        flow, head = contour(level, branch)
        box.line(head, flow, path=path)
        if label:
            x, y = box.flat(flow[-1:], head[-1:])[0]
            box.word(label, x - 12, y - 14)
    return scene.read()


def found(curves):
    return [None if c.level_si is None else round(100 * c.level_si, 2) for c in curves if c.iso]


@pytest.mark.parametrize("path", [True, False])
def test_levels_of_both_branches(path):
    curves, _, findings = hill(["50%", "60%", "70%", "70%", "60%", "50%"], path)
    assert [c.quantity for c in curves] == ["head"] * 3 + ["iso_efficiency"] * 6
    assert found(curves) == [50, 60, 70, 70, 60, 50]
    assert [round(c.diameter_si * 1000) for c in curves[:3]] == [210, 195, 180]
    assert not [f for f in findings if f.severity != "info"]
    assert [c.name for c in curves[3:6]] == [f"iso_efficiency {n}%" for n in (50, 60, 70)]
    assert curves[6].name == "iso_efficiency 70% 2"


def test_the_value_of_an_iso_line_is_its_head():
    curves, _, _ = hill(["50%", "60%", "70%", "70%", "60%", "50%"])
    flow, head = contour(60, "left")
    iso = curves[4]
    np.testing.assert_allclose(iso.flow_si * 3600, flow)
    np.testing.assert_allclose(iso.value_si, head)
    assert iso.unit == "m"
    assert np.isfinite(iso.sigma_si).all()
    assert (iso.sigma_si > 0).all()


@pytest.mark.parametrize("bad", ["6096", "60°/o", "6O%", "η=60%", "60 %"])
def test_spellings_of_a_level(bad):
    curves, _, findings = hill(["50%", bad, "70%", "70%", "60%", "50%"])
    assert found(curves) == [50, 60, 70, 70, 60, 50]
    assert not [f for f in findings if f.severity != "info"]


def test_a_misread_level_out_of_order_is_mended_and_said():
    curves, _, findings = hill(["50%", "10%", "70%", "70%", "60%", "50%"])
    assert found(curves) == [50, 60, 70, 70, 60, 50]
    assert [f.code for f in findings] == ["curve.level-mended"]
    assert "level" in curves[4].guessed


def test_a_missing_level_is_filled_in_only_with_a_warning():
    curves, _, findings = hill(["50%", "", "70%", "70%", "60%", "50%"])
    assert found(curves) == [50, 60, 70, 70, 60, 50]
    assert [(f.code, f.severity) for f in findings] == [("curve.level-mended", "warning")]
    assert "level" in curves[4].guessed


def test_a_level_that_several_would_fit_is_not_known():
    curves, _, findings = hill(["", "60%", "70%", "70%", "60%", "50%"])
    assert found(curves)[0] in (None, 50)
    assert any(f.severity == "warning" for f in findings)


def test_lines_of_equal_power_that_fall_across_the_heads():
    scene = Scene()
    box = scene.box(HEAD)
    family(box, ["Ø210", "Ø195", "Ø180"], RATIOS)
    for kw in (8, 9):
        flow, head = [], []
        for r in np.linspace(0.86, 1.0, 20):
            q = np.linspace(20, 170 * r, 4000)
            k = int(np.argmin(np.abs(ModelPump(r).power(q) - kw)))
            flow.append(q[k])
            head.append(float(ModelPump(r).head(q[k])))
        order = np.argsort(flow)
        f, h = np.array(flow)[order], np.array(head)[order]
        box.line(h, f, dash="dashed")
        x, y = box.flat(f[-1:], h[-1:])[0]
        box.word(f"{kw} kW", x + 4, y)
    curves, _, _ = scene.read()
    assert [c.quantity for c in curves] == ["head"] * 3 + ["iso_shaft_power"] * 2
    assert [c.level_si for c in curves[3:]] == [8000.0, 9000.0]
    assert curves[3].name == "iso_shaft_power 8 kW"


def test_efficiencies_that_cross_heads_are_no_iso_lines():
    scene = Scene()
    box = scene.box(HEAD, ("efficiency", "%", 0.0, 100.0))
    for r in RATIOS:
        box.line(ModelPump(r).head, ModelPump(r).reach)
        box.line(ModelPump(r).efficiency, ModelPump(r).reach, axis="right")
    box.word("70 %", 500, 200)
    curves, _, _ = scene.read()
    assert not any(c.iso for c in curves)


def test_order_of_levels_along_a_line():
    assert unimodal([0.5, 0.6, 0.7, 0.7, 0.6])
    assert unimodal([0.5, None, 0.7])
    assert not unimodal([0.5, 0.5, 0.6])
    assert not unimodal([0.6, 0.5, 0.6])


def test_steps_of_the_series():
    assert series_step([0.5, 0.6, 0.7]) == 0.1
    assert series_step([0.7, 0.75, 0.8, 0.83]) == 0.05
    assert series_step([0.5, 0.6]) is None


def test_levels_in_order_are_left_alone():
    values = [0.7, 0.75, 0.8, 0.82, 0.8, 0.75]
    texts = ["70%", "75%", "80%", "82%", "80%", "75%"]
    assert settle(values, texts, [list(range(6))]) == values
