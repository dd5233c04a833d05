"""Known lines are drawn by anti-aliased painting, traced, and compared with what was drawn."""

import cv2
import numpy as np
import pytest

from curvefit.geometry import Warp
from curvefit.notes import CurveNotes
from curvefit.records import BRIDGED, GIVEN, Page, Panel, Word
from curvefit.trace import trace

WIDTH, HEIGHT, PAD = 760, 480, 30
X = np.linspace(40, 700, 400)


class Sheet:
    """A page with one frame, drawn at sixteenths of a pixel."""

    def __init__(self, blur=0.7):
        self.image = np.full((HEIGHT + 2 * PAD, WIDTH + 2 * PAD, 3), 255, np.uint8)
        self.blur = blur
        self.line([[0, 0], [WIDTH, 0], [WIDTH, HEIGHT], [0, HEIGHT], [0, 0]], 2)

    def line(self, xy, width, colour=(0, 0, 0)):
        points = np.round((np.asarray(xy, float) + PAD) * 16).astype(np.int32)
        cv2.polylines(self.image, [points], False, colour, width, cv2.LINE_AA, 4)

    def curve(self, x, y, width=3, colour=(0, 0, 0), dash=None):
        xy = np.stack([x, y], 1)
        s = np.r_[0, np.cumsum(np.hypot(*np.diff(xy, axis=0).T))]
        if dash is None:
            self.line(xy, width, colour)
            return
        for start in np.arange(0, s[-1], sum(dash)):
            at = np.linspace(start, min(start + dash[0], s[-1]), 8)
            piece = np.stack([np.interp(at, s, x), np.interp(at, s, y)], 1)
            self.line(piece, width, colour)

    def grid(self, step, colour=(190, 190, 190), width=1):
        for x in range(step, WIDTH, step):
            self.line([[x, 0], [x, HEIGHT]], width, colour)
        for y in range(step, HEIGHT, step):
            self.line([[0, y], [WIDTH, y]], width, colour)

    def text(self, text, x, y, scale=0.5):
        at = (int(x + PAD), int(y + PAD))
        cv2.putText(
            self.image, text, at, cv2.FONT_HERSHEY_SIMPLEX, scale, (0, 0, 0), 1, cv2.LINE_AA
        )

    def panel(self, noise=0.0, seed=1, words=()):
        pixels = cv2.GaussianBlur(self.image, (0, 0), self.blur).astype(float)
        pixels += noise * np.random.default_rng(seed).normal(size=pixels.shape)
        pixels = np.clip(np.round(pixels), 0, 255).astype(np.uint8)
        page = Page("drawn", "", 1, pixels, pixels.shape[1::-1])
        corners = np.array([[0, 0], [WIDTH, 0], [WIDTH, HEIGHT], [0, HEIGHT]]) + PAD
        matrix = np.array([[1, 0, -PAD], [0, 1, -PAD], [0, 0, 1.0]])
        return Panel("A", page, corners, Warp(matrix, (WIDTH, HEIGHT)), (), words=words)


def head(top=90.0, fall=250.0):
    return top + fall * ((X - 40) / 660) ** 2.1


def hump(base=430.0, high=300.0):
    t = (X - 40) / 660
    return base - high * (2.2 * t - 1.25 * t**2.3)


def matched(traces, x, y, tolerance=2.0):
    """The trace that lies nearest to a drawn curve, its errors and the share of x it covers."""
    best = None
    for one in traces:
        inside = (x >= one.flat[0, 0]) & (x <= one.flat[-1, 0])
        if inside.sum() < 20:
            continue
        error = np.interp(x[inside], *one.flat.T) - y[inside]
        rms = float(np.sqrt((error**2).mean()))
        if best is None or rms < best[1]:
            best = (one, rms, float(inside.mean()), error, x[inside])
    assert best is not None, "no trace runs there"
    assert best[1] < tolerance, f"the nearest trace is {best[1]:.2f} px away"
    return best


def held(one, error, x, y):
    """Share of the drawn points inside 1.96 standard uncertainties."""
    slope = np.interp(x, one.flat[:, 0], np.gradient(one.flat[:, 1], one.flat[:, 0]))
    sigma = np.interp(x, one.flat[:, 0], one.sigma) * np.sqrt(1 + slope**2)
    return float((np.abs(error) <= 1.96 * sigma).mean())


@pytest.mark.parametrize("noise", [0.0, 12.0])
def test_one_curve_to_a_tenth_of_a_pixel_with_its_ends(noise):
    sheet = Sheet()
    sheet.curve(X, head())
    traces = trace(sheet.panel(noise))
    assert len(traces) == 1
    one, rms, _, error, x = matched(traces, X, head())
    assert rms < 0.12
    assert held(one, error, x, head()) > 0.85
    assert one.flat[0, 0] == pytest.approx(40, abs=4)
    assert one.flat[-1, 0] == pytest.approx(700, abs=4)
    assert one.dash == "solid"
    assert np.all(np.diff(one.flat[:, 0]) > 0)


def test_two_black_curves_keep_their_way_through_a_crossing():
    sheet = Sheet()
    sheet.curve(X, head())
    sheet.curve(X, hump())
    traces = trace(sheet.panel(4.0))
    assert len(traces) == 2
    for y in (head(), hump()):
        _, rms, cover, *_ = matched(traces, X, y)
        assert rms < 0.3
        assert cover > 0.98


def test_dashes_are_one_line_and_said_to_be_dashed():
    sheet = Sheet()
    sheet.curve(X, hump(), dash=(14, 9))
    traces = trace(sheet.panel(4.0))
    assert len(traces) == 1
    one, rms, cover, *_ = matched(traces, X, hump())
    assert rms < 0.2
    assert cover > 0.96
    assert one.dash == "dashed"


@pytest.mark.parametrize("colour", [(190, 190, 190), (0, 0, 0)])
def test_grid_lines_are_no_curves_and_do_not_break_one(colour):
    sheet = Sheet()
    sheet.grid(40, colour)
    sheet.curve(X, head(top=80.0))  # starts flat, along a grid line
    traces = trace(sheet.panel(4.0))
    assert len(traces) == 1
    _, rms, cover, *_ = matched(traces, X, head(top=80.0))
    assert rms < (0.3 if max(colour) else 1.0)
    assert cover > 0.9


def test_colours_tell_lines_apart():
    sheet = Sheet()
    sheet.curve(X, head(), colour=(190, 30, 30))
    sheet.curve(X, hump(), colour=(30, 60, 180))
    traces = trace(sheet.panel(4.0))
    assert len(traces) == 2
    red = matched(traces, X, head())[0].colour
    blue = matched(traces, X, hump())[0].colour
    assert red[0] > red[2] + 0.3
    assert blue[2] > blue[0] + 0.3


def test_a_label_on_the_curve_is_no_curve_and_ends_nothing():
    sheet = Sheet()
    y = head()
    sheet.curve(X, y)
    cv2.rectangle(sheet.image, (160, int(y[60]) + 18), (215, int(y[60]) + 44), (255,) * 3, -1)
    sheet.text("210", 136, y[60] + 6)
    corners = np.array([[134, -10], [170, -10], [170, 10], [134, 10]], float)
    word = Word("210", corners + np.array([PAD, y[60] + PAD]))
    traces = trace(sheet.panel(words=(word,)))
    assert len(traces) == 1
    _, rms, cover, *_ = matched(traces, X, y)
    assert rms < 0.3
    assert cover > 0.97


def test_a_family_with_a_common_start_has_all_its_members():
    sheet = Sheet()
    t = (X - 40) / 660
    curves = [400 - 30 * t - k * 220 * np.clip(t - 0.2, 0, None) ** 2 for k in (0.3, 0.7, 1.1)]
    for y in curves:
        sheet.curve(X, y)
    traces = trace(sheet.panel(4.0))
    assert len(traces) == 3
    for y in curves:
        one, rms, cover, error, x = matched(traces, X, y)
        assert rms < 1.0
        assert cover > 0.97
        assert held(one, error, x, y) > 0.8


def test_a_u_turn_across_a_family_is_followed_in_two_branches():
    sheet = Sheet()
    for top in (60, 130, 200):
        sheet.curve(X, head(top=top, fall=180))
    angle = np.linspace(-0.2, np.pi + 0.2, 120)
    ux, uy = 420 + 90 * np.cos(angle), 190 + 110 * np.sin(angle)
    sheet.curve(ux, uy, width=2, dash=(9, 6))
    traces = trace(sheet.panel(2.0))
    across = [one for one in traces if one.dash != "solid"]
    assert len(traces) - len(across) == 3
    assert len(across) == 2  # the two branches, left and right of the turn
    flat = np.concatenate([one.flat for one in across])
    away = np.hypot(ux[:, None] - flat[:, 0], uy[:, None] - flat[:, 1]).min(1)
    assert np.median(away) < 0.5
    assert (away < 3).mean() > 0.85


def test_an_empty_box_holds_no_curves():
    sheet = Sheet()
    sheet.grid(60)
    sheet.text("NPSH", 300, 200)
    assert trace(sheet.panel(4.0)) == ()


def test_a_given_path_follows_the_ink_between_its_clicks():
    sheet = Sheet()
    sheet.curve(X, head())
    clicks = tuple((float(x + PAD), float(y + PAD + 2)) for x, y in np.c_[X, head()][::50])
    note = CurveNotes(at=clicks[2], path=clicks)
    traces = trace(sheet.panel(), (note,))
    assert len(traces) == 1
    one, rms, *_ = matched(traces, X[:351], head()[:351])
    assert one.by == "given"
    assert (one.flags & GIVEN).all()
    assert rms < 0.2


def test_the_same_panel_gives_the_same_traces():
    sheet = Sheet()
    sheet.curve(X, head())
    sheet.curve(X, hump(), dash=(14, 9))
    first, second = trace(sheet.panel(6.0)), trace(sheet.panel(6.0))
    assert len(first) == len(second) == 2
    for a, b in zip(first, second, strict=True):
        np.testing.assert_array_equal(a.flat, b.flat)
        np.testing.assert_array_equal(a.sigma, b.sigma)


def test_a_dashed_line_that_touches_a_solid_one_for_a_while_stays_one_line():
    sheet = Sheet()
    t = (X - 40) / 660
    solid, dashed = 120 + 160 * t, 330 - 230 * t + 110 * t**2  # they meet at a small angle
    sheet.curve(X, solid, width=7)
    sheet.curve(X, dashed, width=7, dash=(38, 22))
    traces = trace(sheet.panel())
    assert len(traces) == 2
    for y, dash in ((solid, "solid"), (dashed, "dashed")):
        one, rms, cover, *_ = matched(traces, X, y)
        assert rms < 1.0
        assert cover > 0.95
        assert one.dash == dash


@pytest.mark.parametrize("dash", [None, (16, 8)])
def test_a_steep_start_belongs_to_its_curve(dash):
    sheet = Sheet()
    t = np.linspace(0, 1, 900) ** 2
    x = 20 + 660 * t
    y = 460 - 620 * (1.35 * np.sqrt(t) - 0.75 * t)
    sheet.curve(x, y, width=4, dash=dash)
    traces = trace(sheet.panel(2.0))
    assert len(traces) == 1
    one = traces[0]
    assert not one.path
    assert one.flat[0, 0] < 27
    away = np.hypot(one.flat[:, :1] - x, one.flat[:, 1:] - y).min(1)
    assert np.sqrt((away**2).mean()) < 0.5


def test_no_point_lies_outside_the_box():
    sheet = Sheet()
    x = np.linspace(0, WIDTH, 300)
    sheet.curve(x, 100 + 250 * (x / WIDTH) ** 2, width=5)
    (one,) = trace(sheet.panel())
    assert one.flat[:, 0].min() > -0.6
    assert one.flat[:, 0].max() < WIDTH + 0.6
    assert np.ptp(one.flat[:, 0]) > WIDTH - 4


def test_a_marker_and_the_bit_of_line_beside_it_are_no_word():
    sheet = Sheet()
    y = head()
    sheet.curve(X, y, width=4)
    at = (int(X[16]) + PAD, int(y[16]) + PAD)
    cv2.circle(sheet.image, at, 10, (255, 255, 255), -1)
    cv2.circle(sheet.image, at, 10, (0, 0, 0), 3, cv2.LINE_AA)
    left, right, top = 36 + PAD, X[16] + 12 + PAD, y[16] - 12 + PAD
    box = np.array([[left, top], [right, top], [right, top + 24], [left, top + 24]])
    traces = trace(sheet.panel(words=(Word("10", box),)))
    assert len(traces) == 1
    assert traces[0].flat[0, 0] == pytest.approx(40, abs=4)


def test_a_label_in_a_gap_of_the_line_is_bridged_and_flagged():
    sheet = Sheet()
    tops = (90.0, 150.0, 210.0)
    for top in tops:
        y = head(top=top)
        sheet.curve(X[:200], y[:200], width=4)
        sheet.curve(X[245:], y[245:], width=4)
        sheet.text("210 mm", X[204], y[222] + 4, 0.6)
    traces = trace(sheet.panel(3.0))
    assert len(traces) == 3
    for top in tops:
        one, rms, cover, *_ = matched(traces, X, head(top=top))
        assert rms < 0.6
        assert cover > 0.98
        gap = (one.flat[:, 0] > X[215]) & (one.flat[:, 0] < X[230])
        assert (one.flags[gap] & BRIDGED).any()
