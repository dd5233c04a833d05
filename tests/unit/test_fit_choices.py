"""What the user may ask of a fit, and bad input told with its place."""

from dataclasses import replace

import numpy as np
import pytest
from curvefit_cli.fit import fit as fit_command

from curvefit.errors import ChartError, InputError, LimitError, OpenError
from curvefit.fit import Choice, fit, fit_curve, points
from curvefit.fit.bands import sup_t
from curvefit.fit.points import read_points
from curvefit.fit.quantiles import chi_square, f_quantile, normal_two_sided, t_two_sided
from curvefit.fit.speed import fit_at_speed
from curvefit.laws import shaft_power
from curvefit.models import evaluate, extrema, power
from curvefit.records import BUNDLED, Curve, Pump
from curvefit.write.fit_plots import leverage

FLOW = np.linspace(0.0, 0.05, 400)


def traced(quantity="head", true=None, u=0.004, seed=0, flow=FLOW, **more):
    """A traced curve with noise that is alike over a few points."""
    x = flow / 0.04
    value = 30 - 9 * x**2.3 if true is None else true
    rng = np.random.default_rng(seed)
    smooth = np.convolve(rng.standard_normal(len(flow) + 8), np.ones(9) / 3, "valid")
    sigma = np.full(len(flow), u)
    return Curve(quantity, quantity, flow, value + u * smooth, "m3/h", "m", sigma_si=sigma,
                 trace_sigma_si=sigma, **more)  # fmt: skip


def codes(one):
    return {f.code for f in one.findings}


# --- models asked for -------------------------------------------------------------------------


@pytest.mark.parametrize("degree", [1, 2, 3, 4, 5, 6])
def test_plain_coefficients_reproduce_the_curve(degree):
    one = fit_curve(traced(), Choice(degree=degree))
    assert one.degree == degree
    assert len(one.coefficients) == degree + 1
    value = evaluate(one.coefficients, one.band.flow_si)
    np.testing.assert_allclose(value, one.band.value_si, rtol=1e-6)


def test_a_degree_too_low_has_a_band_that_says_so():
    """The truth lies in the band of a straight line too: its doubt is part of the band."""
    true = 30 - 9 * (FLOW / 0.04) ** 2.3
    line = fit_curve(traced(), Choice(degree=1))
    held = (line.band.low_si <= np.interp(line.band.flow_si, FLOW, true)) & (
        np.interp(line.band.flow_si, FLOW, true) <= line.band.high_si
    )
    assert held.mean() > 0.9
    assert "fit.misses" in codes(line)
    assert "degree 1 was asked for" in line.reason


def test_power_form_of_a_traced_head():
    one = fit_curve(traced(u=0.002), Choice(family="power"))
    assert one.parameters["H0"] == pytest.approx(30, abs=0.02)
    assert one.parameters["n"] == pytest.approx(2.3, abs=0.02)
    assert one.parameters["a"] * 0.04**2.3 == pytest.approx(9, rel=0.01)
    u = np.sqrt(np.diag(one.covariance))
    assert abs(one.parameters["n"] - 2.3) < 4 * u[2]


def test_the_power_form_is_chosen_where_it_predicts_best():
    one = fit_curve(traced(u=0.002))
    assert one.family == "power"
    assert "predicts best" in one.reason
    criteria = {name: value for name, value, _ in one.candidates}
    assert min(criteria, key=criteria.get) == "power form"
    bent = fit_curve(traced(true=30 - 9 * (FLOW / 0.04) ** 2.3 - 2 * np.exp(-FLOW / 0.01)))
    assert bent.family == "polynomial"
    assert "power form" in {name for name, _, _ in bent.candidates}


def test_power_form_of_npsh():
    true = power(FLOW, 1.4, 1.1 / 0.04**2.1, 2.1)
    one = fit_curve(traced("npsh_required", true, u=0.001), Choice(family="power"))
    assert one.parameters["c0"] == pytest.approx(1.4, abs=0.01)
    assert one.parameters["n"] == pytest.approx(2.1, abs=0.03)


def test_a_form_that_does_not_fit_is_refused():
    flat = traced(true=np.full(400, 10.0) + 0.5 * np.sin(FLOW * 400))
    with pytest.raises(InputError, match="exponent"):
        fit_curve(flat, Choice(family="power"))


def test_a_piecewise_cubic_where_no_equation_serves():
    """A head curve with a sharp knee: no polynomial follows it."""
    true = np.where(FLOW < 0.035, 30 - 20 * FLOW, 29.3 - 900 * (FLOW - 0.035))
    one = fit_curve(traced(true=true, u=0.002))
    assert one.family == "piecewise"
    assert codes(one) == {"fit.piecewise"}
    value = np.interp(FLOW, one.band.flow_si, one.band.value_si)
    assert np.sqrt(np.mean((value - true) ** 2)) < 0.005 * np.ptp(true)
    assert np.all(np.diff(one.band.value_si) < 1e-3)
    forced = fit_curve(traced(true=true, u=0.002), Choice(family="polynomial"))
    assert forced.family == "polynomial"
    wide = np.mean(forced.band.high_si - forced.band.low_si)
    assert wide > np.mean(one.band.high_si - one.band.low_si)


def test_terms_can_be_held_at_zero():
    true = 0.8 * (1 - (1 - FLOW / 0.07) ** 2)
    one = fit_curve(traced("efficiency", true, u=2e-4), Choice(without=(0,)))
    assert one.coefficients[0] == 0.0
    assert abs(one.band.value_si[0]) < 1e-12
    straight = fit_curve(traced(), Choice(without=(1,), degree=4))
    assert straight.coefficients[1] == 0.0


def test_efficiency_runs_through_zero_where_the_line_does():
    true = 0.8 * (1 - (1 - FLOW / 0.07) ** 2.1)
    through = fit_curve(traced("efficiency", true, u=2e-4))
    assert through.coefficients[0] == 0.0
    lifted = fit_curve(traced("efficiency", true + 0.01, u=2e-4))
    assert lifted.band.value_si[0] == pytest.approx(0.01, abs=1e-3)


def test_wiggles_are_taken_out_where_the_line_allows():
    """A flat start with noise: a free polynomial turns several times, one turn fits as well."""
    true = 30 - 9 * (FLOW / 0.04) ** 5
    free = Choice(family="polynomial")
    shapes = [fit_curve(traced(true=true, u=0.02, seed=s), free) for s in range(12)]
    for one in shapes:
        turns = extrema(one.coefficients, *one.flow_range_si)
        assert len(turns) <= 1 or "fit.shape-free" in codes(one)
    assert any("fit.shape-held" in codes(one) for one in shapes)


def test_a_drooping_head_keeps_its_maximum():
    true = 30 - 9 * (FLOW / 0.04) ** 2 - 2 * np.exp(-FLOW / 0.006)
    one = fit_curve(traced(true=true, u=0.002))
    top = one.band.flow_si[np.argmax(one.band.value_si)]
    assert 0.005 < top < 0.02


def test_bundled_points_weigh_little():
    curve = traced(u=0.003)
    wrong = np.array(curve.value_si)
    wrong[150:220] += 0.4
    spoilt = replace(curve, value_si=wrong)
    sigma = np.array(curve.sigma_si)
    sigma[150:220] = 0.4
    flags = np.zeros(400, np.uint8)
    flags[150:220] = BUNDLED
    said = replace(spoilt, sigma_si=sigma, trace_sigma_si=sigma, flags=flags)
    clean, doubtful = fit_curve(curve), fit_curve(said)
    gap = np.abs(clean.band.value_si - doubtful.band.value_si).max()
    assert gap < 0.06
    assert gap < 0.5 * np.abs(clean.band.value_si - fit_curve(spoilt).band.value_si).max()


# --- bands ------------------------------------------------------------------------------------


def test_bands_are_named_and_ordered():
    rng = np.random.default_rng(3)
    point = fit_curve(traced())
    whole = fit_curve(traced(), Choice(kind="simultaneous"), rng=rng)
    surer = fit_curve(traced(), Choice(confidence=0.99))
    width = {
        name: np.mean(one.band.high_si - one.band.low_si)
        for name, one in (("point", point), ("whole", whole), ("surer", surer))
    }
    assert width["whole"] > 1.15 * width["point"]
    assert width["surer"] / width["point"] == pytest.approx(2.5758 / 1.95996, rel=1e-4)
    assert (point.band.kind, whole.band.kind) == ("pointwise", "simultaneous")


def test_the_axes_errors_are_kept_apart():
    causes = np.stack([0 * FLOW, 0 * FLOW, 0.01 * (1 - FLOW), 0.01 + FLOW], axis=1)
    curve = replace(traced(), calibration_si=causes)
    one = fit_curve(curve)
    np.testing.assert_allclose(
        one.calibration, [np.interp(one.band.flow_si, FLOW, c) for c in causes.T]
    )
    half = 1.959964 * np.sqrt((one.factors**2).sum(0) + (one.calibration**2).sum(0))
    np.testing.assert_allclose(one.band.high_si - one.band.value_si, half, rtol=1e-5)


def test_outside_the_range_only_when_asked_and_marked():
    inside = fit_curve(traced(flow=FLOW[80:]))
    assert inside.band.flow_si[0] == FLOW[80]
    outside = fit_curve(traced(flow=FLOW[80:]), Choice(extrapolate=(0.0, 0.06)))
    assert outside.band.flow_si[0] == 0.0
    assert outside.band.flow_si[-1] == 0.06
    assert outside.flow_range_si == (FLOW[80], FLOW[-1])
    assert codes(outside) == {"fit.extrapolated"}
    width = outside.band.high_si - outside.band.low_si
    assert width[0] > 3 * np.median(width)


def test_prediction_bands_are_for_measured_points_only():
    with pytest.raises(InputError, match="traced"):
        fit_curve(traced(), Choice(kind="prediction"))


def test_sup_t_of_one_cause_is_the_normal_quantile():
    """A single shared cause moves the whole curve: the maximum is that of one normal number."""
    rng = np.random.default_rng(4)
    assert sup_t(np.ones((1, 50)), 0.95, rng, 20000) == pytest.approx(1.96, abs=0.04)
    # sixty independent flows: P(max < c) = (2Φ(c) − 1)^60
    assert sup_t(np.eye(60), 0.95, rng, 20000) == pytest.approx(
        normal_two_sided(0.95 ** (1 / 60)), abs=0.05
    )


def test_quantiles_agree_with_scipy():
    from scipy import stats

    assert t_two_sided(0.95, 9) == pytest.approx(stats.t.ppf(0.975, 9), rel=1e-12)
    assert f_quantile(0.9, 2, 23) == pytest.approx(stats.f.ppf(0.9, 2, 23), rel=1e-12)
    assert chi_square(0.95, 3) == pytest.approx(stats.chi2.ppf(0.95, 3), rel=1e-12)


def test_leverage_is_the_diagonal_of_the_hat_matrix():
    """By its definition X(XᵀX)⁻¹Xᵀ; the sum is the number of terms, the lone end pulls most."""
    flow = np.array([0.0, 0.01, 0.02, 0.03, 0.05])
    found = leverage(flow, 2)
    x = np.vander(flow / 0.05, 3)
    np.testing.assert_allclose(found, np.diag(x @ np.linalg.inv(x.T @ x) @ x.T), rtol=1e-9)
    assert found.sum() == pytest.approx(3)
    assert found.argmax() == 4


# --- derived ----------------------------------------------------------------------------------


def test_derived_numbers_of_one_pump():
    q = FLOW[1:]
    head, eta = 30 - 9 * (q / 0.04) ** 2, 0.8 * (1 - (1 - q / 0.036) ** 2)
    curves = [
        traced("head", head, 0.001, flow=q),
        traced("efficiency", eta, 1e-4, flow=q),
        traced("npsh_required", 1.5 + (q / 0.04) ** 2, 0.001, flow=q),
    ]
    pump = Pump("1", speed_si=2900 / 60, suction_sides=2)
    found = {f.curve.quantity: f for f in fit(curves, pumps=(pump,))}
    best = found["head"].derived["bep"]
    assert best["flow_si"] == pytest.approx(0.036, abs=3 * best["u_flow_si"] + 2e-5)
    assert best["head_si"] == pytest.approx(30 - 9 * 0.81, abs=0.02)
    assert best["efficiency_si"] == pytest.approx(0.8, abs=1e-3)
    assert 0 < best["u_flow_si"] < 5e-4
    speeds = found["head"].derived["specific_speed"]
    h = 30 - 9 * 0.81
    assert speeds["nq"] == pytest.approx(2900 * 0.036**0.5 / h**0.75, rel=2e-3)
    assert speeds["us"] / speeds["nq"] == pytest.approx(51.645, abs=1e-3)
    npsh = 1.5 + 0.81
    assert speeds["suction"] == pytest.approx(2900 * 0.018**0.5 / npsh**0.75, rel=3e-3)
    assert "derived.stages-assumed" in codes(found["head"])
    assert "derived.eyes-assumed" not in codes(found["head"])
    assert found["head"].derived["shut_off"]["head_si"] == pytest.approx(30, abs=0.02)
    staged = fit(curves, pumps=(replace(pump, stages=4),))[0]
    assert staged.derived["specific_speed"]["nq"] == pytest.approx(speeds["nq"] * 4**0.75)


def test_a_best_point_from_head_and_power():
    """No efficiency curve: η = ρgQH/P, and the errors of the common flow axis count once."""
    q = FLOW[20:]
    head, eta = 30 - 9 * (q / 0.04) ** 2, 0.8 * (1 - (1 - q / 0.036) ** 2)
    power_ = shaft_power(q, head, eta)
    axis = np.zeros((len(q), 4))
    axis[:, 1] = -1e-4 * np.gradient(head, q)
    other = np.zeros((len(q), 4))
    other[:, 1] = -1e-4 * np.gradient(power_, q)
    curves = [
        traced("head", head, 1e-3, flow=q, calibration_si=axis, flow_axis="A.bottom",
               value_axis="A.left"),
        traced("shaft_power", power_, 0.5, flow=q, calibration_si=other, flow_axis="A.bottom",
               value_axis="A.right"),
    ]  # fmt: skip
    found = fit(curves)[0]
    best = found.derived["bep"]
    assert best["flow_si"] == pytest.approx(0.036, abs=3e-4)
    assert best["efficiency_si"] == pytest.approx(0.8, abs=2e-3)
    assert best["shaft_power_si"] == pytest.approx(shaft_power(0.036, 30 - 9 * 0.81, 0.8), rel=5e-3)
    # a shift δ of the flow axis moves H and P together but not the Q of ρgQH/P: by hand, the peak
    # of η(q + δ)·q/(q + δ) moves by δ/2 for this parabola
    assert best["u_flow_si"] == pytest.approx(0.5e-4, rel=0.02)
    assert "derived.efficiency-computed" in codes(found)


def test_no_best_point_where_the_peak_is_not_drawn():
    q = FLOW[:200]
    one = fit([traced("efficiency", 0.8 * (1 - (1 - q / 0.036) ** 2), 1e-4, flow=q)])[0]
    assert "bep" not in one.derived


@pytest.mark.parametrize("family", ["polynomial", "power", "piecewise"])
def test_a_fit_at_another_speed(family):
    """H(q) at r times the speed is r²·H(q/r), for every kind of equation."""
    curve = traced(speed_si=48.0)
    one = fit_curve(curve, Choice(family=family))
    slow = fit_at_speed(one, 38.4)
    again = fit_curve(
        replace(curve, flow_si=curve.flow_si * 0.8, value_si=curve.value_si * 0.64,
                sigma_si=curve.sigma_si * 0.64, trace_sigma_si=curve.trace_sigma_si * 0.64),
        Choice(family=family),
    )  # fmt: skip
    np.testing.assert_allclose(slow.band.value_si, again.band.value_si, rtol=1e-6)
    np.testing.assert_allclose(slow.band.low_si, again.band.low_si, rtol=1e-5)
    if family == "polynomial":
        np.testing.assert_allclose(
            evaluate(slow.coefficients, slow.band.flow_si), slow.band.value_si, rtol=1e-9
        )
    if family == "power":
        assert slow.parameters == pytest.approx(again.parameters, rel=1e-5)
    assert {f.code for f in slow.findings} - codes(one) == {"family.speed-law"}
    with pytest.raises(ChartError, match="speed"):
        fit_at_speed(fit_curve(traced()), 40.0)


# --- bad input --------------------------------------------------------------------------------


def test_too_few_points_come_back_as_they_are():
    few = traced(flow=FLOW[:3])
    (one,) = fit([few])
    assert codes(one) == {"fit.few-points"}
    assert one.band.low_si is None
    np.testing.assert_array_equal(one.band.value_si, few.value_si)


def test_iso_lines_are_passed_over():
    line = Curve("70", "iso_efficiency", FLOW[:9], FLOW[:9], "m3/h", "m", level_si=0.7)
    assert fit([line]) == ()


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ({"value_si": lambda v: np.where(np.arange(400) == 7, np.nan, v)}, "point 8 .* no value"),
        ({"flow_si": lambda q: np.where(np.arange(400) == 7, np.inf, q)}, "point 8 .* no flow"),
        ({"flow_si": lambda q: np.where(np.arange(400) == 7, 0.0, q)}, "not increase at point 8"),
        ({"sigma_si": lambda u: -u}, "uncertainty"),
    ],
)
def test_curves_that_cannot_be_are_refused_with_the_place(change, said):
    curve = traced()
    spoilt = replace(curve, **{k: f(getattr(curve, k)) for k, f in change.items()})
    with pytest.raises(ChartError, match=said):
        fit_curve(spoilt)


def test_a_constant_line_is_fitted_as_one():
    one = fit_curve(traced(true=np.full(400, 12.0)))
    np.testing.assert_allclose(one.band.value_si, 12.0, atol=0.01)
    exact = Curve("flat", "head", FLOW, np.full(400, 12.0), "m3/h", "m", sigma_si=np.zeros(400))
    assert np.ptp(fit_curve(exact).band.value_si) < 1e-9


def test_a_degree_higher_than_the_points_carry():
    few = traced(flow=FLOW[::50])
    with pytest.raises(InputError, match="degree 6 needs at least 10 points"):
        fit_curve(few, Choice(degree=6))
    measured = replace(few, sigma_si=None, trace_sigma_si=None)
    with pytest.raises(InputError, match="degree 6 needs 7 different flows"):
        fit_curve(replace_points(measured, 5), Choice(degree=6))
    with pytest.raises(InputError, match="degree 7 is not possible"):
        Choice(degree=7)
    exact = fit_curve(replace_points(measured, 4), Choice(degree=3))
    assert exact.band.low_si is None
    assert "fit.no-band" in codes(exact)


def replace_points(curve, n):
    return Curve("few", "head", curve.flow_si[:n], curve.value_si[:n], "m3/h", "m")


def test_one_flow_repeated():
    with pytest.raises(ChartError, match="1 different flow"):
        fit_curve(Curve("p", "head", np.full(5, 0.01), np.arange(5.0), "m3/h", "m"))


def test_a_million_points_are_fitted_in_little_memory():
    import tracemalloc

    flow = np.linspace(0, 0.05, 1_000_000)
    curve = Curve("many", "head", flow, 30 - 9e3 * flow**2, "m3/h", "m")
    tracemalloc.start()
    one = fit_curve(curve, Choice(degree=2))
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert one.coefficients[2] == pytest.approx(-9e3, rel=1e-8)
    assert peak < 150e6


# --- a CSV of measured points -----------------------------------------------------------------


def csv(folder, text, name="points.csv"):
    path = folder / name
    path.write_text(text, encoding="utf-8")
    return path


def test_points_with_a_row_of_units(tmp_path):
    head, eta = read_points(csv(tmp_path, "flow,head,efficiency\nl/s,ft,%\n10,100,60\n20,,70\n"))
    np.testing.assert_allclose(head.flow_si, [0.01])
    np.testing.assert_allclose(head.value_si, [30.48])
    np.testing.assert_allclose(eta.value_si, [0.6, 0.7])
    assert (head.flow_unit, head.unit, head.sigma_si) == ("L/s", "[ft_i]", None)


@pytest.mark.parametrize(
    "text",
    [
        "Q [m3/h];H [m]\n36;20,5\n72;18,25\n",
        "Q [m3/h]\tH [m]\n36\t20.5\n72\t18.25\n",
        "﻿flow,head\r\nm³/h,m\r\n72,18.25\r\n36,20.5\r\n",
    ],
)
def test_points_in_other_dialects(tmp_path, text):
    (curve,) = read_points(csv(tmp_path, text))
    np.testing.assert_allclose(curve.flow_si, [0.01, 0.02])
    np.testing.assert_allclose(curve.value_si, [20.5, 18.25])


def test_points_take_units_from_options_and_part_by_diameter(tmp_path):
    path = csv(tmp_path, "flow,head,diameter\n36,20,200\n72,18,200\n36,22,210\n")
    curves = read_points(path, {"flow": "m3/h", "head": "m"})
    assert [c.diameter_si for c in curves] == pytest.approx([0.2, 0.21])
    assert [len(c.flow_si) for c in curves] == [2, 1]


@pytest.mark.parametrize(
    ("text", "said", "line"),
    [
        ("flow,head\nm3/h,m\n1,2\n2,nan\n", "'nan' is no number", 4),
        ("flow,head\nm3/h,m\n1,2\n2,about 3\n", "'about 3' is no number", 4),
        ("flow,head\nm3/h,m\n1,2\n2,9 ft\n", "'9 ft' is no number", 4),
        ("flow,head\nm3/h,m\n,2\n", "flow is missing", 3),
        ("flow,head\n1,2\n", "unit of 'flow' is not given", 1),
        ("flow,head\nm3/h,kW\n1,2\n", "kW", 2),
        ("flow,head\nm3/h,furlong\n1,2\n", "furlong", 2),
        ("flow,hed\nm3/h,m\n1,2\n", "'hed' is not known", 1),
        ("flow,head,head\nm3/h,m,m\n1,2,3\n", "two columns of head", 1),
        ("head\nm\n1\n", "a column of flow", 1),
        ("", "no header", 1),
        ("flow,head\nm3/h,m\n", "no points", None),
        ("pump,curve,quantity,flow,value\n", "curvefit wrote", 1),
    ],
)
def test_points_that_cannot_be_read_name_line_and_column(tmp_path, text, said, line):
    path = csv(tmp_path, text)
    with pytest.raises(InputError, match=said) as caught:
        read_points(path)
    assert caught.value.where.file == str(path)
    assert caught.value.where.line == line
    assert caught.value.exit_code == 2


def test_points_no_file_no_text_too_many(tmp_path, monkeypatch):
    with pytest.raises(OpenError, match="cannot be read"):
        read_points(tmp_path / "missing.csv")
    (tmp_path / "latin.csv").write_bytes(b"flow,h\xe9ad\n")
    with pytest.raises(OpenError, match="UTF-8"):
        read_points(tmp_path / "latin.csv")
    monkeypatch.setattr(points, "MOST_ROWS", 3)
    with pytest.raises(LimitError, match="more than 3 rows"):
        read_points(csv(tmp_path, "flow,head\nm3/h,m\n" + "1,2\n" * 6))


def test_many_rows_are_read_in_bounded_memory(tmp_path):
    """Eight bytes a number and no more: a million rows take ten times this."""
    import tracemalloc

    path = csv(tmp_path, "flow,head\nm3/h,m\n" + "12.5,31.25\n" * 100_000)
    tracemalloc.start()
    (curve,) = read_points(path)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert len(curve.flow_si) == 100_000
    assert peak < 20e6


def test_the_command_has_an_example():
    assert "Example: curvefit fit" in fit_command.__doc__
