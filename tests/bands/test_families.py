"""Families: one diameter left out of a five-diameter chart is predicted within its own band."""

import numpy as np
import pytest

from curvefit.errors import ChartError
from curvefit.fit import fit_curve
from curvefit.fit.family import fit_family
from curvefit.fit.npsh import npsh_between
from curvefit.records import Curve
from tests.bands.invented import Bank

DIAMETERS = np.array([0.168, 0.181, 0.19, 0.202, 0.21])
N = 300


@pytest.fixture(scope="module")
def bank():
    return Bank(N)


def chart(rng, bank, quantity="head", wobble=0.0, calibration=2e-4, trace=1.5e-4):
    """Five curves that do not obey the nominal law: flow exponent 0.9–1.4, head 1.8–2.6,
    efficiency lost with trim; each with trace noise, all with the same errors of the axes."""
    flow_power, head_power = rng.uniform(0.9, 1.4), rng.uniform(1.8, 2.6)
    fall, power, droop = rng.uniform(8, 16), rng.uniform(1.7, 2.8), rng.uniform(0, 1.2)
    loss = rng.uniform(0.1, 0.5)
    shared = rng.standard_normal(4)
    curves = []
    for d in DIAMETERS:
        ratio = d / DIAMETERS[-1]
        flow_scale = 0.04 * ratio**flow_power * np.exp(wobble * rng.standard_normal())
        own = np.exp(wobble * rng.standard_normal())
        x = np.linspace(0.02, 1.25, N)
        if quantity == "head":
            true = ratio**head_power * own * (30 - fall * x**power - droop * np.exp(-x / 0.2))
            span, unit = 35.0, "m"
        else:
            rise = 1 - (1 - x / 1.9) ** 2.2
            true = 0.8 * (1 - loss * (1 - ratio)) * own * rise * (1 - 0.2 * x**2.6)
            span, unit = 1.0, "%"
        flow = x * flow_scale
        slope = np.gradient(true, flow)
        along, up = flow / 0.06, true / span
        causes = calibration * np.stack(
            [-slope * 0.06 * (1 - along), -slope * 0.06 * along, span * (1 - up), span * up], axis=1
        )
        stated = np.full(N, trace * span)
        value = true + stated * bank.draw(rng) + causes @ shared
        curve = Curve(
            f"{quantity} {d * 1e3:.0f}",
            quantity,
            flow,
            value,
            "m3/h",
            unit,
            flow_axis="A.bottom",
            value_axis="A.left",
            sigma_si=np.sqrt(stated**2 + (causes**2).sum(1)),
            trace_sigma_si=stated,
            calibration_si=causes,
            diameter_si=float(d),
            speed_si=2900 / 60,
            label=f"Ø{d * 1e3:.0f}",
        )
        curves.append((curve, true))
    return curves, (flow_power, head_power)


def predicted(curves, left):
    """Error as a share of the range and share inside the band, for the curve left out."""
    family = fit_family([c for i, (c, _) in enumerate(curves) if i != left])
    curve, true = curves[left]
    fit = family.at(curve.diameter_si)
    at = (curve.flow_si >= fit.band.flow_si[0]) & (curve.flow_si <= fit.band.flow_si[-1])
    assert at.mean() > 0.9
    flow, true = curve.flow_si[at], true[at]
    low, value, high = (
        np.interp(flow, fit.band.flow_si, row)
        for row in (fit.band.low_si, fit.band.value_si, fit.band.high_si)
    )
    rms = np.sqrt(np.mean((value - true) ** 2)) / np.ptp(true)
    return rms, np.mean((low <= true) & (true <= high)), fit, family


@pytest.mark.parametrize("quantity", ["head", "efficiency"])
def test_a_diameter_left_out_is_predicted(bank, quantity):
    rng = np.random.default_rng(31)
    rows = [predicted(chart(rng, bank, quantity)[0], k % 5)[:2] for k in range(25)]
    rms, held = np.array(rows).T
    assert np.median(rms) < 0.001
    assert rms.max() < 0.005
    assert np.mean(held > 0.5) == 1.0
    assert held.mean() >= 0.95


def test_a_family_that_departs_from_every_law_says_so(bank):
    """Each curve off by half a per cent of its own: the band between them must grow to hold it."""
    rng = np.random.default_rng(32)
    rows = [predicted(chart(rng, bank, wobble=0.005)[0], 1 + k % 3) for k in range(25)]
    held = [r[1] for r in rows]
    widths = [np.mean(r[2].band.high_si - r[2].band.low_si) for r in rows]
    exact = predicted(chart(rng, bank)[0], 2)[2]
    assert np.mean(held) >= 0.90
    assert np.median(widths) > 3 * np.mean(exact.band.high_si - exact.band.low_si)


def test_exponents_are_found_with_their_intervals(bank):
    rng = np.random.default_rng(33)
    held = []
    for _ in range(30):
        curves, truth = chart(rng, bank)
        family = fit_family([c for c, _ in curves])
        (a, ua, na), (b, ub, nb) = family.exponents.values()
        assert (na, nb) == (1.0, 2.0)
        held += [abs(a - truth[0]) <= 1.96 * ua, abs(b - truth[1]) <= 1.96 * ub]
        assert ua < 0.02
        assert ub < 0.02
    assert np.mean(held) >= 0.93


def test_left_out_errors_are_reported_for_each_diameter(bank):
    curves, _ = chart(np.random.default_rng(34), bank)
    left = fit_family([c for c, _ in curves]).leave_one_out()
    assert [x.curve for x in left] == [c.name for c, _ in curves]
    assert [x.end for x in left] == [True, False, False, False, True]
    assert all(x.rms < 0.005 and x.largest >= x.rms for x in left)


def test_a_charted_diameter_gets_its_own_curve(bank):
    curves, _ = chart(np.random.default_rng(35), bank, wobble=0.01)
    family = fit_family([c for c, _ in curves])
    curve, true = curves[1]
    fit = family.at(curve.diameter_si)
    value = np.interp(curve.flow_si, fit.band.flow_si, fit.band.value_si)
    assert np.sqrt(np.mean((value - true) ** 2)) < 0.003 * np.ptp(true)
    from curvefit.models import evaluate

    np.testing.assert_allclose(
        evaluate(fit.coefficients, fit.band.flow_si), fit.band.value_si, rtol=1e-6
    )


def test_beyond_the_drawn_range_warns(bank):
    curves, _ = chart(np.random.default_rng(36), bank)
    family = fit_family([c for c, _ in curves])
    inside, outside = family.at(0.195), family.at(0.150)
    assert "family.beyond-drawn" not in {f.code for f in inside.findings}
    (said,) = [f for f in outside.findings if f.code == "family.beyond-drawn"]
    assert said.severity == "warning"
    assert "150 mm" in said.message
    assert "168 mm to 210 mm" in said.message
    with pytest.raises(ChartError, match="differ"):
        fit_family([curves[0][0], curves[0][0]])


def test_another_speed_follows_the_law_exactly(bank):
    curves, _ = chart(np.random.default_rng(37), bank)
    family = fit_family([c for c, _ in curves])
    slow, full = family.at(0.195, 2320 / 60), family.at(0.195)
    np.testing.assert_allclose(slow.band.flow_si, full.band.flow_si * 0.8)
    np.testing.assert_allclose(slow.band.value_si, full.band.value_si * 0.64)
    assert {f.code for f in slow.findings} == {"family.speed-law"}


def test_speeds_make_a_family_too(bank):
    """Curves of one impeller at five speeds: exponents 1 and 2 are found."""
    rng, curves = np.random.default_rng(38), []
    for speed in (24.0, 30.0, 36.0, 42.0, 48.0):
        ratio, x = speed / 48.0, np.linspace(0.02, 1.25, N)
        true = ratio**2 * (30 - 11 * x**2.2)
        u = np.full(N, 0.004)
        curves.append(
            Curve(f"{speed * 60:.0f}", "head", x * 0.04 * ratio, true + u * bank.draw(rng), "m3/h",
                  "m", sigma_si=u, trace_sigma_si=u, speed_si=speed)
        )  # fmt: skip
    family = fit_family(curves)
    (a, ua, _), (b, ub, _) = family.exponents.values()
    assert a == pytest.approx(1.0, abs=4 * ua + 1e-4)
    assert b == pytest.approx(2.0, abs=4 * ub + 1e-4)
    at = family.at(speed_si=39.0)
    true = (39 / 48) ** 2 * (30 - 11 * (at.band.flow_si / (0.04 * 39 / 48)) ** 2.2)
    assert np.max(np.abs(at.band.value_si - true)) < 0.005 * 30


def test_npsh_between_diameters_is_interpolated_without_a_law(bank):
    rng, fits = np.random.default_rng(39), []
    shift = {0.18: 0.25, 0.21: 0.0}
    for d, more in shift.items():
        x = np.linspace(0.1, 1.2, N)
        u = np.full(N, 0.002)
        value = 1.2 + more + 0.8 * x**2.3 + u * bank.draw(rng)
        curve = Curve(f"NPSHr {d}", "npsh_required", x * 0.04, value, "m3/h", "m", sigma_si=u,
                      trace_sigma_si=u, diameter_si=d, speed_si=48.0)  # fmt: skip
        fits.append(fit_curve(curve))
    middle = npsh_between(fits, 0.195)
    true = 1.325 + 0.8 * (middle.band.flow_si / 0.04) ** 2.3
    assert np.max(np.abs(middle.band.value_si - true)) < 0.01
    assert np.all((middle.band.low_si <= true) & (true <= middle.band.high_si))
    # the way of interpolating is a doubt of its own: wider between than at the drawn ones
    width = np.mean(middle.band.high_si - middle.band.low_si)
    assert width > 2 * np.mean(fits[0].band.high_si - fits[0].band.low_si)
    fast = npsh_between(fits, 0.21, 52.8)
    np.testing.assert_allclose(fast.band.flow_si[-1], 0.04 * 1.2 * 1.1)
    assert {f.code for f in fast.findings} == {"family.npsh-speed"}
    with pytest.raises(ChartError, match="too far"):
        npsh_between(fits, 0.21, 24.0)
    assert {f.code for f in npsh_between(fits, 0.15).findings} == {"family.beyond-drawn"}
