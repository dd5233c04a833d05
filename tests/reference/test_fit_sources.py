"""Fits of measured points against certified values, textbook examples and other libraries."""

import re
from pathlib import Path

import numpy as np
import pytest
from scipy.interpolate import CubicSpline

from curvefit.errors import InputError
from curvefit.fit import Choice, fit_curve
from curvefit.fit.bands import working_hotelling
from curvefit.fit.measured import _design, _regress
from curvefit.fit.solve import least_squares
from curvefit.models import evaluate, rescale
from curvefit.records import Curve


def measured(x, y, quantity="flow"):
    """Points without an uncertainty: a table of measurements (no shape is expected of "flow")."""
    return Curve("points", quantity, np.asarray(x, float), np.asarray(y, float), "m3/s", "m")


def digits(found, certified):
    """Log relative error: the number of digits that agree."""
    error = np.abs(np.asarray(found) - certified) / np.abs(certified)
    return -np.log10(np.maximum(error, 1e-16)).min()


# --- NIST statistical reference datasets ------------------------------------------------------


def test_nist_norris():
    """NIST StRD Norris (linear, n 36), the file that the scipy wheel carries."""
    scipy_stats = pytest.importorskip("scipy.stats")
    folder = Path(scipy_stats.__file__).parent / "tests" / "data" / "nist_linregress"
    if not (folder / "Norris.dat").exists():
        pytest.skip("this build of scipy comes without its test data")
    lines = (folder / "Norris.dat").read_text().splitlines()
    y, x = np.array([line.split() for line in lines[60:96]], float).T
    number = r"[-+]?\d+\.\d+(?:E[-+]\d+)?"
    rows = [re.findall(number, line) for line in lines[30:46] if re.match(r"\s+B[01]", line)]
    (b0, s0), (b1, s1) = [tuple(map(float, row)) for row in rows]
    assert (b0, b1) == (-0.262323073774029, 1.00211681802045)
    fit = fit_curve(measured(x, y), Choice(degree=1))
    assert digits(fit.coefficients, [b0, b1]) >= 9
    assert digits(np.sqrt(np.diag(fit.covariance)), [s0, s1]) >= 9
    residual = fit.residual_rms_si * np.sqrt(36 / 34)
    assert residual == pytest.approx(0.884796396144373, rel=1e-9)


WAMPLER_STD = np.array(
    [
        2152.32624678170,
        2363.55173469681,
        779.343524331583,
        101.475507550350,
        5.64566512170752,
        0.112324854679312,
    ]
)


@pytest.mark.parametrize(("base", "need"), [(1.0, 9), (0.1, 9)])
def test_nist_wampler_exact(base, need):
    """NIST StRD Wampler 1 and 2: generated without noise, the certified deviations are zero."""
    x = np.arange(21.0)
    certified = base ** np.arange(6)
    fit = fit_curve(measured(x, evaluate(certified, x)), Choice(degree=5))
    assert digits(fit.coefficients, certified) >= need
    assert np.sqrt(np.diag(fit.covariance)).max() < 1e-6


def test_wampler_deviations_follow_from_its_design():
    """NIST StRD Wampler 3: the certified deviations, for its certified residual deviation.

    The noise vector is not carried by any package; the design alone gives the deviations.
    """
    x = np.arange(21.0)
    noise = np.random.default_rng(3).standard_normal(21)
    fit = fit_curve(measured(x, evaluate(np.ones(6), x) + noise), Choice(degree=5))
    s = fit.residual_rms_si * np.sqrt(21 / 15)
    deviations = np.sqrt(np.diag(fit.covariance)) / s * 2360.14502379268
    assert digits(deviations, WAMPLER_STD) >= 9


@pytest.mark.parametrize("size", [1.0, 100.0, 10000.0])
def test_noise_outside_the_model_leaves_the_coefficients(size):
    """The construction of Wampler 3–5: noise orthogonal to the model, growing a hundredfold."""
    x = np.arange(21.0)
    noise = np.random.default_rng(4).standard_normal(21)
    basis, _ = np.linalg.qr(np.vander(x - 10.0, 6))
    noise = 2000.0 * size * (noise - basis @ (basis.T @ noise))
    fit = fit_curve(measured(x, evaluate(np.ones(6), x) + noise), Choice(degree=5))
    assert digits(fit.coefficients, np.ones(6)) >= 6


def test_nist_longley():
    """NIST StRD Longley, data from the statsmodels wheel: six regressors, ill-conditioned."""
    longley = pytest.importorskip("statsmodels.api").datasets.longley.load()
    x, y = np.asarray(longley.exog, float), np.asarray(longley.endog, float)
    certified = np.array(
        [
            -3482258.63459582,
            15.0618722713733,
            -0.358191792925910e-01,
            -2.02022980381683,
            -1.03322686717359,
            -0.511041056535807e-01,
            1829.15146461355,
        ]
    )
    design = np.c_[np.ones(16), x]
    deviations = np.array(
        [
            890420.383607373,
            84.9149257747669,
            0.334910077722432e-01,
            0.488399681651699,
            0.214274163161675,
            0.226073200069370,
            455.478499142212,
        ]
    )
    free, root, residual = least_squares(lambda part: design[part], y)
    assert digits(free, certified) >= 6
    s = np.sqrt(residual @ residual / 9)
    assert digits(s, np.array([304.854073561965])) >= 9
    inverse = np.linalg.inv(root)
    assert digits(s * np.sqrt((inverse**2).sum(1)), deviations) >= 6


def test_nist_filip_is_refused_with_a_reason():
    """NIST StRD Filip is a polynomial of degree 10, beyond what a pump curve may need."""
    with pytest.raises(InputError, match="degree 10 is not possible"):
        Choice(degree=10)


# --- textbook examples ------------------------------------------------------------------------

# Montgomery & Runger, Applied Statistics and Probability for Engineers, 3rd ed., example 12-11
MONTGOMERY_X = [20, 25, 30, 35, 40, 50, 60, 65, 70, 75, 80, 90]
MONTGOMERY_Y = [1.81, 1.70, 1.65, 1.55, 1.48, 1.40, 1.30, 1.26, 1.24, 1.21, 1.20, 1.18]


def band_at(fit, x):
    i = int(np.argmin(np.abs(fit.band.flow_si - x)))
    assert fit.band.flow_si[i] == pytest.approx(x, abs=1e-9)
    return fit.band.low_si[i], fit.band.high_si[i]


def test_montgomery_and_runger_quadratic():
    """Example 12-11: printed 2.19826629 − 0.02252236x + 0.00012507x²; limits computed elsewhere."""
    curve = measured(MONTGOMERY_X, MONTGOMERY_Y)
    fit = fit_curve(curve, Choice(degree=2))
    np.testing.assert_allclose(
        fit.coefficients, [2.19826629, -0.0225223580, 0.000125065178], rtol=1e-8
    )
    np.testing.assert_allclose(
        np.sqrt(np.diag(fit.covariance)),
        [0.0225498226, 0.000942435096, 8.65769961e-06],
        rtol=1e-8,
    )
    x, low, high = fit.band.flow_si, fit.band.low_si, fit.band.high_si

    def at(rows):
        return float(CubicSpline(x, rows)(45.0))

    assert at(low) == pytest.approx(1.426159, abs=2e-6)
    assert at(high) == pytest.approx(1.449876, abs=2e-6)
    fit = fit_curve(curve, Choice(degree=2, kind="prediction"))
    low, high = fit.band.low_si, fit.band.high_si
    assert at(low) == pytest.approx(1.408002, abs=2e-6)
    assert at(high) == pytest.approx(1.468032, abs=2e-6)
    assert working_hotelling(0.95, 3, 9) == pytest.approx(3.404063, abs=1e-6)


# Kutner, Nachtsheim, Neter & Li, Applied Linear Statistical Models, 5th ed. 2005, table 1.1
# fmt: off
TOLUCA_X = [80, 30, 50, 90, 70, 60, 120, 80, 100, 50, 40, 70, 90, 20, 110, 100, 30, 50, 90, 110,
            30, 90, 40, 80, 70]
TOLUCA_Y = [399, 121, 221, 376, 361, 224, 546, 352, 353, 157, 160, 252, 389, 113, 435, 420, 212,
            268, 377, 421, 273, 468, 244, 342, 323]
# fmt: on


def test_toluca_line():
    """Chapters 1, 2: b0 62.366, b1 3.5702, MSE 2384, s{b1} 0.34697."""
    fit = fit_curve(measured(TOLUCA_X, TOLUCA_Y), Choice(degree=1))
    np.testing.assert_allclose(fit.coefficients, [62.36585859, 3.57020202], rtol=1e-8)
    np.testing.assert_allclose(
        np.sqrt(np.diag(fit.covariance)), [26.17743389, 0.34697216], rtol=1e-7
    )


@pytest.mark.parametrize(
    ("kind", "x", "low", "high"),
    [
        ("pointwise", 65, 277.43, 311.43),  # section 2.4, printed 277.4 … 311.4
        ("pointwise", 100, 394.93, 443.85),  # printed 394.9 … 443.9
        ("prediction", 100, 332.21, 506.56),  # section 2.5, printed 332.2 … 506.6
        ("simultaneous", 30, 131.154, 207.790),  # section 2.6, printed 131.2 … 207.8
        ("simultaneous", 65, 272.035, 316.823),  # printed 272.0 … 316.8
        ("simultaneous", 100, 387.159, 451.613),  # printed 387.2 … 451.6
    ],
)
def test_toluca_intervals(kind, x, low, high):
    """90 % limits of sections 2.4–2.6; the Working–Hotelling W is 2.258."""
    choice = Choice(degree=1, kind=kind, confidence=0.90)
    fit = fit_curve(measured(TOLUCA_X, TOLUCA_Y), choice)
    found = band_at(fit, x)
    assert found == pytest.approx((low, high), abs=6e-3)
    assert working_hotelling(0.90, 2, 23) == pytest.approx(2.258, abs=5e-4)


def test_gum_thermometer():
    """JCGM 100:2008, H.3: a calibration line with correlated intercept and slope."""
    # fmt: off
    t = [21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511]
    b = [-.171, -.169, -.166, -.159, -.164, -.165, -.156, -.157, -.159, -.161, -.160]
    # fmt: on
    choice = Choice(degree=1, extrapolate=(0.0, 10.0), confidence=0.95)
    fit = fit_curve(measured(np.array(t) - 20.0, b), choice)
    intercept, slope = fit.coefficients
    u = np.sqrt(np.diag(fit.covariance))
    assert (intercept, slope) == pytest.approx((-0.1712, 0.00218), abs=5e-5)
    assert u == pytest.approx([0.0029, 0.00067], abs=5e-5)
    assert fit.covariance[0, 1] / u.prod() == pytest.approx(-0.930, abs=5e-4)
    # the prediction at 30 °C, beyond the points, and its uncertainty: −0.1494, 0.0041
    assert fit.band.value_si[-1] == pytest.approx(-0.1494, abs=5e-5)
    gradient = np.array([1.0, 10.0])
    assert np.sqrt(gradient @ fit.covariance @ gradient) == pytest.approx(0.0041, abs=5e-5)
    half = (fit.band.high_si[-1] - fit.band.low_si[-1]) / 2
    assert half == pytest.approx(2.262157 * np.sqrt(gradient @ fit.covariance @ gradient), rel=1e-6)
    assert {f.code for f in fit.findings} == {"fit.extrapolated"}


# --- other libraries on the same data ---------------------------------------------------------


@pytest.fixture(scope="module")
def pump_test():
    """Measured points of an invented pump test."""
    rng = np.random.default_rng(11)
    x = np.sort(rng.uniform(0.0, 0.05, 17))
    return x, 40.0 + 60.0 * x - 9000.0 * x**2 + 0.15 * rng.standard_normal(17)


@pytest.mark.parametrize("degree", [1, 2, 3, 4])
@pytest.mark.filterwarnings("ignore")  # those of the other library
def test_bands_agree_with_statsmodels(pump_test, degree):
    """`statsmodels` OLS with get_prediction, confidence and prediction limits, to 1e-8."""
    sm = pytest.importorskip("statsmodels.api")
    x, y = pump_test
    ours = fit_curve(measured(x, y), Choice(degree=degree))
    new = fit_curve(measured(x, y), Choice(degree=degree, kind="prediction"))
    scaled = x / 0.05
    model = sm.OLS(y, np.vander(scaled, degree + 1, increasing=True)).fit()
    rows = np.vander(ours.band.flow_si / 0.05, degree + 1, increasing=True)
    theirs = model.get_prediction(rows).summary_frame(alpha=0.05)
    span = np.ptp(y)
    for ours_row, name in (
        (ours.band.value_si, "mean"),
        (ours.band.low_si, "mean_ci_lower"),
        (ours.band.high_si, "mean_ci_upper"),
        (new.band.low_si, "obs_ci_lower"),
        (new.band.high_si, "obs_ci_upper"),
    ):
        np.testing.assert_allclose(ours_row, theirs[name].to_numpy(), atol=1e-8 * span, rtol=0)
    np.testing.assert_allclose(rescale(ours.coefficients, 0.05, 1.0), model.params, rtol=1e-8)
    inverse = 0.05 ** -np.arange(degree + 1.0)
    expected = model.cov_params() * np.outer(inverse, inverse)
    np.testing.assert_allclose(ours.covariance, expected, rtol=1e-6)


@pytest.mark.filterwarnings("ignore")  # those of the other library
def test_bands_agree_with_lmfit(pump_test):
    """`lmfit` eval_uncertainty: half widths of confidence and prediction of a quadratic."""
    lmfit = pytest.importorskip("lmfit")
    x, y = pump_test
    model = lmfit.models.PolynomialModel(2)
    result = model.fit(
        y,
        model.guess(y, x=x / 0.05),
        x=x / 0.05,
        fit_kws={"ftol": 1e-15, "xtol": 1e-15, "gtol": 1e-15},
    )
    fit = fit_curve(measured(x, y), Choice(degree=2))
    new = fit_curve(measured(x, y), Choice(degree=2, kind="prediction"))
    half = result.eval_uncertainty(x=fit.band.flow_si / 0.05, sigma=0.95)
    span = np.ptp(y)
    np.testing.assert_allclose((fit.band.high_si - fit.band.low_si) / 2, half, atol=1e-8 * span)
    predicted = result.dely_predicted
    np.testing.assert_allclose(
        (new.band.high_si - new.band.low_si) / 2, predicted, atol=1e-8 * span
    )


@pytest.mark.filterwarnings("ignore")  # those of the other library
def test_power_form_agrees_with_lmfit():
    """H0 − a·Qⁿ against a general nonlinear least-squares library, values and deviations."""
    lmfit = pytest.importorskip("lmfit")
    rng = np.random.default_rng(5)
    q = np.linspace(0.002, 0.05, 25)
    y = 38.0 - 14.0 * (q / 0.05) ** 2.3 + 0.05 * rng.standard_normal(25)
    curve = Curve("points", "head", q, y, "m3/s", "m")
    fit = fit_curve(curve, Choice(family="power"))

    def form(x, h0, a, n):
        return h0 - a * x**n

    model = lmfit.Model(form)
    result = model.fit(y, x=q / 0.05, h0=38, a=14, n=2, fit_kws={"ftol": 1e-15, "xtol": 1e-15})
    assert fit.parameters["H0"] == pytest.approx(result.params["h0"].value, rel=1e-8)
    assert fit.parameters["n"] == pytest.approx(result.params["n"].value, rel=1e-7)
    n = fit.parameters["n"]
    assert fit.parameters["a"] * 0.05**n == pytest.approx(result.params["a"].value, rel=1e-7)
    u = np.sqrt(np.diag(fit.covariance))
    assert u[0] == pytest.approx(result.params["h0"].stderr, rel=1e-4)
    assert u[2] == pytest.approx(result.params["n"].stderr, rel=1e-4)


def test_regression_reproduces_numpy_on_held_terms():
    """Terms held at zero: the same as numpy's solver on the remaining columns."""
    x = np.linspace(1.0, 3.0, 12)
    y = 2.0 - 0.7 * x**2 + 0.01 * np.sin(9 * x)
    found = _regress(x, y, 2, (1,))
    direct, *_ = np.linalg.lstsq(np.c_[np.ones(12), x**2], y, rcond=None)
    fitted = _design(x, 1.0, 3.0, found.columns) @ found.free
    np.testing.assert_allclose(fitted, np.c_[np.ones(12), x**2] @ direct, rtol=1e-12)
    fit = fit_curve(measured(x, y), Choice(degree=2, without=(1,)))
    np.testing.assert_allclose(fit.coefficients, [direct[0], 0.0, direct[1]], atol=1e-12)
