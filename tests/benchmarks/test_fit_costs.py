"""What fitting costs, as ratios to one ordinary least-squares fit of another library.

The limits are wide: they catch a change that makes a fit several times dearer, not a busy machine.
Run with `-s` to see the figures.
"""

import time

import numpy as np
import pytest

from curvefit.fit import Choice, fit_curve
from curvefit.fit.family import fit_family
from tests.bands.invented import Bank, invent
from tests.bands.test_families import N, chart

#: largest processor time [s], and largest ratio to the reference
CURVE, CURVE_RATIO = 0.050, 60
FAMILY, FAMILY_RATIO = 0.5, 1500


def cost(run, times=5):
    """Processor seconds of one call; the best of a few."""
    run()
    best = np.inf
    for _ in range(times):
        start = time.process_time()
        run()
        best = min(best, time.process_time() - start)
    return best


@pytest.fixture(scope="module")
def curve():
    return invent("head", np.random.default_rng(1), Bank(500)).curve


@pytest.fixture(scope="module")
def reference(curve):
    """Seconds of one fit with confidence and prediction intervals by statsmodels, same data."""
    sm = pytest.importorskip("statsmodels.api")
    x = np.vander(curve.flow_si / curve.flow_si[-1], 5, increasing=True)

    def run():
        sm.OLS(curve.value_si, x).fit().get_prediction(x).summary_frame(alpha=0.05)

    return cost(run)


def told(name, seconds, reference):
    print(
        f"\n{name}: {seconds * 1e3:.1f} ms, {seconds / reference:.1f} of {reference * 1e3:.1f} ms"
    )
    return seconds / reference


@pytest.mark.slow
def test_choosing_and_fitting_a_curve_of_500_points(curve, reference):
    seconds = cost(lambda: fit_curve(curve))
    assert told("curve", seconds, reference) < CURVE_RATIO
    assert seconds < CURVE
    whole = cost(lambda: fit_curve(curve, Choice(kind="simultaneous")))
    assert told("curve, simultaneous", whole, reference) < CURVE_RATIO


@pytest.mark.slow
def test_a_family_of_five(reference):
    curves = [c for c, _ in chart(np.random.default_rng(1), Bank(N))[0]]

    def run():
        family = fit_family(curves)
        family.at(0.195)
        family.leave_one_out()

    seconds = cost(run, 3)
    assert told("family of five, each left out once", seconds, reference) < FAMILY_RATIO
    assert seconds < FAMILY
