"""What a duty-point check costs, beside a reference measured in the same run.

Printed, with limits far above what is usual: a busy machine must not fail them.
"""

import time

import numpy as np

from curvefit.duty import duty
from curvefit.duty.liquid import Liquid
from curvefit.duty.losses import Fitting, Pipe
from curvefit.duty.system import System
from curvefit.fit import fit_curve
from tests.bands.invented import Bank, invent

WATER = Liquid("water", 998.2, 1e-6, 2339.0)


def best(run, times=5):
    shortest = np.inf
    for _ in range(times):
        start = time.perf_counter()
        run()
        shortest = min(shortest, time.perf_counter() - start)
    return shortest


def test_monte_carlo_and_a_whole_duty():
    rng = np.random.default_rng(5)
    one = invent("head", rng, Bank(300))
    fit = fit_curve(one.curve)
    head = float(one.true.mean())
    parts = (
        Pipe("main", 200.0, 0.1, roughness=1e-4),
        Fitting("valves", 3.0, 0.1, count=2),
    )
    system = System(0.8 * head, WATER, discharge_parts=parts, u_losses=0.05)
    reference = best(lambda: np.random.default_rng(1).standard_normal((20, 100_000)))
    cost = {n: best(lambda n=n: duty([fit], system, draws=n)) for n in (0, 100_000)}
    for draws, seconds in cost.items():
        ratio = seconds / reference
        print(f"duty, {draws} draws: {1e3 * seconds:.0f} ms, {ratio:.1f} × 2·10⁶ normal numbers")
    assert len(duty([fit], system, draws=0).points) == 1
    assert cost[100_000] < 60 * reference
