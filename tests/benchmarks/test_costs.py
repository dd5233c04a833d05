"""What reading costs, as ratios to a reference measured in the same run.

The reference is fixed work of the same kind (blurring and sorting an array as large as a page),
so that the ratios mean the same on a slow machine. The limits are wide: they catch a change that
makes a stage several times dearer, not a busy machine. Run with `-s` to see the table.
"""

import sys
import time

import numpy as np
import pytest
from chart_harness import chart, write_chart
from command import curvefit

from curvefit.pipeline import STAGES, read_chart

#: largest cost in references (one is about 0.3 s on a common machine)
LIMITS = {"load": 15, "calibrate": 60, "trace": 40, "identify": 20, "fit": 20, "check": 10}
LIMIT_VECTOR = 30
LIMIT_HELP = 6
LIMIT_PEAK = 1250  # MiB


def reference() -> float:
    """Seconds of the fixed work; the best of three."""
    import cv2

    page = np.random.default_rng(0).random((3508, 2480)).astype(np.float32)
    best = np.inf
    for _ in range(3):
        start = time.perf_counter()
        cv2.GaussianBlur(page, (31, 31), 5.0)
        np.sort(page[:1200].ravel())
        best = min(best, time.perf_counter() - start)
    return best


@pytest.fixture(scope="module")
def unit():
    return reference()


@pytest.fixture(scope="module")
def page_300_dpi(tmp_path_factory):
    """A page of paper size at 300 dpi with a family of curves, text and a table."""
    drawn = chart("family", 71, "vector", "scan", dpi=300, setting="page", size=(468.0, 330.0))
    return write_chart(drawn, tmp_path_factory.mktemp("page"))


@pytest.mark.slow
def test_each_stage_of_a_page_costs_no_more_than_its_limit(page_300_dpi, unit):
    read_chart(page_300_dpi)  # imports and models are loaded once
    reading = read_chart(page_300_dpi)
    costs = {stage: reading.seconds[stage] / unit for stage in STAGES}
    print(f"\nreference {unit:.2f} s")
    for stage, cost in costs.items():
        print(f"{stage:10} {reading.seconds[stage]:6.2f} s  {cost:6.1f} of {LIMITS[stage]}")
    assert {s: c for s, c in costs.items() if c > LIMITS[s]} == {}


@pytest.mark.slow
def test_a_vector_page_costs_no_more_than_its_limit(tmp_path, unit):
    path = write_chart(chart("stacked", 72, as_pdf=True), tmp_path)
    read_chart(path)
    start = time.perf_counter()
    read_chart(path)
    cost = (time.perf_counter() - start) / unit
    print(f"\nvector page {cost:.1f} of {LIMIT_VECTOR}")
    assert cost < LIMIT_VECTOR


@pytest.mark.slow
def test_help_answers_at_once(unit):
    seconds = min(curvefit("--help").seconds for _ in range(3))
    start = time.perf_counter()
    import subprocess

    subprocess.run([sys.executable, "-c", "import json, subprocess"], check=True)
    empty = time.perf_counter() - start
    print(f"\nhelp {seconds:.2f} s; a process that does nothing {empty:.2f} s")
    assert (seconds - 2 * empty) / unit < LIMIT_HELP


@pytest.mark.slow
def test_the_peak_memory_of_a_read(page_300_dpi, tmp_path):
    ran = curvefit("read", page_300_dpi, "--out", tmp_path / "out")
    print(f"\npeak {ran.peak:.0f} MiB of {LIMIT_PEAK}")
    assert ran.code == 0, ran.err
    assert ran.peak < LIMIT_PEAK
