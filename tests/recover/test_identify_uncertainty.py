"""Uncertainty of the values: what is claimed is what happens when axes and lines are disturbed."""

from dataclasses import replace

import numpy as np
import pytest
from identify_scene import ModelPump, Scene

from curvefit.identify import identify
from curvefit.identify.values import values

pump = ModelPump()
COVARIANCE = np.array([[1.0, -0.6], [-0.6, 2.0]])


def trace_and_axes(scale="linear", sigma=0.4):
    scene = Scene()
    box = scene.box(("head", "m", 10.0, 50.0), scale=scale, flow=("flow", "m3/h", 5.0, 200.0))
    box.line(pump.head, (10.0, 170.0))
    _, (panel,), (trace,) = scene.records()
    trace = replace(trace, sigma=np.full(len(trace.flat), sigma))
    flow = replace(panel.axis("bottom"), covariance=COVARIANCE * 0.3**2)
    head = panel.axis("left")
    head = replace(head, covariance=COVARIANCE * (2e-3 * head.slope) ** 2)
    return trace, flow, head


def disturbed(axis, rng):
    """The axis with one draw of its errors."""
    offset, slope = rng.multivariate_normal([axis.offset, axis.slope], axis.covariance)
    return replace(axis, offset=float(offset), slope=float(slope))


@pytest.mark.parametrize("scale", ["linear", "log"])
def test_calibration_columns_give_the_spread_of_disturbed_axes(scale):
    trace, flow, head = trace_and_axes(scale)
    v = values(trace, flow, head)
    rng = np.random.default_rng(5)
    at = v.flow[5:-5:15]
    drawn = []
    for _ in range(1500):
        w = values(trace, disturbed(flow, rng), disturbed(head, rng))
        drawn.append(np.interp(at, w.flow, w.value))
    claimed = np.array([np.interp(at, v.flow, c) for c in v.calibration.T])
    seen = np.cov(np.array(drawn).T)
    np.testing.assert_allclose(claimed.T @ claimed, seen, atol=0.1 * np.diag(seen).max())
    np.testing.assert_allclose(np.sqrt((claimed**2).sum(0)), np.sqrt(np.diag(seen)), rtol=0.09)


def test_each_axis_alone_fills_its_own_columns():
    trace, flow, head = trace_and_axes()
    still = np.zeros((2, 2))
    only_flow = values(trace, flow, replace(head, covariance=still)).calibration
    only_head = values(trace, replace(flow, covariance=still), head).calibration
    assert (only_flow[:, 2:] == 0).all()
    assert (only_head[:, :2] == 0).all()
    assert (np.abs(only_flow[5:, :2]).sum(1) > 0).all()
    assert (np.abs(only_head[:, 2:]).sum(1) > 0).all()


@pytest.mark.parametrize("scale", ["linear", "log"])
def test_an_error_across_the_line_moves_the_value_as_claimed(scale):
    trace, flow, head = trace_and_axes(scale)
    v = values(trace, flow, head)
    dx, dy = np.gradient(trace.flat, axis=0).T
    normal = np.c_[-dy, dx] / np.hypot(dx, dy)[:, None]
    moved = values(replace(trace, flat=trace.flat + 0.4 * normal), flow, head)
    inner = slice(10, -10)
    change = np.abs(np.interp(v.flow, moved.flow, moved.value) - v.value)[inner]
    np.testing.assert_allclose(change, v.trace_sigma[inner], rtol=0.03)
    np.testing.assert_allclose(
        v.sigma, np.sqrt(v.trace_sigma**2 + (v.calibration**2).sum(1)), rtol=1e-12
    )


def test_correlation_is_a_length_in_flow():
    trace, flow, head = trace_and_axes()
    v = values(trace, flow, head)
    along_flow = 20.0 / 800.0 * 195.0 / 3600.0
    assert 0.8 * along_flow < v.correlation <= along_flow


def test_an_iso_line_keeps_its_order_and_a_bounded_uncertainty():
    scene = Scene()
    box = scene.box(("head", "m", 0.0, 50.0))
    t = np.linspace(-1, 1, 100)
    box.line(30 + 8 * t, 80 + 20 * t**2, path=True)
    _, (panel,), (trace,) = scene.records()
    v = values(trace, panel.axis("bottom"), panel.axis("left"), iso=True)
    np.testing.assert_allclose(v.value, 30 + 8 * t)
    assert v.trace_sigma == pytest.approx(np.full(100, 0.1 / 500 * 50))
    assert np.isfinite(v.calibration).all()


def test_flow_rises_strictly_whatever_the_line():
    scene = Scene()
    box = scene.box(("head", "m", 0.0, 50.0))
    q = np.array([10.0, 20.0, 20.0, 15.0, 30.0, 40.0, 50.0, 60.0])
    box.line(pump.head(q), q)
    _, (panel,), (trace,) = scene.records()
    v = values(trace, panel.axis("bottom"), panel.axis("left"))
    assert (np.diff(v.flow) > 0).all()
    assert len(v.flow) == 7
    np.testing.assert_allclose(v.value, pump.head(v.flow * 3600), rtol=1e-12)


def test_a_flow_axis_that_runs_backwards():
    scene = Scene()
    box = scene.box(("head", "m", 0.0, 50.0), flow=("flow", "m3/h", 200.0, 0.0))
    q = np.linspace(170, 10, 60)
    box.line(pump.head(q), q)
    _, (panel,), (trace,) = scene.records()
    v = values(trace, panel.axis("bottom"), panel.axis("left"))
    assert (np.diff(v.flow) > 0).all()
    np.testing.assert_allclose(v.value, pump.head(v.flow * 3600), rtol=1e-12)


def overshot(path=False):
    """A head line and an efficiency line whose ends run past the frame, as the ink of it does."""
    scene = Scene()
    box = scene.box(("head", "m", 0.0, 50.0), ("efficiency", "%", 0.0, 100.0))
    box.line(pump.head, (0.0, 200.0), path=path)
    box.line(pump.efficiency, (0.0, 180.0), axis="right")
    page, panels, traces = scene.records()
    longer = []
    for t in traces:
        start = t.flat[0] + np.c_[np.linspace(-3.0, -0.4, 6), np.linspace(2.0, 0.3, 6)]
        flat = np.r_[start, t.flat]
        n = len(flat)
        longer.append(replace(t, flat=flat, sigma=np.full(n, 0.1), flags=np.zeros(n, np.uint8)))
    return page, panels, tuple(longer)


@pytest.mark.parametrize("path", [False, True])
def test_no_line_leaves_its_box(path):
    page, panels, traces = overshot(path)
    curves, _, _ = identify(page, panels, traces)
    assert len(curves) == 2
    for curve in curves:
        assert curve.flow_si.min() >= 0.0
        assert curve.value_si.min() >= 0.0
        assert path or len(curve.trace.flat) == len(curve.flow_si)
    if not path:
        assert curves[0].flow_si[0] == pytest.approx(0.0, abs=1e-12)
        assert curves[0].value_si[0] == pytest.approx(pump.head(0.0), rel=1e-3)
        assert (np.diff(curves[0].flow_si) > 0).all()


def test_a_line_that_the_user_drew_is_left_as_it_is():
    page, panels, traces = overshot()
    drawn = replace(traces[0], by="given")
    curves, _, _ = identify(page, panels, (drawn,))
    assert len(curves[0].flow_si) == len(drawn.flat)


def test_an_axis_whose_zero_is_a_hair_off_makes_no_negative_number():
    page, (panel,), traces = overshot()
    axes = tuple(replace(a, offset=a.offset - 1e-4 * a.slope) for a in panel.axes)
    moved = replace(panel, axes=axes)
    curves, _, _ = identify(page, (moved,), tuple(replace(t, panel=moved) for t in traces))
    assert len(curves) == 2
    for curve in curves:
        assert curve.flow_si.min() == 0.0
        assert (np.diff(curve.flow_si) > 0).all()
        assert curve.value_si.min() >= 0.0
