"""What must hold of any fit: it moves with its data, its units and its speed."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from curvefit.fit import Choice, fit, fit_curve
from curvefit.laws import at_speed_ratio, efficiency, shaft_power
from curvefit.models import (
    at_speed,
    evaluate,
    extrema,
    monotone_cubic,
    plain_from_legendre,
    power,
    power_gradient,
    rescale,
    rescale_covariance,
)
from curvefit.records import Curve

some = settings(deadline=None, max_examples=25)
coefficient = st.floats(-50, 50, allow_nan=False)
coefficients = st.lists(coefficient, min_size=1, max_size=7)
factor = st.floats(1e-3, 1e3)


def line(scale_flow=1.0, scale_value=1.0, lift=0.0, seed=0):
    rng = np.random.default_rng(seed)
    x = np.linspace(0.01, 1.2, 200)
    noise = np.convolve(rng.standard_normal(204), np.ones(5) / 5**0.5, "valid")
    value = 1.3 - 0.4 * x**2.2 + 1e-3 * noise
    u = np.full(200, 1e-3)
    return Curve("c", "head", x * scale_flow, value * scale_value + lift, "m3/h", "m",
                 sigma_si=u * scale_value, trace_sigma_si=u * scale_value)  # fmt: skip


@some
@given(flow=factor, value=factor)
def test_a_fit_scales_with_its_units(flow, value):
    one, other = fit_curve(line()), fit_curve(line(flow, value))
    np.testing.assert_allclose(other.band.flow_si, one.band.flow_si * flow, rtol=1e-9)
    for a, b in zip(
        (one.band.low_si, one.band.value_si, one.band.high_si),
        (other.band.low_si, other.band.value_si, other.band.high_si),
        strict=True,
    ):
        np.testing.assert_allclose(b, a * value, rtol=1e-6)
    assert one.degree == other.degree


@some
@given(lift=st.floats(-5, 5), seed=st.integers(0, 9))
def test_a_fit_moves_with_its_data(lift, seed):
    one, other = fit_curve(line(seed=seed)), fit_curve(line(lift=lift, seed=seed))
    np.testing.assert_allclose(other.band.value_si - lift, one.band.value_si, atol=1e-7)
    np.testing.assert_allclose(
        other.band.high_si - other.band.low_si, one.band.high_si - one.band.low_si, rtol=1e-5
    )


@some
@given(c=coefficients, flow=factor, value=factor)
def test_rescaled_coefficients_give_the_same_curve(c, flow, value):
    q = np.linspace(0, 2, 11)
    np.testing.assert_allclose(
        evaluate(rescale(c, flow, value), q / flow) * value,
        evaluate(c, q),
        rtol=1e-9,
        atol=1e-7,
    )
    np.testing.assert_allclose(
        rescale(rescale(c, flow, value), 1 / flow, 1 / value), c, rtol=1e-12, atol=1e-12
    )
    u = np.abs(c) + 1
    np.testing.assert_allclose(
        np.sqrt(np.diag(rescale_covariance(np.outer(u, u), flow, value))),
        rescale(u, flow, value),
        rtol=1e-9,
    )


@some
@given(c=coefficients, ratio=st.floats(0.4, 1.6))
def test_polynomials_obey_the_speed_law_exactly(c, ratio):
    q = np.linspace(0, 1.2, 9)
    for quantity, exponent in (("head", 2), ("shaft_power", 3), ("efficiency", 0)):
        moved = evaluate(at_speed(c, ratio, quantity), q * ratio)
        np.testing.assert_allclose(moved, evaluate(c, q) * ratio**exponent, rtol=1e-8, atol=1e-7)
    there = at_speed(at_speed(c, ratio, "head"), 1 / ratio, "head")
    np.testing.assert_allclose(there, c, rtol=1e-9, atol=1e-9)


@some
@given(ratio=st.floats(0.3, 2), flow=st.floats(0.001, 1), head=st.floats(1, 300),
       eta=st.floats(0.1, 0.9))  # fmt: skip
def test_efficiency_does_not_change_with_speed(ratio, flow, head, eta):
    moved = at_speed_ratio(flow, head, shaft_power(flow, head, eta), ratio)
    assert efficiency(*moved) == pytest.approx(eta, rel=1e-12)


@some
@given(
    c=st.lists(coefficient, min_size=7, max_size=7), low=st.floats(-1, 1), width=st.floats(0.5, 3)
)
def test_legendre_and_plain_coefficients_are_one_polynomial(c, low, width):
    q = np.linspace(low, low + width, 13)
    t = 2 * (q - low) / width - 1
    plain = plain_from_legendre(low, low + width, 6) @ np.array(c)
    np.testing.assert_allclose(
        evaluate(plain, q), np.polynomial.legendre.legval(t, c), atol=1e-7, rtol=1e-9
    )


@some
@given(a=st.floats(0.1, 0.9), b=st.floats(0.1, 0.9))
def test_turning_points_are_found(a, b):
    """The polynomial whose slope is (q − a)(q − b)."""
    found = extrema([0.0, a * b, -(a + b) / 2, 1 / 3], 0.0, 1.0)
    if abs(a - b) < 1e-3:
        return
    np.testing.assert_allclose(found, sorted((a, b)), atol=1e-7)


@some
@given(st.lists(st.floats(0, 1), min_size=4, max_size=9))
def test_monotone_cubics_stay_between_their_knots(steps):
    knots = np.arange(len(steps), dtype=float)
    values = np.cumsum(steps)
    between = monotone_cubic(knots, values, np.linspace(0, len(steps) - 1, 200))
    assert np.all(np.diff(between) >= -1e-9)


@some
@given(n=st.floats(0.5, 4), c=st.floats(-3, 3))
def test_power_gradient_is_the_derivative(n, c):
    q, h = np.linspace(0.1, 1, 7), 1e-6
    numbers = np.array([1.0, c, n])
    gradient = power_gradient(q, *numbers)
    for k in range(3):
        step = h * np.eye(3)[k]
        slope = (power(q, *(numbers + step)) - power(q, *(numbers - step))) / (2 * h)
        np.testing.assert_allclose(gradient[:, k], slope, atol=1e-6)


@some
@given(confidence=st.floats(0.55, 0.99))
def test_a_surer_band_is_wider(confidence):
    curve = line()
    one, more = (fit_curve(curve, Choice(confidence=c)) for c in (confidence, confidence + 0.005))
    assert np.all(more.band.high_si - more.band.low_si > one.band.high_si - one.band.low_si)


@settings(deadline=None, max_examples=120)
@given(
    n=st.integers(1, 90),
    seed=st.integers(0, 10_000),
    rough=st.sampled_from([0.0, 1e-6, 1e-2, 1.0]),
    u=st.sampled_from([0.0, 1e-9, 1e-3, 10.0]),
    quantity=st.sampled_from(["head", "efficiency", "shaft_power", "npsh_required"]),
    start=st.sampled_from([-0.02, 0.0, 0.3, 50.0]),
)
def test_any_line_gives_a_finite_fit(n, seed, rough, u, quantity, start):
    """Whatever a reader hands over, there is a curve with a band or a finding, never a crash."""
    rng = np.random.default_rng(seed)
    flow = start + np.cumsum(rng.uniform(1e-4, 0.05, n))
    value = rng.choice([0.0, 1.0, -3.0]) + np.cumsum(rough * rng.standard_normal(n))
    sigma = u * rng.choice([0.0, 1.0, 30.0], n)
    cause = None if seed % 2 else sigma[:, None] * rng.standard_normal(4)
    one = fit_curve(Curve("c", quantity, flow, value, "m3/h", "m", sigma_si=np.abs(sigma),
                          trace_sigma_si=np.abs(sigma), calibration_si=cause))  # fmt: skip
    assert np.isfinite(one.band.value_si).all()
    if n < 5:
        assert one.band.low_si is None
        assert {f.code for f in one.findings} == {"fit.few-points"}
    else:
        assert np.isfinite(one.band.low_si).all()
        assert np.all(one.band.low_si <= one.band.value_si)
        assert np.all(one.band.value_si <= one.band.high_si)
        # the equation follows the line as far as its band says
        at = np.interp(flow, one.band.flow_si, one.band.value_si)
        assert np.ptp(at) <= 20 * np.ptp(value) + 1e-6
    assert fit([one.curve])[0].name == "c"
