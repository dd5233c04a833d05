"""Axes of unusual make, drawn as evidence and read back."""

from __future__ import annotations

import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from curvefit.calibrate.axes import scales
from curvefit.notes import AxisNotes, GivenMark, PanelNotes

sys.path.insert(0, str(Path(__file__).parents[1] / "bands"))
from corrupted_axes import Scale, drawn, steps


def _read(all_scales, **how):
    axes, words, findings = scales(drawn(all_scales, np.random.default_rng(5), **how), "A", None)
    return {a.name.partition(".")[2]: a for a in axes}, words, findings


def _ends(axis):
    return axis.value(np.array([0.0, 1.0])) / axis.factor


FLOW = steps("bottom", 0, 100, 20, title="Q [m³/h]")


@pytest.mark.parametrize(
    "scale",
    [
        steps("left", 0, 90, 30),
        steps("left", 0, 75, 15),
        steps("left", -20, 60, 10),
        steps("left", 0, 5000, 1000, "{:,.0f}"),
        steps("left", 0, 2500, 500, "{:,.0f}"),
        steps("left", 0.2, 1.0, 0.2, "{:.1f}"),
        steps("left", 0, 12, 1.5),
        steps("left", 40, 80, 10),
        steps("left", 0, 0.8, 0.1, "{:.2f}"),
        steps("left", 0, 88, 22),
    ],
    ids=lambda s: " ".join(s.form.format(v) for v in s.values[:4]),
)
def test_linear_scales(scale):
    axes, _, findings = _read([FLOW, scale])
    np.testing.assert_allclose(
        _ends(axes["left"]), [scale.low, scale.high], atol=0.002 * scale.high
    )
    assert axes["left"].scale == "linear"
    assert [f for f in findings if f.severity != "info"] == []


def test_numbers_without_a_leading_zero():
    scale = steps("left", 0.2, 1.0, 0.2, "{:.1f}")
    strip = lambda texts, rng: [t.lstrip("0") if t.startswith("0.") else t for t in texts]  # noqa: E731
    axes, _, _ = _read([FLOW, scale], spoil=strip)
    np.testing.assert_allclose(_ends(axes["left"]), [0.2, 1.0], atol=0.002)


def test_decimal_commas():
    swap = lambda texts, rng: [t.replace(".", ",") for t in texts]  # noqa: E731
    axes, _, _ = _read([FLOW, steps("left", 0, 2.5, 0.5, "{:.1f}")], spoil=swap)
    np.testing.assert_allclose(_ends(axes["left"]), [0, 2.5], atol=0.005)


def test_an_axis_that_runs_downwards():
    scale = Scale("left", 100, 0, (100, 80, 60, 40, 20, 0))
    axes, _, _ = _read([FLOW, scale])
    np.testing.assert_allclose(_ends(axes["left"]), [100, 0], atol=0.2)


@pytest.mark.parametrize(
    "values", [(1, 10, 100, 1000), (1, 2, 5, 10, 20, 50, 100), (20, 30, 50, 100, 200)]
)
def test_logarithmic_scales(values):
    scale = Scale("left", values[0], values[-1], values, log=True)
    flow = Scale("bottom", 1, 100, (1, 10, 100), log=True)
    axes, _, _ = _read([flow, scale])
    assert axes["left"].scale == axes["bottom"].scale == "log"
    np.testing.assert_allclose(_ends(axes["left"]), [scale.low, scale.high], rtol=0.005)


def test_a_third_scale_outside_has_its_own_name():
    power = steps("right", 0, 50, 10, title="P [kW]", offset=160.0)
    eta = steps("right", 0, 100, 20, title="η [%]")
    head = steps("left", 0, 80, 20, title="H [m]")
    axes, words, _ = _read([FLOW, head, eta, power])
    assert set(axes) == {"bottom", "left", "right", "right.2"}
    assert [axes[n].quantity for n in ("bottom", "left", "right", "right.2")] == [
        "flow", "head", "efficiency", "shaft_power",
    ]  # fmt: skip
    np.testing.assert_allclose(_ends(axes["right.2"]), [0, 50], atol=0.1)
    assert not [w for w in words if w.text.isdigit()]


def test_a_second_flow_scale_on_top():
    top = Scale("top", 0, 440.2867539, (0, 100, 200, 300, 400), title="Q [US gpm]")
    axes, _, _ = _read([FLOW, steps("left", 0, 80, 20, title="H [m]"), top])
    assert axes["top"].unit == "[gal_us]/min"
    np.testing.assert_allclose(_ends(axes["top"]), [0, 440.2867539], atol=0.9)


def test_contradicting_numbers_are_refused():
    nonsense = Scale("left", 0, 100, (0, 20, 40, 60, 80, 100))
    texts = ["7", "93", "21", "88", "34", "52"]
    spoil = lambda t, rng: texts if len(t) == 6 and t[1] == "20" else t  # noqa: E731
    flow = steps("bottom", 0, 80, 10, title="Q [l/s]")
    axes, _, findings = _read([flow, nonsense], spoil=spoil)
    assert "left" not in axes or any(
        f.severity in ("error", "warning") and f.where.axis == "A.left" for f in findings
    )


def test_a_misread_number_is_corrected_and_said():
    spoil = lambda t, rng: ["50" if x == "60" else x for x in t] if len(t) == 5 else t  # noqa: E731
    axes, _, findings = _read([FLOW, steps("left", 0, 80, 20, title="H [m]")], spoil=spoil)
    mark = next(m for m in axes["left"].marks if m.value == 60)
    assert mark.text == "50"
    assert [f.code for f in findings] == ["axis.corrected"]


def test_a_second_look_finds_the_numbers_that_were_missed():
    """Most numbers are lost; a fresh look at their places reads more."""
    spoil = lambda t, rng: [x if x in ("0", "100") else "" for x in t] if len(t) == 11 else t  # noqa: E731
    scale = steps("left", 0, 200, 20, title="H [m]")

    def look(boxes):
        y = np.array([np.mean(b[:, 1]) for b in boxes])
        return [(f"{20 * round((1000 - v) / 800 * 10)}", 0.9) for v in y]

    axes, _, findings = _read([FLOW, scale], spoil=spoil, look=look)
    np.testing.assert_allclose(_ends(axes["left"]), [0, 200], atol=0.4)
    assert [f for f in findings if f.severity != "info"] == []


def test_two_given_marks_make_an_axis_and_win():
    evidence = drawn([FLOW, steps("left", 0, 80, 20, title="H [m]")], np.random.default_rng(1))
    marks = (GivenMark((300.0, 1000.0), 10.0), GivenMark((300.3, 200.4), 50.0))
    notes = PanelNotes("A", axes=(AxisNotes("left", marks=marks, unit="ft"),))
    axes, _, _ = scales(evidence, "A", notes)
    left = next(a for a in axes if a.name == "A.left")
    np.testing.assert_allclose(left.value(np.array([0.0, 1.0])), [10, 50], atol=0.03)
    assert (left.by, left.unit, left.quantity) == ("given", "[ft_i]", "head")
    assert all(m.by == "given" for m in left.marks)


def test_marks_rescue_an_axis_without_numbers():
    evidence = drawn([FLOW], np.random.default_rng(1))
    marks = (GivenMark((300.0, 1000.0), 0.0), GivenMark((300.0, 600.0), 40.0))
    notes = PanelNotes("A", axes=(AxisNotes("left", marks=marks, quantity="head", unit="m"),))
    axes, _, _ = scales(evidence, "A", notes)
    left = next(a for a in axes if a.name == "A.left")
    np.testing.assert_allclose(left.value(np.array([1.0])), [80], atol=0.1)


def test_exact_ticks_carry_an_exact_scale():
    evidence = drawn([FLOW, steps("left", 0, 80, 20)], np.random.default_rng(3), exact=True)
    exact = tuple(replace(r, at=np.round(r.at, 3), u=r.u * 0.1) for r in evidence.ticks)
    axes, _, _ = scales(replace(evidence, ticks=exact), "A", None)
    left = next(a for a in axes if a.side == "left")
    assert np.sqrt(left.covariance[0, 0]) < 0.01
    np.testing.assert_allclose(left.value(np.array([0.0, 1.0])), [0, 80], atol=1e-6)


def test_a_bow_that_is_left_widens_the_scales_and_is_said():
    evidence = drawn([FLOW, steps("left", 0, 90, 30)], np.random.default_rng(5))
    flat, _, silent = scales(evidence, "A", None)
    bowed, _, said = scales(replace(evidence, bow=(0.0, 6.0)), "A", None)
    left = [next(a for a in axes if a.side == "left") for axes in (flat, bowed)]
    u = [np.sqrt(a.covariance[0, 0]) / a.slope * 800 for a in left]
    assert u[1] == pytest.approx(np.hypot(u[0], 3.0), rel=1e-6)
    assert [f.code for f in said if f.code not in {g.code for g in silent}] == ["panel.bow"]
