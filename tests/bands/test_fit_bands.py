"""Bands of fits hold the truth as often as they say, over hundreds of invented curves."""

import numpy as np
import pytest

from curvefit.fit import Choice, fit_curve
from tests.bands.invented import Bank, invent

QUANTITIES = ("head", "efficiency", "shaft_power", "npsh_required")
CURVES = 500


@pytest.fixture(scope="module")
def bank():
    return Bank(500)


@pytest.fixture(scope="module")
def drawn(bank):
    rng = np.random.default_rng(20240)
    return [invent(QUANTITIES[k % 4], rng, bank) for k in range(CURVES)]


def inside(band, at, true):
    low = np.interp(at, band.flow_si, band.low_si)
    high = np.interp(at, band.flow_si, band.high_si)
    return (low <= true) & (true <= high)


def test_pointwise_bands_hold_the_truth(drawn):
    rows = []
    for one in drawn:
        fit = fit_curve(one.curve)
        flow = one.curve.flow_si
        error = np.interp(flow, fit.band.flow_si, fit.band.value_si) - one.true
        rms = np.sqrt(np.mean(error**2)) / one.span
        rows.append((inside(fit.band, flow, one.true).mean(), rms))
    held, rms = np.array(rows).T
    assert 0.93 <= held.mean() <= 0.975
    for k in range(4):  # each quantity by itself, with the scatter of a quarter of the curves
        assert 0.90 <= held[k::4].mean() <= 0.985, QUANTITIES[k]
    assert np.median(rms) < 0.001
    assert rms.max() < 0.005


def test_simultaneous_bands_hold_the_whole_curve(drawn):
    rng = np.random.default_rng(1)
    whole = []
    for one in drawn:
        fit = fit_curve(one.curve, Choice(kind="simultaneous"), rng=rng)
        whole.append(inside(fit.band, one.curve.flow_si, one.true).all())
    assert np.mean(whole) >= 0.93


def test_other_confidences_hold_as_often_as_they_say(drawn):
    held = [
        inside(
            fit_curve(one.curve, Choice(confidence=0.8)).band, one.curve.flow_si, one.true
        ).mean()
        for one in drawn[:300]
    ]
    assert 0.76 <= np.mean(held) <= 0.86


def test_without_the_axes_errors_the_band_fails(drawn):
    """The trace alone is not enough: what the axes add is what matters."""
    held = []
    for one in drawn[:200]:
        fit = fit_curve(one.curve)
        half = 1.96 * np.sqrt((fit.factors**2).sum(0))
        flow = one.curve.flow_si
        at = lambda row: np.interp(flow, fit.band.flow_si, row)  # noqa: B023, E731
        held.append((np.abs(at(fit.band.value_si) - one.true) <= at(half)).mean())
    assert np.mean(held) < 0.8


def test_bands_that_take_pixels_as_independent_fail(bank):
    """The naive band: ordinary least squares on every pixel, without errors of the axes."""
    rng = np.random.default_rng(7)
    held, ours = [], []
    for k in range(200):
        one = invent(QUANTITIES[k % 4], rng, bank, calibration=0.0)
        flow, value = one.curve.flow_si, one.curve.value_si
        t = 2 * (flow - flow[0]) / np.ptp(flow) - 1
        q, _ = np.linalg.qr(np.polynomial.legendre.legvander(t, 4))
        fitted = q @ (q.T @ value)
        s2 = np.sum((value - fitted) ** 2) / (len(flow) - 5)
        half = 1.96 * np.sqrt(s2 * np.sum(q**2, axis=1))
        held.append((np.abs(fitted - one.true) <= half).mean())
        ours.append(inside(fit_curve(one.curve).band, flow, one.true).mean())
    assert np.mean(held) < 0.7
    assert 0.92 <= np.mean(ours) <= 0.985


def test_best_points_lie_in_their_intervals(bank):
    """Flow of the best point, first-order uncertainty: 95 % of intervals hold the true peak."""
    from curvefit.fit.derived import best_point

    rng = np.random.default_rng(12)
    held = []
    for _ in range(200):
        one = invent("efficiency", rng, bank)
        found = best_point(fit_curve(one.curve))
        top, step = int(np.argmax(one.true)), one.curve.flow_si[1] - one.curve.flow_si[0]
        if found is None or not 1 < top < len(one.true) - 2:
            continue
        before, at, after = one.true[top - 1 : top + 2]
        peak = one.curve.flow_si[top] + step * (before - after) / (2 * (before - 2 * at + after))
        held.append(abs(found.value - peak) <= 1.96 * found.u)
    assert len(held) > 150
    assert 0.90 <= np.mean(held) <= 0.995
