"""Plot boxes, ticks and words gathered from drawn pages whose geometry is known."""

import numpy as np
import pytest

from curvefit.calibrate.pixels import gather
from curvefit.geometry import project
from curvefit.notes import PageNotes, PanelNotes
from curvefit.records import Page

FINE = 4  # drawn so many times finer, then averaged: lines lie between pixels
RNG_SEED = 7


def page_of(pixels: np.ndarray) -> Page:
    rgb = np.repeat(pixels[:, :, None], 3, 2) if pixels.ndim == 2 else pixels
    h, w = rgb.shape[:2]
    return Page("drawn.png", "", 1, rgb, (w, h))


def drawn(size, segments, matrix=None, width=2.0, level=0):
    """A page (h, w) of grey with straight segments (x0, y0, x1, y1), sub-pixel true."""
    import cv2

    w, h = size
    fine = np.full((h * FINE, w * FINE), 255, np.uint8)
    for x0, y0, x1, y1 in segments:
        ends = np.array([[x0, y0], [x1, y1]], float)
        if matrix is not None:
            ends = project(matrix, ends)
        # the centre of a coarse pixel lies at (FINE - 1) / 2 of its fine ones
        p, q = (tuple(round(v) for v in e) for e in (ends * FINE + (FINE - 1) / 2) * 256)
        cv2.line(fine, p, q, level, int(width * FINE), cv2.LINE_AA, 8)
    return fine.reshape(h, FINE, w, FINE).mean((1, 3)).astype(np.uint8)


def box_segments(left, top, right, bottom, ticks=(), grid=()):
    sides = [
        (left, top, right, top),
        (right, top, right, bottom),
        (right, bottom, left, bottom),
        (left, bottom, left, top),
    ]
    x = [left + t * (right - left) for t in ticks]
    y = [bottom - t * (bottom - top) for t in ticks]
    marks = [(a, bottom, a, bottom + 9) for a in x] + [(left - 9, a, left, a) for a in y]
    gx = [left + t * (right - left) for t in grid]
    gy = [bottom - t * (bottom - top) for t in grid]
    lines = [(a, top, a, bottom) for a in gx] + [(left, a, right, a) for a in gy]
    return sides + marks + lines


def corners(left, top, right, bottom, matrix=None):
    xy = np.array([[left, top], [right, top], [right, bottom], [left, bottom]], float)
    return xy if matrix is None else project(matrix, xy)


def boxes(pixels, turn=0, panels=()):
    return gather(page_of(pixels), PageNotes(turn=turn), tuple(panels))


SKEW = np.array([[0.9995, 0.03, -8.0], [-0.03, 0.9995, 22.0], [0, 0, 1]])
TILT = np.array([[1.0, 0.02, 5.0], [0.01, 1.0, 3.0], [4e-5, 2.5e-5, 1.0]])


@pytest.mark.parametrize("matrix", [None, SKEW, TILT], ids=["straight", "skewed", "in perspective"])
@pytest.mark.parametrize("grid", [(), (0.2, 0.4, 0.6, 0.8)], ids=["bare", "grid"])
def test_corners_are_found_to_a_fraction_of_a_pixel(matrix, grid):
    frame = (151.3, 98.6, 902.7, 603.2)
    ticks = np.linspace(0, 1, 6)
    found = boxes(drawn((1100, 760), box_segments(*frame, ticks, grid), matrix))
    assert len(found) == 1
    assert np.abs(found[0].corners - corners(*frame, matrix)).max() < 0.25


def test_ticks_are_found_with_their_kind_and_place():
    frame, at = (150.0, 100.0, 900.0, 600.0), np.array([0.0, 0.25, 0.5, 0.75, 1.0])
    [e] = boxes(drawn((1100, 760), box_segments(*frame, at, (0.25, 0.5, 0.75))))
    rows = {(r.side, r.kind): r for r in e.ticks}
    for side, span in (("bottom", 750), ("left", 500)):
        outside, grid = rows[side, "outside"], rows[side, "grid"]
        for row in (outside, grid):
            near = np.abs(row.at[:, None] - at).min(0) * span
            assert near.max() < 0.3
            assert (row.u * span >= 0.35 - 1e-9).all()
    assert ("right", "outside") not in rows


def test_two_spines_without_a_frame_make_a_box():
    lines = [(150, 80, 150, 600), (150, 600, 900, 600)]
    lines += [(x, 600, x, 609) for x in (150, 300, 450, 600, 750, 900)]
    [e] = boxes(drawn((1050, 760), lines))
    assert np.abs(e.corners - corners(150, 80, 900, 600)).max() < 2.5


def test_stacked_boxes_come_from_top_to_bottom():
    frames = [(120, 60, 820, 300), (120, 400, 820, 640), (120, 740, 820, 980)]
    found = boxes(drawn((950, 1100), [s for f in frames for s in box_segments(*f, (0, 0.5, 1))]))
    assert len(found) == 3
    for e, f in zip(found, frames, strict=True):
        assert np.abs(e.corners - corners(*f)).max() < 0.3


def test_a_scale_of_its_own_outside_the_box_is_seen():
    lines = [*box_segments(250, 80, 900, 600, (0, 0.5, 1)), (130, 80, 130, 600)]
    lines += [(121, y, 130, y) for y in (80, 210, 340, 470, 600)]
    [e] = boxes(drawn((1050, 760), lines))
    further = [r for r in e.ticks if r.side == "left" and r.offset > 0 and r.kind == "outside"]
    assert len(further) == 1
    assert further[0].offset == pytest.approx(120, abs=1.5)
    assert np.allclose(further[0].at, [0, 0.25, 0.5, 0.75, 1], atol=0.002)


def test_noise_of_a_black_and_white_copy_breaks_no_box():
    rng = np.random.default_rng(RNG_SEED)
    frame = (150.0, 100.0, 900.0, 600.0)
    grey = drawn((1100, 760), box_segments(*frame, (0, 0.5, 1), (0.5,))).astype(float)
    copy = np.where(grey + rng.normal(0, 45, grey.shape) > 128, 255, 0).astype(np.uint8)
    copy[rng.random(copy.shape) < 0.002] = 0
    [e] = boxes(copy)
    assert np.abs(e.corners - corners(*frame)).max() < 0.6


@pytest.mark.parametrize("kind", ["blank", "cloud", "speckle"])
def test_pages_without_a_chart_hold_no_box(kind):
    import cv2

    rng = np.random.default_rng(RNG_SEED)
    pixels = np.full((800, 600), 255, np.uint8)
    if kind == "cloud":
        pixels = cv2.GaussianBlur(rng.integers(0, 255, (800, 600)).astype(np.uint8), (0, 0), 12)
    if kind == "speckle":
        pixels = rng.integers(0, 255, (800, 600)).astype(np.uint8)
    assert boxes(pixels) == ()


def test_given_corners_make_a_box_where_none_is_seen():
    given = ((100.0, 90.0), (500.0, 92.0), (498.0, 400.0), (101.0, 398.0))
    [e] = boxes(np.full((600, 700), 255, np.uint8), panels=[PanelNotes(name="A", corners=given)])
    assert np.allclose(e.corners, given)


def test_given_corners_tell_the_turn_and_replace_a_found_box():
    frame = (150.0, 100.0, 900.0, 600.0)
    pixels = drawn((1100, 760), box_segments(*frame, (0, 0.5, 1)))
    start_below = tuple(map(tuple, np.roll(corners(*frame), 1, axis=0)))
    found = gather(page_of(pixels), PageNotes(), (PanelNotes(corners=start_below),))
    assert len(found) == 1
    assert found[0].turn == 1
    assert np.allclose(found[0].corners, start_below)


def test_a_dropped_box_is_left_out():
    frames = [(120, 60, 820, 300), (120, 400, 820, 640)]
    pixels = drawn((950, 760), [s for f in frames for s in box_segments(*f, (0, 0.5, 1))])
    found = boxes(pixels, panels=[PanelNotes(box=(110, 390, 830, 650), drop=True)])
    assert len(found) == 1
    assert found[0].corners[0, 1] == pytest.approx(60, abs=0.3)


def chart(turn=0, dpi=150):
    """A plotted chart as pixels, its plot box in px (left, top, right, bottom), upright."""
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=(7, 5), dpi=dpi)
    canvas = FigureCanvasAgg(figure)
    axes = figure.add_axes((0.14, 0.14, 0.78, 0.76))
    q = np.linspace(0, 110, 50)
    axes.plot(q, 46 - 0.0022 * q**2, color="black")
    axes.set(xlim=(0, 120), ylim=(0, 50), xlabel="Flow [m³/h]", ylabel="Total head [m]")
    axes.set_title("n = 2900 1/min")
    axes.text(40, 25, "Ø210")
    canvas.draw()
    pixels = np.asarray(canvas.buffer_rgba())[:, :, :3]
    return np.ascontiguousarray(np.rot90(pixels, turn))


def texts_beside(evidence, side):
    """Words next to a side of the box, by their place along it."""
    w, h = evidence.warp.size
    out = {}
    for word in evidence.words:
        x, y = evidence.warp.to_panel(word.centre[None])[0]
        if side == "bottom" and h < y < h + 45 and -20 < x < w + 20:
            out[round(x / w, 2)] = word.text
        if side == "left" and -45 < x < 0 and -20 < y < h + 20:
            out[round(1 - y / h, 2)] = word.text
    return [out[k] for k in sorted(out)]


@pytest.mark.parametrize("turn", [0, 1, 2, 3])
def test_a_turned_chart_is_set_upright_and_its_numbers_are_read(turn):
    """`turn` quarters anticlockwise on paper need as many clockwise to set it upright."""
    [e] = gather(page_of(chart(turn)), PageNotes(), ())
    assert e.turn == turn
    assert texts_beside(e, "bottom") == ["0", "20", "40", "60", "80", "100", "120"]
    assert texts_beside(e, "left") == ["0", "10", "20", "30", "40", "50"]
    texts = [w.text for w in e.words]
    assert "Flow [m³/h]" in texts
    assert "Total head [m]" in texts
    assert any("2900" in t for t in texts)
    assert any(t.endswith("210") for t in texts)


def test_a_second_look_reads_the_number_at_a_place():
    [e] = gather(page_of(chart()), PageNotes(turn=0), ())
    word = next(w for w in e.words if w.text == "80")
    assert e.look is not None
    out = (word.box - word.centre) * 1.25 + word.centre
    assert e.look([out])[0][0] == "80"


@pytest.mark.parametrize("turn", [0, 3])
def test_a_curled_page_is_bent_straight(turn):
    """Lines across sag by a parabola of 6 px: inner places come out right to half a pixel."""
    frame, grid = (150.0, 100.0, 900.0, 600.0), np.array([0.2, 0.4, 0.6, 0.8])

    def sag(x):
        return 6 * (1 - ((np.asarray(x) - 525) / 375) ** 2)

    lines = []
    for x0, y0, x1, y1 in box_segments(*frame, (), grid):
        x, y = np.linspace(x0, x1, 60), np.linspace(y0, y1, 60) + sag(np.linspace(x0, x1, 60))
        lines += [tuple(v) for v in np.c_[x[:-1], y[:-1], x[1:], y[1:]]]
    pixels = np.ascontiguousarray(np.rot90(drawn((1100, 760), lines), turn))
    [e] = boxes(pixels, turn=turn)
    assert e.warp.bend is not None
    x, y = np.meshgrid(150 + 750 * grid, 600 - 500 * grid)
    page = np.c_[x.ravel(), (y + sag(x)).ravel()]
    if turn == 3:  # a quarter clockwise: (x, y) of 1100 x 760 becomes (759 - y, x)
        page = np.c_[759 - page[:, 1], page[:, 0]]
    w, h = e.warp.size
    found = e.warp.to_panel(page) / [w, h]
    truth = np.c_[((x - 150) / 750).ravel(), ((y - 100) / 500).ravel()]
    assert np.abs((found - truth) * [w, h]).max() < 0.5


def test_lines_across_alone_make_a_box():
    [e] = boxes(drawn((1050, 760), [(150, y, 900, y) for y in range(100, 601, 100)]))
    assert np.abs(e.corners - corners(150, 100, 900, 600)).max() < 2.5


OPEN = [(200, 620, 900, 620), (200, 100, 200, 620), (900, 100, 900, 620)]


@pytest.mark.parametrize("matrix", [None, SKEW, TILT], ids=["straight", "skewed", "in perspective"])
def test_a_side_that_is_not_drawn_runs_between_the_ends_of_those_beside_it(matrix):
    ticks = [(x, 620, x, 629) for x in np.linspace(200, 900, 6)]
    ticks += [(191, y, 200, y) for y in np.linspace(100, 620, 6)]
    ticks += [(900, y, 909, y) for y in np.linspace(100, 620, 6)]
    page = drawn((1100, 760), OPEN + ticks, matrix, width=3.0)
    (e,) = boxes(page)
    assert np.abs(e.corners - corners(200, 100, 900, 620, matrix)).max() < 1.5


def test_an_open_box_on_a_curled_page_is_bent_by_its_one_drawn_line():
    x = np.linspace(200, 900, 60)
    y = 620 + 6 * (1 - ((x - 550) / 350) ** 2)
    lines = [tuple(v) for v in np.c_[x[:-1], y[:-1], x[1:], y[1:]]]
    lines += [(200, 100, 200, 620), (900, 100, 900, 620)]
    (e,) = boxes(drawn((1100, 760), lines))
    inside = np.c_[x, y - 260]  # a line in the middle of the box sags as the bottom does
    flat = e.warp.to_panel(inside)[:, 1]
    assert np.ptp(flat) < 0.6
    assert max(e.bow) < 0.7


def figure_pixels(figure):
    from matplotlib.backends.backend_agg import FigureCanvasAgg

    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    return np.ascontiguousarray(np.asarray(canvas.buffer_rgba())[:, :, :3])


def test_boxes_that_share_a_frame_line_are_told_apart_by_their_numbers():
    from matplotlib.figure import Figure

    figure = Figure(figsize=(6, 7), dpi=130)
    upper, lower = figure.subplots(2, 1, sharex=True, gridspec_kw={"hspace": 0})
    upper.set(xlim=(0, 200), ylim=(0, 60), yticks=[10, 20, 30, 40, 50, 60])
    lower.set(ylim=(0, 100), yticks=[0, 20, 40, 60, 80])
    for axes in (upper, lower):
        axes.grid(True, color="0.7", linewidth=0.5)
    first, second = boxes(figure_pixels(figure))
    tall = 7 * 130
    for axes, found in ((upper, first), (lower, second)):
        y1, y0 = (tall * (1 - y) - 0.5 for y in (axes.get_position().y0, axes.get_position().y1))
        assert found.corners[:, 1] == pytest.approx([y0, y0, y1, y1], abs=1)


def test_one_scale_with_a_heavy_line_across_stays_one_box():
    from matplotlib.figure import Figure

    figure = Figure(figsize=(6, 6), dpi=130)
    axes = figure.subplots()
    axes.set(xlim=(0, 200), ylim=(0, 60), yticks=[0, 10, 20, 30, 40, 50, 60])
    axes.axhline(30, color="black", linewidth=0.8)
    assert len(boxes(figure_pixels(figure))) == 1


def test_labels_that_curves_cross_are_read_whole():
    from matplotlib.figure import Figure

    figure = Figure(figsize=(7, 5), dpi=200)
    axes = figure.subplots()
    axes.set(xlim=(0, 120), ylim=(0, 50), yticks=[0, 10, 20, 30, 40, 50])
    q = np.linspace(0, 110, 80)
    labels = ["65%", "75%", "80%", "210 mm", "190 mm"]
    for k, label in enumerate(labels):
        head = 48 - 8 * k - 0.0012 * q**2
        axes.plot(q, head, color="black", linewidth=1.2)
        at = 30 + 10 * k
        axes.text(q[at], head[at] - 0.9, label)  # the curve runs through its middle
    texts = [w.text for w in boxes(figure_pixels(figure))[0].words]
    assert sum(label in texts for label in labels) >= 4


def test_a_unit_a_space_behind_its_number_and_inch_marks_stay_with_it():
    from matplotlib.figure import Figure

    figure = Figure(figsize=(7, 5), dpi=150)
    axes = figure.subplots()
    axes.set(xlim=(0, 120), ylim=(0, 50))
    axes.text(30, 20, "1450 rpm", family="monospace")
    axes.text(30, 30, "210 mm", family="monospace")
    axes.text(80, 30, '9 1/4"', family="serif")
    texts = [w.text for w in boxes(figure_pixels(figure))[0].words]
    assert {"1450 rpm", "210 mm", '9 1/4"'} <= set(texts)


def test_ticks_of_a_second_right_scale_are_no_minus_signs():
    from matplotlib.figure import Figure

    figure = Figure(figsize=(7, 5), dpi=150)
    axes = figure.add_axes((0.12, 0.14, 0.6, 0.76))
    axes.set(xlim=(0, 120), ylim=(0, 50))
    second, third = axes.twinx(), axes.twinx()
    third.spines["right"].set_position(("outward", 60))
    second.set(ylim=(0, 100))
    third.set(ylim=(0, 125), yticks=[0, 25, 50, 75, 100, 125])
    texts = [w.text for w in boxes(figure_pixels(figure))[0].words]
    assert {"25", "75", "125"} <= set(texts)
    assert not [t for t in texts if t[0] in "-−"]
