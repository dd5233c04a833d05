"""What a user corrects in the notes is taken as given, and the rest stays as read."""

import numpy as np
import pytest
from chart_harness import chart, write_chart
from scoring import score

from curvefit.errors import ChartError
from curvefit.notes import AxisNotes, CurveNotes, GivenMark, Notes, PanelNotes
from curvefit.pipeline import read_chart
from curvefit.records import BUNDLED

PAINTED_OVER = [
    ("single", 51, "plotted", "clean"),
    ("family", 52, "inked", "scan"),
    ("twin", 53, "vector", "photo"),
    ("stacked", 54, "plotted", "fax"),
    ("offset", 55, "vector", "tinted"),
]
#: what is asked of a curve's rms error, as a share of its span, where it is not 0.001, and why
ROUGHER = {
    ("twin", "efficiency"): 0.0015
}  # a steep start at the frame of a photo: 2 px at its foot


def marks_of(axis, corners):
    """The first and the last tick of an axis, where a careful user would click."""
    start, end = {
        "bottom": (corners[3], corners[2]), "top": (corners[0], corners[1]),
        "left": (corners[3], corners[0]), "right": (corners[2], corners[1]),
    }[axis["side"]]  # fmt: skip
    # both ends of the box carry a tick in these charts, so perspective does not matter
    assert (axis["ticks"][0], axis["ticks"][-1]) == (axis["lo"], axis["hi"])
    return (
        GivenMark(tuple(start), axis["lo"], 0.3),
        GivenMark(tuple(end), axis["hi"], 0.3),
    )


def notes_for(truth):
    panels = []
    for k, panel in enumerate(truth["panels"]):
        corners = np.array(panel["corners_px"])
        axes = tuple(AxisNotes(a["side"], marks=marks_of(a, corners)) for a in panel["axes"])
        panels.append(PanelNotes(name="ABCD"[k], axes=axes))
    return Notes(panels=tuple(panels))


@pytest.mark.parametrize(("kind", "seed", "look", "damage"), PAINTED_OVER)
def test_two_marks_an_axis_bring_back_a_chart_without_numbers(kind, seed, look, damage, tmp_path):
    drawn = chart(kind, seed, look, damage, numbers=False, mono=kind != "twin")
    path = write_chart(drawn, tmp_path)
    with pytest.raises(ChartError):
        read_chart(path)  # nothing is made up where no number stands
    got = score(drawn.truth, read_chart(path, notes_for(drawn.truth)))
    for m in got.matches:
        assert m.curve is not None, f"{m.truth.name} not found"
        asked = ROUGHER.get((kind, m.truth.spec["quantity"]), 0.001)
        assert m.rms < asked, f"{m.truth.name}: {100 * m.rms:.3f} % of span"


@pytest.fixture(scope="module")
def twin(tmp_path_factory):
    """A head and an efficiency curve in one box, as read."""
    drawn = chart("twin", 56, "vector", "scan", dpi=150)
    path = write_chart(drawn, tmp_path_factory.mktemp("twin"))
    return path, read_chart(path)


def _same(a, b):
    return (
        a.quantity == b.quantity
        and (a.unit, a.flow_unit) == (b.unit, b.flow_unit)
        and np.array_equal(a.flow_si, b.flow_si)
        and np.array_equal(a.value_si, b.value_si)
    )


def _longest(reading, quantity):
    return max((c for c in reading.curves if c.quantity == quantity), key=lambda c: len(c.flow_si))


def _point(curve):
    """A place on the page where nobody else's ink is."""
    alone = np.flatnonzero((curve.trace.flags & BUNDLED) == 0)
    x, y = curve.trace.xy[alone[len(alone) // 5]]
    return float(x), float(y)


def test_one_line_puts_a_misassigned_curve_right_and_the_rest_stays(twin):
    path, read = twin
    eta, head = _longest(read, "efficiency"), _longest(read, "head")
    wrong_way = CurveNotes(at=_point(eta), quantity="head", axis="left")
    wrong = read_chart(path, Notes(curves=(wrong_way,)), previous=read)
    expected = sorted("head" if c is eta else c.quantity for c in read.curves)
    assert sorted(c.quantity for c in wrong.curves) == expected
    put_right = CurveNotes(at=_point(eta), quantity="efficiency")
    right = read_chart(path, Notes(curves=(put_right,)), previous=wrong)
    fixed = _longest(right, "efficiency")
    assert _same(fixed, eta)
    assert _same(_longest(right, "head"), head)
    assert len(right.curves) == len(read.curves)
    assert fixed.by == "given"


def test_a_reading_with_and_without_a_previous_one_is_the_same(twin):
    path, read = twin
    notes = Notes(curves=(CurveNotes(at=_point(read.curves[0]), label="worn"),))
    short, whole = read_chart(path, notes, previous=read), read_chart(path, notes)
    assert [c.name for c in short.curves] == [c.name for c in whole.curves]
    assert all(_same(a, b) for a, b in zip(short.curves, whole.curves, strict=True))


def test_a_given_path_wins_over_the_reader(twin):
    path, read = twin
    head = next(c for c in read.curves if c.quantity == "head")
    drawn = head.trace.xy[:: max(1, len(head.trace.xy) // 12)] + np.array([0.0, 25.0])
    given = CurveNotes(at=_point(head), path=tuple((float(x), float(y)) for x, y in drawn))
    again = read_chart(path, Notes(curves=(given,)))
    moved = next(c for c in again.curves if c.quantity == "head")
    inside = (head.flow_si > moved.flow_si[2]) & (head.flow_si < moved.flow_si[-3])
    drop = head.value_si - np.interp(head.flow_si, moved.flow_si, moved.value_si)
    panel = head.panel
    assert panel is not None
    per_px = panel.axis("left").slope / panel.warp.size[1]
    assert np.median(drop[inside]) == pytest.approx(25 * per_px, rel=0.1)


def test_a_dropped_curve_is_gone_and_the_other_stays(twin):
    path, read = twin
    eta = _longest(read, "efficiency")
    again = read_chart(path, Notes(curves=(CurveNotes(at=_point(eta), drop=True),)))
    left = sorted(c.quantity for c in read.curves if c is not eta)
    assert sorted(c.quantity for c in again.curves) == left


def test_a_path_named_by_its_line_alone_replaces_that_line(twin):
    """A name says what a line means; the line is found by it even where another runs nearer."""
    path, read = twin
    head, eta = _longest(read, "head"), _longest(read, "efficiency")
    drawn = head.trace.xy[:: max(1, len(head.trace.xy) // 12)] + np.array([0.0, 25.0])
    given = CurveNotes(name=head.name, path=tuple((float(x), float(y)) for x, y in drawn))
    again = read_chart(path, Notes(curves=(given,)))
    assert _same(_longest(again, "efficiency"), eta)
    moved = next(c for c in again.curves if c.name == head.name)
    assert moved.by == "given"
    assert not _same(moved, head)
