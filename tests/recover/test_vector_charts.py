"""Vector charts drawn in many ways: their boxes, ticks and curves against what was drawn."""

import numpy as np
import pytest
from vector_scene import BOTTOM, LEFT, RIGHT, TOP, K, Scene, curve_between

from curvefit.calibrate.strokes import gather
from curvefit.load import load
from curvefit.notes import CurveNotes, PageNotes, PanelNotes
from curvefit.records import BRIDGED, GIVEN, Panel
from curvefit.trace.strokes import has_curves, trace_strokes

TENTHS = np.arange(9) / 8


def read(scene, tmp_path, entries="", words=True):
    """(page, evidence, panel, traces) of a scene with one plot box."""
    (page,) = load(scene.write(tmp_path / "a.pdf", entries))
    (evidence,) = gather(page, PageNotes(), ())
    panel = Panel("A", page, evidence.corners, evidence.warp, (), evidence.words)
    return page, evidence, panel, trace_strokes(panel)


def corners_of(scene, page):
    box = np.array([[LEFT, TOP], [RIGHT, TOP], [RIGHT, BOTTOM], [LEFT, BOTTOM]])
    stored = np.column_stack([K * box[:, 0] - 0.5, K * (scene.size[1] - box[:, 1]) - 0.5])
    return page.from_stored(stored)


def errors(trace, fractions):
    """(largest distance [% of the box height], of the ends) between a trace and what was drawn."""
    w, h = trace.panel.warp.size
    got = np.column_stack([trace.flat[:, 0] / w, 1 - trace.flat[:, 1] / h])
    from scipy.interpolate import CubicSpline

    true = CubicSpline(fractions[:, 0], fractions[:, 1])
    inside = (got[:, 0] >= fractions[0, 0]) & (got[:, 0] <= fractions[-1, 0])
    ends = [np.hypot(*(got[i] - fractions[i])) for i in (0, -1)]
    return 100 * np.abs(got[inside, 1] - true(got[inside, 0])).max(), 100 * max(ends)


@pytest.mark.parametrize("frame", ["rectangle", "lines", "L", "areas"])
@pytest.mark.parametrize("grid", ["", "lines", "dashes"])
def test_box_and_ticks_are_exact(tmp_path, frame, grid):
    scene = Scene()
    scene.axes(frame, grid)
    scene.curve(curve_between(0.0, 0.9))
    page, evidence, _, traces = read(scene, tmp_path)
    assert np.abs(evidence.corners - corners_of(scene, page)).max() < 0.02
    assert evidence.turn == 0
    assert evidence.exact
    ticks = "inside" if frame == "areas" else "outside"
    for side in ("bottom", "left"):
        rows = [r for r in evidence.ticks if r.side == side and r.kind == ticks and not r.offset]
        assert len(rows) == 1
        assert np.allclose(rows[0].at, TENTHS, atol=2e-5)
        assert (rows[0].u * 1333 < 0.05).all()
        if grid:
            lines = [r for r in evidence.ticks if r.side == side and r.kind == "grid"]
            assert np.allclose(lines[0].at, TENTHS[1:-1], atol=1e-4)
    assert len(traces) == 1
    texts = [w.text for w in evidence.words]
    assert sorted(texts) == sorted([f"{10 * k}" for k in range(9)] + [f"{5 * k}" for k in range(9)])


@pytest.mark.parametrize("how", ["line", "pieces", "subpaths", "dashes", "dashed", "outline"])
@pytest.mark.parametrize("decimals", [2, 3])
def test_a_curve_is_one_however_it_is_drawn(tmp_path, how, decimals):
    scene = Scene(decimals)
    scene.axes("rectangle", "lines")
    drawn = curve_between(0.0, 0.93)
    scene.curve(drawn, how)
    _, _, panel, traces = read(scene, tmp_path)
    assert has_curves(panel)
    (trace,) = traces
    off, ends = errors(trace, drawn)
    loose = {"outline": 3.0, "dashes": 1.5}.get(how, 1.0)  # two sides; chords cut anew
    assert off < 0.006 * loose
    assert ends < (0.02 if how != "dashes" else 0.6)  # the last dash may end before the curve
    assert trace.dash == {"dashes": "dashed", "dashed": "dashed"}.get(how, "solid")
    assert np.allclose(trace.colour, (0, 0, 1))
    assert trace.width == pytest.approx((1.4 if how == "outline" else 1.5) * K, rel=0.03)
    assert not trace.path
    assert (np.diff(trace.flat[:, 0]) > 0).all()
    assert 250 < len(trace.flat) <= 1500
    assert not trace.flags.any()


def test_sigma_holds_what_rounding_did(tmp_path):
    """Coordinates to a tenth of a point: the error is honest, not small."""
    shares, sizes = [], []
    for decimals in (1, 2):
        scene = Scene(decimals)
        scene.axes()
        drawn = curve_between(0.02, 0.97)
        scene.curve(drawn)
        (trace,) = read(scene, tmp_path)[3]
        w, h = trace.panel.warp.size
        from scipy.interpolate import CubicSpline

        curve = CubicSpline(drawn[:, 0] * w, h * (1 - drawn[:, 1]))
        x, y = trace.flat.T
        across = (y - curve(x)) / np.hypot(1, curve(x, 1))
        shares.append((np.abs(across) < 1.96 * trace.sigma).mean())
        sizes.append(np.median(trace.sigma) / across.std())
    assert min(shares) > 0.9
    assert max(sizes) < 3


def test_neighbours_of_one_look_stay_apart(tmp_path):
    scene = Scene()
    scene.axes("rectangle", "lines")
    family = [curve_between(0.0, 0.95 - 0.04 * k, 0.035 * k) for k in range(5)]
    for curve in family:
        scene.curve(curve, "dashes", "1 w 0 G")
    traces = read(scene, tmp_path)[3]
    assert len(traces) == 5
    for trace, curve in zip(sorted(traces, key=lambda t: t.flat[0, 1]), family, strict=True):
        assert errors(trace, curve)[0] < 0.02


def test_crossing_lines_of_one_look_go_straight_on(tmp_path):
    scene = Scene()
    scene.axes()
    t = np.linspace(0, 0.95, 120)
    one = np.column_stack([t, 0.8 - 0.6 * t**1.5])
    other = np.column_stack([t, 0.1 + 0.6 * t**1.2])
    for curve in (one, other):
        scene.curve(curve, "dashes", "1 w 0 G")
    traces = sorted(read(scene, tmp_path)[3], key=lambda t: t.flat[0, 1])
    assert len(traces) == 2
    assert errors(traces[0], one)[0] < 0.02
    assert errors(traces[1], other)[0] < 0.02


def test_what_is_no_curve_is_left_out(tmp_path):
    scene = Scene()
    scene.axes("lines", "dashes")
    scene.curve(curve_between(0.0, 0.9))
    # a legend with rounded corners, its sample and its text
    scene.ops.append(
        "q 1 g 0.5 w 290 230 m 366 230 l 368 230 370 232 370 234 c 370 256 l "
        "370 258 368 260 366 260 c 290 260 l "
        "288 260 286 258 286 256 c 286 234 l 286 232 288 230 290 230 c h B Q"
    )
    scene.line(292, 245, 316, 245, "1.5 w 0 0 1 RG")
    scene.text(320, 242, "50 Hz")
    # pointers to labels with heads, markers of three kinds, a hatched area, a halo
    scene.text(200, 120, "n = 2900")
    scene.line(198, 125, 170, 190, "0.5 w")
    scene.ops.append("170 190 m 168 184 l 174 185 l h f")
    scene.ops.append("210 230 m 220 235 230 240 270 260 c S")
    for k in range(1, 9):
        x, y = scene.points(curve_between(0, 0.9)[18 * k])
        scene.line(x - 3, y - 3, x + 3, y + 3)
        scene.line(x - 3, y + 3, x + 3, y - 3)
        scene.ops.append(f"{x - 4:.2f} {y - 4:.2f} 8 8 re S")
        scene.ops.append(f"{x - 4:.2f} {y:.2f} m {x:.2f} {y + 5:.2f} l {x + 4:.2f} {y:.2f} l s")
    for k in range(14):
        scene.line(100 + 6 * k, 60, 130 + 6 * k, 110, "0.3 w")
    scene.curve(curve_between(0.0, 0.9), look="5 w 1 G")
    part = scene.points(curve_between(0.3, 0.6))  # the outline of a recommended range
    low = part[::-1] * [1, 0] + [0, 60]
    scene.draw("0.9 g 0.5 w", np.vstack([part, low]), "b")
    # a fat pale copy below and lettering drawn by a pen
    for k in range(6):
        scene.ops.append(f"{250 + 8 * k} 200 m {254 + 8 * k} 210 l {257 + 8 * k} 200 l S")
    traces = read(scene, tmp_path)[3]
    assert len(traces) == 1
    assert errors(traces[0], curve_between(0, 0.9))[0] < 0.006


def test_a_page_of_nothing_but_frames_has_no_curves(tmp_path):
    scene = Scene()
    scene.axes("lines", "lines")
    panel = read(scene, tmp_path)[2]
    assert not has_curves(panel)


def test_curves_end_at_the_box(tmp_path):
    """Programs draw on past the box and let a clip hide it."""
    scene = Scene()
    scene.axes()
    t = np.linspace(-0.2, 1.3, 200)
    drawn = np.column_stack([t, 0.9 - 0.3 * t - 0.2 * t**2])
    scene.ops.append(f"q {LEFT} {BOTTOM} {RIGHT - LEFT} {TOP - BOTTOM} re W n")
    scene.curve(drawn)
    scene.ops.append("Q")
    (trace,) = read(scene, tmp_path)[3]
    w, h = trace.panel.warp.size
    assert trace.flat[0, 0] == pytest.approx(0, abs=0.01)
    assert trace.flat[-1, 0] == pytest.approx(w, abs=0.01)
    assert trace.flat[0, 1] == pytest.approx(0.1 * h, abs=0.05)
    assert trace.flat[-1, 1] == pytest.approx(0.6 * h, abs=0.05)


def test_islands_and_labelled_lines(tmp_path):
    scene = Scene()
    scene.axes()
    angle = np.linspace(0, 2 * np.pi, 181)
    ring = np.column_stack([0.6 + 0.15 * np.cos(angle), 0.6 + 0.1 * np.sin(angle)])
    scene.draw("0.8 w", scene.points(ring), "s")
    t = np.linspace(0, 1, 200)
    arch = np.column_stack([0.2 + 0.1 * t + 0.2 * t**2, 0.2 + 0.6 * t])
    gap = slice(90, 118)
    scene.draw("0.8 w", scene.points(arch[: gap.start]))
    scene.draw("0.8 w", scene.points(arch[gap.stop :]))
    x, y = scene.points(arch[104])
    scene.text(x - 9, y - 3, "70 %")
    traces = read(scene, tmp_path)[3]
    assert len(traces) == 2
    line, island = sorted(traces, key=lambda t: t.closed)
    assert island.closed
    assert island.path
    assert not line.closed
    w, h = line.panel.warp.size
    up = np.sort(1 - line.flat[[0, -1], 1] / h)
    assert np.allclose(up, [0.2, 0.8], atol=2e-4)
    bridged = (line.flags & BRIDGED) > 0
    height = 1 - line.flat[:, 1] / h
    assert bridged.any()
    assert height[bridged].min() > arch[89, 1] - 0.002
    assert height[bridged].max() < arch[118, 1] + 0.002
    assert line.sigma[bridged].max() > 5 * np.median(line.sigma[~bridged])
    # the bridge itself lies where the line was, within its stated uncertainty
    true_x = np.interp(height[bridged], arch[:, 1], arch[:, 0])
    off = np.abs(line.flat[bridged, 0] / w - true_x) * w
    assert (off < 3 * line.sigma[bridged] + 0.2).all()


def test_a_ring_that_its_label_interrupts_is_closed_over_it(tmp_path):
    scene = Scene()
    scene.axes()
    angle = np.linspace(0.15, 2 * np.pi - 0.5, 120)
    scene.draw("0.8 w", scene.points(_ellipse(angle)))
    x, y = scene.points(_ellipse(np.array([-0.17])))[0]
    scene.text(x + 3, y - 9, "80 %", turn="0 1 -1 0")
    (ring,) = read(scene, tmp_path)[3]
    assert ring.closed
    bridged = (ring.flags & BRIDGED) > 0
    assert 0.05 < bridged.mean() < 0.2
    w, h = ring.panel.warp.size
    true = _ellipse(np.linspace(0, 2 * np.pi, 20001)) * [w, -h] + [0, h]
    from scipy.spatial import cKDTree

    off = cKDTree(true).query(ring.flat)[0]
    assert off[~bridged].max() < 0.05
    assert (off[bridged] < 3 * ring.sigma[bridged]).all()
    assert off[bridged].max() < 4


def _ellipse(angle):
    return np.column_stack([0.6 + 0.15 * np.cos(angle), 0.6 + 0.2 * np.sin(angle)])


@pytest.mark.parametrize("turn", [0, 90, 180, 270])
def test_a_page_drawn_turned_is_set_upright(tmp_path, turn):
    """/Rotate turns the shown page: the words tell how to turn it back."""
    scene = Scene()
    scene.axes("rectangle", "lines")
    scene.curve(curve_between(0.0, 0.9))
    scene.text(150, 15, "Flow in m3/h")
    page, evidence, _, (trace,) = read(scene, tmp_path, f"/Rotate {turn}")
    assert evidence.turn == -turn // 90 % 4
    assert np.abs(evidence.corners - corners_of(scene, page)).max() < 0.02
    assert errors(trace, curve_between(0.0, 0.9))[0] < 0.006
    given = gather(page, PageNotes(turn=(evidence.turn + 1) % 4), ())
    assert given[0].turn == (evidence.turn + 1) % 4
    assert np.allclose(given[0].corners, np.roll(evidence.corners, 1, 0), atol=1e-6)


def test_a_further_scale_outside_the_box(tmp_path):
    scene = Scene()
    scene.axes("lines")
    scene.line(RIGHT + 30, BOTTOM, RIGHT + 30, TOP)
    for k in range(6):
        scene.line(RIGHT + 30, BOTTOM + 44 * k, RIGHT + 35, BOTTOM + 44 * k)
        scene.text(RIGHT + 37, BOTTOM + 44 * k - 3, f"{k}")
    _, evidence, _, _ = read(scene, tmp_path)
    rows = [r for r in evidence.ticks if r.side == "right" and r.offset]
    assert len(rows) == 1
    assert rows[0].offset == pytest.approx(30 * K, abs=0.02)
    assert np.allclose(rows[0].at, np.arange(6) / 5, atol=2e-5)
    assert rows[0].kind == "outside"


def test_stacked_boxes_and_a_table(tmp_path):
    scene = Scene(size=(440, 700))
    scene.axes("rectangle", "lines")
    lower = "\n".join(scene.ops)
    scene.ops = [f"q 1 0 0 1 0 300 cm {lower} Q", lower]
    for k in range(4):  # a table of rules at the top
        scene.line(60, 620 + 15 * k, 380, 620 + 15 * k)
        scene.line(60 + 106.67 * k, 620, 60 + 106.67 * k, 665)
        scene.text(70, 624 + 15 * min(k, 2), "Motor")
    (page,) = load(scene.write(tmp_path / "a.pdf"))
    found = gather(page, PageNotes(), ())
    tops = [e.corners[0, 1] for e in found]
    assert tops == sorted(tops)
    charts = [e for e in found if any(r.kind == "outside" and not r.offset for r in e.ticks)]
    assert len(charts) == 2
    for evidence, shift in zip(charts, (300, 0), strict=True):
        top = K * (700 - TOP - shift) - 0.5
        assert evidence.corners[0, 1] == pytest.approx(top, abs=0.02)
        assert not any(r.offset for r in evidence.ticks)  # a neighbour's sides are no scales


def test_given_corners_are_taken_as_given(tmp_path):
    scene = Scene()
    scene.axes()
    (page,) = load(scene.write(tmp_path / "a.pdf"))
    (seen,) = gather(page, PageNotes(), ())
    shift = np.array([[3.0, 2.0], [-2.0, 2.0], [-2.0, -1.0], [3.0, -1.0]])
    moved = seen.corners + shift
    notes = (PanelNotes(name="A", corners=tuple(map(tuple, moved))),)
    (given,) = gather(page, PageNotes(), notes)
    assert np.allclose(given.corners, moved)
    row = next(r for r in given.ticks if r.side == "bottom" and r.kind == "outside")
    x = moved[3, 0] + row.at * (moved[2, 0] - moved[3, 0])
    assert np.allclose(x, seen.corners[3, 0] + TENTHS * 320 * K, atol=0.05)


def _path(trace, first, last, lift=0.0):
    """Page px of a rough path along a stretch of a trace."""
    n = len(trace.flat)
    part = trace.flat[int(first * n) : int(last * n) : 40] + np.array([0.0, lift])
    return tuple(map(tuple, trace.panel.warp.to_page(part)))


def test_a_drawn_path_follows_the_line_beneath_it(tmp_path):
    scene = Scene()
    scene.axes("lines")
    drawn = curve_between(0.0, 0.9)
    scene.curve(drawn)
    _, _, panel, (trace,) = read(scene, tmp_path)
    note = CurveNotes(path=_path(trace, 0.2, 0.8, lift=3.0))
    traces = trace_strokes(panel, (note,))
    assert len(traces) == 2
    new = traces[1]
    assert new.by == "given"
    w, h = panel.warp.size
    from scipy.interpolate import CubicSpline

    true = CubicSpline(drawn[:, 0], drawn[:, 1])
    assert np.abs(1 - new.flat[:, 1] / h - true(new.flat[:, 0] / w)).max() < 5e-5
    assert 0.15 < new.flat[0, 0] / w < 0.25


def test_a_drawn_path_over_nothing_is_the_line_and_says_so(tmp_path):
    scene = Scene()
    scene.axes("lines")
    scene.curve(curve_between(0.0, 0.9))
    _, _, panel, (trace,) = read(scene, tmp_path)
    corners = panel.at(np.array([0.1, 0.5]), np.array([0.1, 0.2]))
    _, new = trace_strokes(panel, (CurveNotes(path=tuple(map(tuple, corners))),))
    assert (new.flags == GIVEN).all()
    assert new.sigma.min() >= 1
    assert np.allclose(new.xy[[0, -1]], corners)
    # instead of a stretch of a line that is named by a point on it
    at = tuple(trace.xy[len(trace.xy) // 2])
    lifted = _path(trace, 0.3, 0.7, lift=30.0)
    (changed,) = trace_strokes(panel, (CurveNotes(at=at, path=lifted, whole=False),))
    given = changed.flags == GIVEN
    assert 0.3 < given.mean() < 0.5
    assert (np.diff(changed.flat[:, 0]) > 0).all()
    assert changed.name == trace.name
    assert changed.colour == trace.colour
    # or instead of all of it
    (whole,) = trace_strokes(panel, (CurveNotes(at=at, path=lifted),))
    assert (whole.flags == GIVEN).all()


def test_a_stretch_is_left_out(tmp_path):
    scene = Scene()
    scene.axes("lines")
    scene.curve(curve_between(0.0, 0.9))
    scene.curve(curve_between(0.0, 0.8, 0.2), look="1 w 0 G")
    _, _, panel, traces = read(scene, tmp_path)
    at = tuple(traces[0].xy[20])
    (x0, _), (x1, _) = panel.at(np.array([0.4, 0.6]), np.array([0.5, 0.5]))
    box = (x0, -1e5, x1, 1e5)
    cut, other = trace_strokes(panel, (CurveNotes(at=at, leave_out=(box,)),))
    x = cut.flat[:, 0] / panel.warp.size[0]
    assert not ((x > 0.4) & (x < 0.6)).any()
    assert x.max() > 0.85 or other.flat[-1, 0] > cut.flat[-1, 0]
    assert len(other.flat) == len(traces[1].flat)


def test_solid_lines_that_end_near_each_other_stay_two(tmp_path):
    """A line of equal efficiency leaves the field and comes back a little further on."""
    scene = Scene()
    scene.axes("lines")
    t = np.linspace(0, 1, 60)
    scene.curve(np.column_stack([0.60 - 0.04 * t**2, 0.7 - 0.25 * t]), "dashed", "0.5 w")
    scene.curve(np.column_stack([0.575 + 0.25 * t, 0.44 - 0.01 * t]), "dashed", "0.5 w")
    traces = read(scene, tmp_path)[3]
    assert len(traces) == 2
    assert all(t.dash == "dashed" for t in traces)


def test_a_picture_of_a_chart_is_not_traced_by_strokes(tmp_path):
    """Rules and a logo elsewhere on the page do not make a vector chart of a picture."""
    scene = Scene()
    scene.axes("lines", "lines")
    t = np.linspace(0, 2 * np.pi, 40)
    logo = np.column_stack([30 + 12 * np.cos(t), 300 + 9 * np.sin(2 * t)])
    scene.draw("2 w 0 0 1 RG", logo)
    page, _, panel, traces = read(scene, tmp_path)
    assert page.vector
    assert not has_curves(panel)
    assert traces == ()


def _shapes(x, y, text, size):
    """Operators that draw a text as filled outlines, like a program that embeds no fonts."""
    from matplotlib.font_manager import FontProperties
    from matplotlib.textpath import TextPath

    path = TextPath((x, y), text, size, prop=FontProperties(family="DejaVu Sans"))
    rings = path.to_polygons(closed_only=True)
    return (
        " ".join(
            " ".join(f"{a:.2f} {b:.2f} {'l' if i else 'm'}" for i, (a, b) in enumerate(ring)) + " h"
            for ring in rings
        )
        + " f*"
    )


def test_numbers_drawn_as_shapes_are_read_from_their_picture(tmp_path):
    scene = Scene()
    scene.axes("rectangle", "lines", numbers=False)
    for k in range(9):
        scene.ops.append(_shapes(LEFT + 40 * k - 5, BOTTOM - 18, f"{10 * k}", 9))
        scene.ops.append(_shapes(LEFT - 24, BOTTOM + 27.5 * k - 3, f"{5 * k}", 9))
    scene.ops.append(_shapes(170, 12, "Flow [m3/h]", 10))
    scene.curve(curve_between(0.0, 0.9))
    page, evidence, _, traces = read(scene, tmp_path)
    assert page.words == ()
    assert evidence.exact
    assert np.abs(evidence.corners - corners_of(scene, page)).max() < 0.02
    assert [f.code for f in evidence.findings] == ["page.no-text"]
    texts = [w.text for w in evidence.words]
    assert {f"{10 * k}" for k in range(1, 9)} <= set(texts)
    assert evidence.look is not None
    assert len(traces) == 1  # letters are no curves
    assert errors(traces[0], curve_between(0.0, 0.9))[0] < 0.006
