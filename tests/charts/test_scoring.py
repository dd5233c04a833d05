"""The scorer itself: a perfect reading passes, each planted fault is named."""

from dataclasses import replace

import numpy as np
import pytest
from chart_harness import chart, page_of
from scoring import LENGTH, SPEED, score, truths

from curvefit.records import Curve, Reading


def perfect(drawn):
    """A reading that holds exactly the truth."""
    curves = []
    for k, t in enumerate(truths(drawn.truth)):
        spec = t.spec
        curves.append(
            Curve(
                f"curve {k}", spec["quantity"], t.flow, t.value, spec["flow_unit"], spec["unit"],
                sigma_si=np.full(len(t.flow), 1e-3 * t.value.max()),
                diameter_si=spec["diameter"] and spec["diameter"] * LENGTH[spec["diameter_unit"]],
                speed_si=spec["speed"] and spec["speed"] * SPEED[spec["speed_unit"]],
                level_si=spec["level"] and spec["level"] / 100,
            )
        )  # fmt: skip
    return Reading(page_of(drawn), curves=tuple(curves))


@pytest.mark.parametrize("kind", ["family", "quad", "hill", "inches", "speeds", "logs"])
def test_a_perfect_reading_has_no_failures(kind):
    drawn = chart(kind, 91)
    got = score(drawn.truth, perfect(drawn))
    assert got.failures(rms=1e-6, ends=1e-6) == []
    assert all(m.held == 1.0 for m in got.matches if np.isfinite(m.held))


def _changed(k, **fields):
    drawn = chart("family", 92)
    reading = perfect(drawn)
    curves = list(reading.curves)
    curves[k] = replace(curves[k], **fields)
    return drawn, replace(reading, curves=tuple(curves))


@pytest.mark.parametrize(
    ("fields", "word"),
    [
        ({"quantity": "npsh_required"}, "read as"),
        ({"unit": "kPa"}, "in "),
        ({"diameter_si": 0.9}, "label"),
        ({"diameter_si": None}, "label"),
    ],
)
def test_a_wrong_field_is_named(fields, word):
    drawn, reading = _changed(1, **fields)
    failures = score(drawn.truth, reading).failures(rms=1e-6, ends=1e-6)
    assert len(failures) == 1
    assert word in failures[0]


def test_a_missing_a_moved_and_an_invented_curve_are_named():
    drawn = chart("family", 92)
    reading = perfect(drawn)
    first, *rest = reading.curves
    gone = score(drawn.truth, replace(reading, curves=tuple(rest)))
    assert ["not found" in f for f in gone.failures(1e-6, 1e-6)] == [True]
    moved = replace(first, value_si=first.value_si + 0.004 * first.value_si.max())
    off = score(drawn.truth, replace(reading, curves=(moved, *rest)))
    assert ["rms" in f for f in off.failures(1e-3, 1e-3)] == [True]
    assert off.matches[0].held < 1.0
    more = replace(first, name="ghost", value_si=first.value_si * 0.3)
    false = score(drawn.truth, replace(reading, curves=(*reading.curves, more)))
    assert false.failures(1e-6, 1e-6) == ["ghost: no such curve"]
