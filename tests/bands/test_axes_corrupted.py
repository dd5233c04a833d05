"""Axes read from numbers that were spoiled on purpose: wrong ones must not look right."""

from __future__ import annotations

import importlib.util
from pathlib import Path

import numpy as np
import pytest

from curvefit.calibrate.axes import scales

_spec = importlib.util.spec_from_file_location(
    "corrupted_axes", Path(__file__).with_name("corrupted_axes.py")
)
assert _spec is not None
assert _spec.loader is not None
spoiled = importlib.util.module_from_spec(_spec)
import sys  # noqa: E402

sys.modules["corrupted_axes"] = spoiled
_spec.loader.exec_module(spoiled)

SEEDS = 25


def _study(spoil, seeds: int = SEEDS, jitter: float = 0.05) -> dict[str, float]:
    """Shares of axes read right and wrong, with and without a warning."""
    count = {"right": 0, "right flagged": 0, "wrong": 0, "wrong flagged": 0, "none": 0}
    for seed in range(seeds):
        rng = np.random.default_rng(seed)
        drawn = [spoiled.random_scale(side, rng) for side in ("bottom", "left")]
        evidence = spoiled.drawn(drawn, rng, spoil=spoil, jitter=jitter)
        axes, _, findings = scales(evidence, "A", None)
        for s in drawn:
            axis = next((a for a in axes if a.side == s.side), None)
            if axis is None:
                count["none"] += 1
                continue
            right = np.abs(axis.value(np.array([0.0, 1.0])) - [s.low, s.high]).max() < 0.005 * (
                s.high - s.low
            )
            flagged = any(f.where.axis == axis.name and f.severity != "info" for f in findings)
            count[("right" if right else "wrong") + (" flagged" if flagged else "")] += 1
    total = 2 * seeds
    return {k: v / total for k, v in count.items()}


def test_clean_numbers_are_read_without_doubt():
    shares = _study(None)
    assert shares["right"] == 1.0


@pytest.mark.parametrize(
    ("spoil", "trusted", "silent"),
    [
        (spoiled.points_lost(1.0), 0.9, 0.0),
        (spoiled.points_lost(0.5), 0.9, 0.0),
        (spoiled.digits_changed(0.3), 0.7, 0.021),
        (spoiled.characters_lost(0.3), 0.7, 0.021),
        (spoiled.missing(0.5), 0.6, 0.0),
        (spoiled.both(spoiled.missing(0.4), spoiled.digits_changed(0.3)), 0.4, 0.021),
    ],
    ids=["points", "half the points", "digits", "characters", "missing", "missing and digits"],
)
def test_spoiled_numbers_are_right_or_in_doubt(spoil, trusted, silent):
    shares = _study(spoil)
    assert shares["wrong"] <= silent
    assert shares["right"] >= trusted


def test_a_common_loss_is_mostly_betrayed_by_the_print():
    """Every number loses its last figure: a progression cannot see it, its print can."""
    assert _study(spoiled.last_lost)["wrong"] < 0.25


def test_ends_of_the_scale_lie_within_the_uncertainty_claimed():
    """Ticks scattered by 0.1 px: the error in standard uncertainties, floor included, stays low."""
    z = []
    for seed in range(30):
        rng = np.random.default_rng(1000 + seed)
        s = spoiled.random_scale("left", rng)
        flow = spoiled.random_scale("bottom", rng)
        axes, _, _ = scales(spoiled.drawn([s, flow], rng), "A", None)
        axis = next(a for a in axes if a.side == "left")
        for t, true in ((0.0, s.low), (1.0, s.high)):
            g = np.array([1.0, t])
            u = float(np.sqrt(g @ axis.covariance @ g))
            z.append(abs(float(axis.value(np.array([t]))[0]) - true) / u)
            assert u < 0.001 * (s.high - s.low)
    assert np.mean(np.array(z) < 1.96) > 0.93
