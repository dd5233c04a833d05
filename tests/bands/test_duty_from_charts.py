"""From a drawn chart through the whole reader to the duty: the interval holds the true duty.

Charts of several looks and damages are read once each, and each pump works in many systems; the
systems of one chart share its errors, so the share of all cases scatters more than 300
independent ones would.
"""

import numpy as np
import pytest

from curvefit.duty import duty
from curvefit.duty.crossing import crossings
from curvefit.duty.liquid import Liquid
from curvefit.duty.system import System
from curvefit.pipeline import read_chart
from curvefit.units import unit
from tests.recover.chart_harness import chart, write_chart

WATER = Liquid("water", 998.2, 1e-6, 2339.0)
CASES = 300
DRAWN = [
    *[(seed, "vector", "clean", True) for seed in range(900, 908)],
    *[(seed, "plotted", "scan", False) for seed in range(908, 912)],
    *[(seed, "inked", "scan", False) for seed in range(912, 914)],
    *[(seed, "inked", "clean", False) for seed in range(914, 916)],
]


def true_head(truth):
    """The true head curve of a single chart, SI."""
    curve = next(c for c in truth["panels"][0]["curves"] if c["quantity"] == "head")
    flow, value = unit(curve["flow_unit"]).factor, unit(curve["unit"]).factor
    return np.array(curve["flow"]) * flow, np.array(curve["value"]) * value


@pytest.fixture(scope="module")
def heads(tmp_path_factory):
    """Fit and true points of each chart's head; a chart whose head is not read is None."""
    found = []
    for seed, look, damage, as_pdf in DRAWN:
        drawn = chart("single", seed, look=look, damage=damage, as_pdf=as_pdf)
        path = write_chart(drawn, tmp_path_factory.mktemp("drawn"))
        fits = [f for f in read_chart(path).fits if f.curve.quantity == "head"]
        found.append((fits[0], *true_head(drawn.truth)) if len(fits) == 1 else None)
    return found


@pytest.mark.slow
def test_the_true_duty_lies_in_the_stated_interval(heads):
    read = [h for h in heads if h is not None]
    assert len(read) >= 0.9 * len(heads)
    rng, held = np.random.default_rng(11), []
    while len(held) < CASES:
        fit, flow, head = read[len(held) % len(read)]
        q = rng.uniform(0.25, 0.9) * flow[-1]
        at = float(np.interp(q, flow, head))
        static = rng.uniform(0.1, 0.8) * at
        k = (at - static) / q**2
        found = crossings(
            lambda f, x=flow, y=head: np.interp(f, x, y),
            lambda f, s=static, c=k: s + c * f**2,
            flow[0],
            flow[-1],
        )
        points = duty([fit], System(static, WATER, k), draws=2000).points
        if len(found) != 1 or len(points) != 1:
            continue
        (true,), (point,) = found, points
        held.append(
            (
                point.flow_si.low <= true.flow <= point.flow_si.high,
                point.head_si.low <= true.head <= point.head_si.high,
            )
        )
    assert (np.mean(held, axis=0) >= 0.93).all(), np.mean(held, axis=0)
