"""A Reading made by hand, for tests of what comes after the reading."""

import hashlib

import numpy as np
import pytest

from curvefit.errors import Location
from curvefit.geometry import Warp, homography
from curvefit.notes import Notes
from curvefit.records import (
    BRIDGED,
    BUNDLED,
    Axis,
    Band,
    Curve,
    Finding,
    Fit,
    Mark,
    Page,
    Panel,
    Pump,
    Reading,
    Trace,
)

SIZE = (900, 1200)  # of the page as shown
BOXES = {"A": (120.0, 80.0, 780.0, 560.0), "B": (120.0, 700.0, 780.0, 1100.0)}
HOUR = 3600.0


def _page(quarter_turn):
    width, height = SIZE
    pixels = np.full((height, width, 3), 255, np.uint8)
    to_stored = np.eye(3)
    stored = SIZE
    if quarter_turn:  # stored lying on its side: x' = y, y' = width - 1 - x
        to_stored = np.array([[0.0, 1, 0], [-1, 0, width - 1.0], [0, 0, 1]])
        stored = (height, width)
    sha256 = hashlib.sha256(b"a page made for tests").hexdigest()
    return Page("made <page>.png", sha256, 1, pixels, stored, to_stored, dpi=150.0)


def _axis(panel, side, quantity, unit, lo, hi, printed, box, factor=1.0):
    left, top, right, bottom = box
    marks = []
    for t in np.linspace(0, 1, 5):
        x = left + t * (right - left) if side in ("bottom", "top") else (
            left if side == "left" else right)  # fmt: skip
        y = bottom - t * (bottom - top) if side in ("left", "right") else bottom
        value = lo + t * (hi - lo)
        marks.append(Mark(np.array([x, y]), 0.3, f"{value:g}", float(value)))
    cov = np.array([[1.0, -1.0], [-1.0, 2.0]]) * (2e-4 * (hi - lo)) ** 2
    return Axis(
        f"{panel}.{side}", side, quantity, unit, printed, "linear", lo, hi - lo, cov,
        tuple(marks), factor, title=f"{quantity} [{printed}]",
    )  # fmt: skip


def _panel(page, name, axes):
    left, top, right, bottom = box = BOXES[name]
    corners = np.array([[left, top], [right, top], [right, bottom], [left, bottom]])
    w, h = right - left, bottom - top
    warp = Warp(homography(corners, [[0, 0], [w, 0], [w, h], [0, h]]), (w, h))
    return Panel(name, page, corners, warp, tuple(_axis(name, *a, box) for a in axes))


def _curve(panel, name, side, quantity, truth, lo, hi, flow_si, value_si, unit, **known):
    """A curve of a function (flow as printed) over a range, with its trace."""
    flow_axis, axis = panel.axis("bottom"), panel.axis(side)
    t = np.linspace(
        flow_axis.fraction(np.array([lo]))[0], flow_axis.fraction(np.array([hi]))[0], 80
    )
    flow, w, h = flow_axis.value(t), *panel.warp.size
    value = truth(flow)
    flat = np.c_[t * w, (1 - axis.fraction(value)) * h]
    n, flags = len(t), np.zeros(len(t), np.uint8)
    flags[30:36] = BRIDGED
    flags[:4] = BUNDLED
    trace = Trace(f"{panel.name}{name}", panel, flat, np.full(n, 0.1), flags, 12.0, 2.0)
    s = axis.fraction(value)
    slope = np.gradient(s, t)
    span = axis.slope * value_si
    calibration = np.c_[-slope * (1 - t), -slope * t, 1 - s, s] * span * 3e-4
    trace_sigma = np.full(n, 0.1 / h * abs(span))
    curve = Curve(
        name, quantity, flow * flow_si, value * value_si, flow_axis.unit, unit, trace, panel,
        flow_axis.name, axis.name, sigma_si=np.hypot(trace_sigma, np.hypot.reduce(calibration, 1)),
        trace_sigma_si=trace_sigma, calibration_si=calibration,
        correlation_si=12.0 / w * flow_axis.slope * flow_si, flags=flags, **known,
    )  # fmt: skip
    return curve, trace


def _fit(curve, degree=3):
    x, y = curve.flow_si, curve.value_si
    c = np.polynomial.Polynomial.fit(x, y, degree).convert().coef
    grid = np.linspace(x[0], x[-1], 41)
    value = np.polynomial.polynomial.polyval(grid, c)
    half = 1.96 * np.interp(grid, x, curve.sigma_si)
    k = len(c)
    return Fit(
        f"{curve.name} fit", (curve,), "polynomial", degree, (float(x[0]), float(x[-1])),
        Band(grid, value, value - half, value + half, "pointwise", 0.95), c,
        covariance=np.diag((1e-3 * np.abs(c) + 1e-12) ** 2),
        factors=np.ones((k, len(grid))) * 1e-3, calibration=np.ones((4, len(grid))) * 1e-3,
        residual_rms_si=float(np.std(y - np.polynomial.polynomial.polyval(x, c))),
        effective_points=30.0, candidates=(("polynomial 3", -310.2, ""),),
        reason="it predicts best",
        derived={"bep": {"flow_si": float(grid[20]), "u_flow_si": 1e-5, "efficiency_si": 0.7,
                         "u_efficiency_si": None},
                 "specific_speed": {"nq": 31.0, "u_nq": 0.4}},
    )  # fmt: skip


def make_reading(quarter_turn=False, notes=None, label="Ø210", findings=True):
    """Two panels; two heads and an efficiency in A, NPSH required in B; a fit for each."""
    page = _page(quarter_turn)
    a = _panel(page, "A", [
        ("bottom", "flow", "m3/h", 0.0, 100.0, "m³/h"),
        ("left", "head", "m", 0.0, 60.0, "m"),
        ("right", "efficiency", "%", 0.0, 100.0, "%"),
    ])  # fmt: skip
    b = _panel(page, "B", [
        ("bottom", "flow", "m3/h", 0.0, 100.0, "m³/h"),
        ("left", "npsh_required", "m", 0.0, 8.0, "m"),
    ])  # fmt: skip
    m3h = 1 / HOUR
    pairs = [
        _curve(a, "head Ø210", "left", "head", lambda q: 50 - 0.002 * q**2 - 1e-5 * q**3, 2, 95,
               m3h, 1.0, "m", diameter_si=0.21, label=label),
        _curve(a, "head Ø195", "left", "head", lambda q: 42 - 0.0022 * q**2, 2, 90,
               m3h, 1.0, "m", diameter_si=0.195, label="Ø195"),
        _curve(a, "efficiency", "right", "efficiency", lambda q: 2.4 * q - 0.0185 * q**2, 5, 95,
               m3h, 0.01, "%", guessed=("quantity",)),
        _curve(b, "NPSHr", "left", "npsh_required", lambda q: 1.5 + 5e-4 * q**2, 10, 95,
               m3h, 1.0, "m", npsh_basis="NPSH3", by="given"),
    ]  # fmt: skip
    curves = tuple(c for c, _ in pairs)
    said = (
        Finding("warning", "axis.few-marks", "The axis has 2 marks, 3 are needed to see an error.",
                Location(page=1, panel="A", axis="A.left", box_px=(100.0, 80.0, 120.0, 560.0)),
                "Give marks under [[axis]] in the notes."),
        Finding("info", "curve.guess", "The quantity of this curve is a guess.",
                Location(page=1, panel="A", curve="efficiency"), "Give quantity in the notes."),
    )  # fmt: skip
    return Reading(
        page, (a, b), tuple(t for _, t in pairs), curves,
        (Pump("1", speed_si=2900 / 60, speed_basis="printed", stages=1),),
        tuple(_fit(c) for c in curves), said if findings else (), notes or Notes(),
    )  # fmt: skip


@pytest.fixture(scope="session")
def made_reading():
    """A function that makes a Reading by hand."""
    return make_reading
