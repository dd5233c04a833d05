"""Which axis and quantity each line is, from labels, shapes, colours and physics."""

from dataclasses import replace
from itertools import permutations

import numpy as np
import pytest
from identify_scene import ModelPump, Scene

HEAD = ("head", "m", 0.0, 50.0)
EFFICIENCY = ("efficiency", "%", 0.0, 100.0)
POWER = ("shaft_power", "kW", 0.0, 20.0)
NPSH = ("npsh_required", "m", 0.0, 10.0)
pump = ModelPump()


def warnings(findings):
    return [f for f in findings if f.severity != "info"]


@pytest.mark.parametrize(
    "labels", [("H", "η"), ("", ""), ("Förderhöhe", "Wirkungsgrad"), ("", "Eff.")]
)
def test_head_and_efficiency_on_two_axes(labels):
    scene = Scene()
    box = scene.box(HEAD, EFFICIENCY)
    box.line(pump.efficiency, axis="right", label=labels[1])
    box.line(pump.head, label=labels[0])
    curves, _, findings = scene.read()
    assert [c.quantity for c in curves] == ["efficiency", "head"]
    assert [c.value_axis for c in curves] == ["A.right", "A.left"]
    assert [c.unit for c in curves] == ["%", "m"]
    assert not warnings(findings)
    q = curves[1].flow_si * 3600
    np.testing.assert_allclose(curves[1].value_si, pump.head(q), atol=1e-9)
    np.testing.assert_allclose(curves[0].value_si, pump.efficiency(q) / 100, atol=1e-9)


@pytest.mark.parametrize("order", list(permutations(range(4)))[::5])
def test_four_lines_in_two_boxes_without_any_label(order):
    scene = Scene()
    upper = scene.box(HEAD, EFFICIENCY)
    lower = scene.box(POWER, NPSH)
    draw = [
        lambda: upper.line(pump.head), lambda: upper.line(pump.efficiency, axis="right"),
        lambda: lower.line(pump.power), lambda: lower.line(pump.npsh, axis="right"),
    ]  # fmt: skip
    names = ["head", "efficiency", "shaft_power", "npsh_required"]
    for k in order:
        draw[k]()
    curves, _, findings = scene.read()
    assert sorted(c.quantity for c in curves) == sorted(names)
    for c in curves:
        value = {"head": pump.head, "efficiency": pump.efficiency, "shaft_power": pump.power,
                 "npsh_required": pump.npsh}[c.quantity](c.flow_si * 3600)  # fmt: skip
        scale = {"head": 1, "efficiency": 0.01, "shaft_power": 1000, "npsh_required": 1}[c.quantity]
        np.testing.assert_allclose(c.value_si, value * scale, rtol=1e-6, atol=1e-6)
    assert not warnings(findings)


def test_power_and_efficiency_that_look_alike_are_told_apart_by_the_physics():
    scene = Scene()
    upper = scene.box(HEAD)
    upper.line(pump.head)
    lower = scene.box(("shaft_power", "kW", 0.0, 20.0), ("efficiency", "%", 0.0, 100.0))
    flow = (70.0, 150.0)  # too far from shut-off for its value there to tell
    lower.line(pump.power, flow)
    lower.line(pump.efficiency, flow, axis="right")
    curves, _, _ = scene.read()
    assert [c.quantity for c in curves] == ["head", "shaft_power", "efficiency"]


def test_families_of_two_quantities_in_one_box():
    scene = Scene()
    box = scene.box(HEAD, EFFICIENCY)
    for ratio in (1.0, 0.93, 0.86):
        box.line(ModelPump(ratio).head, ModelPump(ratio).reach)
        box.line(ModelPump(ratio).efficiency, ModelPump(ratio).reach, axis="right")
    curves, _, _ = scene.read()
    assert [c.quantity for c in curves] == ["head", "efficiency"] * 3


def test_a_third_value_axis():
    scene = Scene()
    box = scene.box(HEAD, EFFICIENCY, **{"right.2": NPSH})
    box.line(pump.head, label="H")
    box.line(pump.efficiency, axis="right", label="η")
    box.line(pump.npsh, axis="right.2", label="NPSH")
    curves, _, findings = scene.read()
    assert [c.value_axis for c in curves] == ["A.left", "A.right", "A.right.2"]
    assert not warnings(findings)


def test_the_colour_of_a_title_decides_where_shapes_do_not():
    red, blue = (0.8, 0.1, 0.1), (0.1, 0.2, 0.8)
    scene = Scene()
    for box, colour in ((100, red), (900, blue)):
        scene.pixels[300:420:2, box - 60 : box - 44] = np.rint(np.array(colour) * 255)
    made = scene.box(POWER, ("input_power", "kW", 0.0, 30.0))
    made.word("P2 [kW]", -60, 320, upright=True)
    made.word("P1 [kW]", 740, 320, upright=True)
    for side, title in (("left", "P2 [kW]"), ("right", "P1 [kW]")):
        made.axes[side] = replace(made.axes[side], title=title)
    made.line(pump.power, axis="right", colour=blue)
    made.line(pump.power, axis="left", colour=red)
    curves, _, _ = scene.read()
    assert [c.quantity for c in curves] == ["input_power", "shaft_power"]


def test_a_tie_is_a_guess_and_says_so():
    scene = Scene()
    box = scene.box(POWER, ("input_power", "kW", 0.0, 30.0))
    box.line(pump.power)
    box.line(pump.power, axis="right")
    curves, _, findings = scene.read()
    assert any(f.code == "curve.guess" and f.severity == "warning" for f in findings)
    assert all("quantity" in c.guessed for c in curves)


def test_a_label_that_no_axis_bears_out_is_a_warning():
    scene = Scene()
    box = scene.box(HEAD, EFFICIENCY)
    box.line(pump.head, label="H")
    box.line(pump.efficiency, axis="right", label="η")
    box.line(lambda q: 0.4 * pump.efficiency(q), axis="right", label="P")
    curves, _, findings = scene.read()
    assert "quantity" in curves[2].guessed
    assert any("shaft power" in f.message and f.severity == "warning" for f in findings)


def test_an_axis_that_does_not_say_its_quantity_takes_it_from_its_line():
    scene = Scene()
    box = scene.box((None, "m", 0.0, 50.0))
    box.line(pump.head, label="Q-H")
    (curve,), _, findings = scene.read()
    assert curve.quantity == "head"
    assert "quantity" in curve.guessed
    assert [f.code for f in findings] == ["curve.guess"]


def test_an_axis_without_unit_takes_that_of_its_kind_and_warns():
    scene = Scene()
    scene.box(HEAD).line(pump.head)
    scene.box(("head", None, 0.0, 50.0)).line(pump.head)
    curves, _, findings = scene.read()
    assert [c.unit for c in curves] == ["m", "m"]
    assert [f.code for f in findings] == ["axis.unit-guessed"]


def test_a_flow_axis_without_unit_gives_no_curve_and_says_so():
    scene = Scene()
    scene.box(HEAD, flow=("flow", None, 0.0, 200.0)).line(pump.head)
    curves, pumps, findings = scene.read()
    assert not curves
    assert len(pumps) == 1
    assert [f.code for f in findings] == ["curve.no-unit"]


@pytest.mark.parametrize(
    ("high", "code"), [(200 / 0.22712470704, "axis.gpm-us"), (1000.0, "axis.units-disagree")]
)
def test_a_second_flow_axis_confirms_or_contradicts(high, code):
    scene = Scene()
    box = scene.box(HEAD, top=("flow", "[gal_us]/min", 0.0, high))
    box.axes["top"] = replace(box.axes["top"], printed_unit="gpm", title="Q [gpm]")
    box.line(pump.head)
    curves, _, findings = scene.read()
    codes = {f.code: f for f in findings}
    assert code in codes
    assert codes["axis.gpm-us"].message.endswith("confirms it") == (code == "axis.gpm-us")
    assert curves[0].flow_axis == "A.bottom"
