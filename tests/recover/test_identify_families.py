"""Impeller diameters, speeds and stages of the lines of a family, from labels good and bad."""

import numpy as np
import pytest
from identify_scene import ModelPump, Scene, family

from curvefit.identify.families import Member, order

HEAD = ("head", "m", 0.0, 50.0)
RATIOS = [1.0, 0.95, 0.9, 0.85]
PRINTED = [210.0, 199.5, 189.0, 178.5]


def heads(labels, ratios=RATIOS, **how):
    scene = Scene()
    family(scene.box(HEAD), labels, ratios, **how)
    return scene.read()


def diameters(curves):
    return [None if c.diameter_si is None else round(c.diameter_si * 1000, 2) for c in curves]


def warnings(findings):
    return [f.code for f in findings if f.severity != "info"]


@pytest.mark.parametrize("place", ["end", "start"])
@pytest.mark.parametrize(
    "labels",
    [
        ["Ø210", "Ø200", "Ø190", "Ø180"],
        ["210 mm", "200 mm", "190 mm", "180 mm"],
        ["D=210", "D=200", "D=190", "D=180"],
        ["210", "200", "190", "180"],
        ["⌀ 210", "⌀ 200", "⌀ 190", "⌀ 180"],
        ["0210", "8200", "Ø190", "@180"],
        ["0210", "0200", "0190", "0180"],
        ["8210", "6200", "D190", "Q180"],
        ["Ø21O", "Ø2OO", "ØI90", "Ø180"],
    ],
)
def test_diameters_in_every_spelling(labels, place):
    curves, _, findings = heads(labels, place=place)
    assert diameters(curves) == [210, 200, 190, 180]
    assert not warnings(findings)
    assert curves[0].name == "head Ø210"


def test_inches():
    sizes = np.array([8.25, 7.875, 7.5, 7.0])
    curves, _, findings = heads(['8 1/4"', '7 7/8"', '7 1/2"', '7"'], sizes / 8.25)
    assert diameters(curves) == [209.55, 200.02, 190.5, 177.8]
    assert {c.diameter_unit for c in curves} == {"[in_i]"}
    assert not warnings(findings)


@pytest.mark.parametrize(
    ("labels", "values", "unit"),
    [
        (["2900 rpm", "2755 rpm", "2610 rpm", "2465 rpm"], [2900, 2755, 2610, 2465], "/min"),
        (["50 Hz", "47.5 Hz", "45 Hz", "42.5 Hz"], [3000, 2850, 2700, 2550], "Hz"),
        (["2900", "2755", "2610", "2465"], [2900, 2755, 2610, 2465], "/min"),
    ],
)
def test_speeds(labels, values, unit):
    curves, _, findings = heads(labels)
    assert [round(c.speed_si * 60, 1) for c in curves] == values
    assert {c.speed_unit for c in curves} == {unit}
    assert diameters(curves) == [None] * 4
    assert not warnings(findings)


def test_shares_of_the_rated_speed():
    scene = Scene()
    box = scene.box(HEAD, title="n = 2900 rpm")
    family(box, ["100 %", "95 %", "90 %", "85 %"], RATIOS)
    curves, pumps, findings = scene.read()
    assert [c.speed_ratio for c in curves] == pytest.approx([1.0, 0.95, 0.9, 0.85])
    assert pumps[0].speed_si == pytest.approx(2900 / 60)
    assert curves[1].speed_si == pytest.approx(0.95 * 2900 / 60)
    assert not warnings(findings)


def test_stages():
    ratios = [1.0, np.sqrt(2 / 3), np.sqrt(1 / 3)]  # heads 3 : 2 : 1
    scene = Scene()
    box = scene.box(HEAD)
    for label, r in zip(["3 stages", "2 stages", "1 stage"], ratios, strict=True):
        box.line(lambda q, r=r: r**2 * (42 - 0.0009 * q**2), label=label)
    curves, _, findings = scene.read()
    assert [c.stages for c in curves] == [3, 2, 1]
    assert not warnings(findings)


def test_no_diameter_is_made_of_a_trim_letter():
    curves, _, findings = heads(["A", "B", "C", "D"])
    assert [c.label for c in curves] == ["A", "B", "C", "D"]
    assert diameters(curves) == [None] * 4
    assert curves[0].name == "head A"
    assert not warnings(findings)


def test_a_label_that_is_missing_leaves_its_line_without_a_name_and_says_so():
    curves, _, findings = heads(["Ø210", "", "Ø190", "Ø180"])
    assert diameters(curves) == [210, None, 190, 180]
    assert warnings(findings) == ["curve.unlabelled"]


def test_a_misread_digit_is_not_believed_in_silence():
    for bad in ("Ø270", "Ø120", "Ø208"):
        curves, _, findings = heads(["Ø210", bad, "Ø190", "Ø180"])
        read = diameters(curves)
        assert read[::2] == [210, 190]
        assert read[1] != 200
        assert warnings(findings)


def crowded(labels):
    """Heads two text heights apart with labels half way between each line and the one above."""
    scene = Scene()
    box = scene.box(HEAD)
    for k, label in enumerate(labels):
        pump = ModelPump(np.sqrt(1 - 3.2 * k / 42))
        box.line(pump.head, pump.reach)
        (x, y), *_ = box.flat(np.array([6.0]), pump.head(np.array([6.0])))
        if label:
            box.word(label, x, y - 16.0)
    return scene.read()


@pytest.mark.parametrize("torn", ["D205 n m", "D2 n m", "0205 nm", "B205 m", "Dz0.5mn"])
@pytest.mark.parametrize("place", [0, 3, 6])
def test_a_label_that_cannot_be_read_keeps_its_line(torn, place):
    labels = ["D205 mm", "D197 mm", "D189 mm", "D180 mm", "D171 mm", "D161 mm", "D151 mm"]
    expected = [205, 197, 189, 180, 171, 161, 151]
    labels[place], expected[place] = torn, None
    curves, _, findings = crowded(labels)
    assert diameters(curves) == expected
    assert warnings(findings) == ["curve.unlabelled"]


@pytest.mark.parametrize("lost", ["", "x"])
def test_labels_that_could_all_move_on_by_one_line_are_all_in_doubt(lost):
    curves, _, _ = crowded([lost, "D197 mm", "D189 mm", "D180 mm", "D171 mm"])
    for curve, right in zip(curves, [None, 197, 189, 180, 171], strict=True):
        wrong = curve.diameter_si is not None and round(curve.diameter_si * 1000) != right
        said = {f.code for f in curve.findings if f.severity == "warning"}
        assert not wrong or "label.shifted" in said
        assert not wrong or "diameter" in curve.guessed


def test_two_lines_with_one_label_text_are_not_both_named():
    curves, _, findings = heads(["Ø210", "Ø190", "Ø190", "Ø180"])
    assert len({d for d in diameters(curves) if d}) == sum(d is not None for d in diameters(curves))
    assert warnings(findings)


def test_labels_in_order_beat_labels_nearest():
    """Labels pushed half a line upwards, so that each is about as near to the line above."""
    curves, _, _ = heads(["Ø210", "Ø200", "Ø190", "Ø180"], place="start", shift=(0, -18))
    assert diameters(curves) == [210, 200, 190, 180]


def test_bundles_take_crowded_labels_in_the_order_of_their_ends():
    scene = Scene()
    labels = ["Ø210", "Ø200", "Ø190"]
    family(scene.box(HEAD), labels, RATIOS[:3])
    family(
        scene.box(("efficiency", "%", 0.0, 100.0)), labels, RATIOS[:3], "efficiency", place="start"
    )
    family(scene.box(("npsh_required", "m", 0.0, 10.0)), labels, RATIOS[:3], "npsh", place="start")
    curves, _, findings = scene.read()
    assert diameters(curves) == [210, 200, 190] * 3
    assert not warnings(findings)


def test_lines_without_labels_are_named_after_their_heads():
    scene = Scene()
    family(scene.box(HEAD), ["Ø210", "Ø200", "Ø190"], RATIOS[:3])
    family(scene.box(("shaft_power", "kW", 0.0, 20.0)), ["", "", ""], RATIOS[2::-1], "power")
    curves, _, findings = scene.read()
    assert diameters(curves) == [210, 200, 190, 190, 200, 210]
    assert all("diameter" in c.guessed for c in curves[3:])
    assert {f.code for f in findings} == {"curve.named-by-twin"}
    assert not warnings(findings)


def test_one_bad_label_is_outvoted_by_the_other_panels():
    scene = Scene()
    family(scene.box(HEAD), ["Ø210", "Ø200", "Ø190"], RATIOS[:3])
    family(
        scene.box(("efficiency", "%", 0.0, 100.0)),
        ["Ø210", "Ø200", "Ø190"],
        RATIOS[:3],
        "efficiency",
    )
    family(
        scene.box(("npsh_required", "m", 0.0, 10.0)), ["Ø210", "Ø206", "Ø190"], RATIOS[:3], "npsh"
    )
    curves, _, findings = scene.read()
    assert diameters(curves) == [210, 200, 190] * 3
    assert not warnings(findings)


def test_a_legend_names_lines_by_their_look():
    scene = Scene()
    inks = [(0.8, 0.1, 0.1), (0.1, 0.2, 0.8), (0.0, 0.5, 0.1)]
    box = scene.box(HEAD)
    for k, (ink, ratio) in enumerate(zip(inks, RATIOS[:3], strict=True)):
        family(box, [""], [ratio], colour=ink)
        row = 380 + 30 * k
        scene.pixels[row + 99 : row + 102, 150:190] = np.rint(np.array(ink) * 255)
        box.word(["Ø190", "Ø210", "Ø200"][k], 100, row)  # not in the order of the heads
    curves, _, _ = scene.read()
    assert diameters(curves) == [190, 210, 200]


def test_a_legend_whose_looks_do_not_tell_all_lines_apart_goes_by_size():
    scene = Scene()
    box = scene.box(HEAD)
    family(box, [""] * 3, RATIOS[:3], dash="dashed")
    for k, label in enumerate(["Ø190", "Ø210", "Ø200"]):
        row = 380 + 30 * k
        scene.pixels[row + 99 : row + 102, 150:190] = 0
        box.word(label, 100, row)
    curves, _, _ = scene.read()
    assert diameters(curves) == [210, 200, 190]


def test_a_legend_in_a_frame_beside_an_axis_names_lines_by_their_dashes():
    """Ticks and the axis stand left of the frame, in the row of a sample and stronger than it."""
    scene = Scene()
    box = scene.box(HEAD)
    patterns = {"solid": [60], "dashed": [20, 9, 20], "dash-dotted": [25, 7, 4, 7, 13]}
    for ratio, dash in zip(RATIOS, patterns, strict=False):
        family(box, [""], [ratio], dash=dash)
    ink = scene.pixels
    ink[440:560, 122:126] = 0
    ink[440:560, 160:162] = 0
    for k, dash in enumerate(["dash-dotted", "solid", "dashed"]):
        row = 460 + 36 * k
        ink[row - 4 : row + 1, 118:126] = 0
        ink[row - 3 : row + 1, 100:160] = 0
        x = 174
        for i, length in enumerate(patterns[dash]):
            ink[row - 2 : row + 2, x : x + length] = ink[row, x] if i % 2 else 0
            x += length
        box.word(["Ø190", "Ø210", "Ø200"][k], 146, row - 100)
    curves, _, findings = scene.read()
    assert diameters(curves) == [210, 200, 190]
    assert not warnings(findings)


@pytest.mark.parametrize("corner", [True, False])
def test_labels_at_the_end_of_leaders(corner):
    """Each label stands nearer to the line below than to its own; thin lines lead to its own."""
    scene = Scene()
    box = scene.box(HEAD)
    family(box, [""] * 3, RATIOS[:3])
    for k, (ratio, label) in enumerate(zip(RATIOS, ["Ø210", "Ø200", "Ø190"], strict=False)):
        q = np.array([90.0 + 12 * k])
        (x, y), end = box.flat(q, ModelPump(ratio).head(q))[0], [60.0, 62.0]
        path = np.array([[x, y], [x + end[0], y + end[1]]])
        if corner:
            path = np.vstack([path, path[-1] + [12, 0]])
        t = np.linspace(0, 1, 40)
        s = np.r_[0, np.cumsum(np.hypot(*np.diff(path, axis=0).T))]
        flat = np.c_[np.interp(t * s[-1], s, path[:, 0]), np.interp(t * s[-1], s, path[:, 1])]
        flow = box.axes["bottom"].value(flat[:, 0] / 800)
        head = box.axes["left"].value(1 - flat[:, 1] / 500)
        box.line(head, flow, width=0.8)
        box.word(label, path[-1, 0] + 5, path[-1, 1])
    curves, _, findings = scene.read()
    assert diameters(curves) == [210, 200, 190]
    assert not warnings(findings)


def test_a_lone_line_takes_a_diameter_only_from_a_label_that_says_so():
    for label, expected in (("Ø210", 210), ("210 mm", 210), ("CM 210", None), ("210", None)):
        curves, _, _ = heads([label], [1.0])
        assert diameters(curves) == [expected]


def test_order_of_lines_that_end_alike():
    q = np.linspace(0, 1, 50)
    big, small = 1.0 - 0.2 * q**2, 0.8 - 0.2 * q**2
    members = [Member(None, q, small), Member(None, q, big)]
    assert order(members, "head") == [1, 0]
    rising = [Member(None, q, 1 + 2 * q**2), Member(None, q, 1 + q**2)]
    assert order(rising, "npsh_required") == [1, 0]
