"""Physics checks proven both ways: an unspoilt set passes, each planted fault is named."""

from dataclasses import replace

import numpy as np
import pytest

from curvefit.check import check
from curvefit.records import Curve, Pump
from curvefit.units import G_N, RHO_WATER

FLOW = np.linspace(0.002, 0.045, 120)  # m³/s


def pump(scale: float = 1.0, diameter: float | None = None, share: float = 0.002) -> list[Curve]:
    """An invented pump whose power is exactly ρgQH/η; uncertainty: a share of each range."""
    flow = FLOW * scale
    x = FLOW / 0.03
    head = (40 - 12 * x**2.2) * scale**2
    eta = 0.78 * (1 - np.abs(1 - x) ** 1.9)
    power = RHO_WATER * G_N * flow * head / np.maximum(eta, 1e-3)
    npsh = 1.5 + 1.2 * x**2.4
    rows = (("head", head), ("efficiency", eta), ("shaft_power", power), ("npsh_required", npsh))
    return [
        Curve(
            q,
            q,
            flow,
            v,
            "m3/h",
            "1",
            sigma_si=np.full(len(v), share * np.ptp(v)),
            diameter_si=diameter,
        )
        for q, v in rows
    ]


def spoil(curves, quantity, **changes):
    return [
        replace(c, **{k: f(getattr(c, k)) for k, f in changes.items()})
        if c.quantity == quantity
        else c
        for c in curves
    ]


def codes(curves, **more):
    return {f.code for f in check(curves, (), **more)}


def test_a_good_pump_raises_nothing():
    assert codes(pump()) == set()
    family = [c for k, d in ((0.8, 0.2), (0.9, 0.225), (1.0, 0.25)) for c in pump(k, d)]
    assert codes(family) == set()


@pytest.mark.parametrize("quantity", ["head", "efficiency", "shaft_power"])
@pytest.mark.parametrize("factor", [0.95, 1.05, 0.7457, 10.0])
def test_a_wrong_scale_breaks_the_power_identity(quantity, factor):
    spoilt = spoil(pump(), quantity, value_si=lambda v: v * factor)
    assert "check.power-identity" in codes(spoilt)


def test_exchanged_scales_of_head_and_efficiency_break_the_power_identity():
    """A head of 0–50 m read on a scale of 0–100 %, and the efficiency on the head's."""
    for top in (10.0, 25.0, 60.0):
        spoilt = spoil(pump(), "head", value_si=lambda v, t=top: v * 100 / t)
        spoilt = spoil(spoilt, "efficiency", value_si=lambda v, t=top: v * t / 100)
        assert "check.power-identity" in codes(spoilt)


def test_an_efficiency_on_the_scale_of_another_axis_is_implausible():
    assert "check.implausible" in codes(spoil(pump(), "efficiency", value_si=lambda v: v * 0.05))
    alone = [c for c in pump() if c.quantity in ("head", "efficiency")]
    lifted = spoil(alone, "efficiency", value_si=lambda v: 0.3 + 0.5 * v)
    assert codes(lifted) == {"check.efficiency-shut-off"}


def test_an_npsh_on_the_scale_of_a_head_is_implausible():
    spoilt = spoil(pump(), "npsh_required", value_si=lambda v: v * 20)
    assert codes(spoilt) == {"check.implausible"}


def test_a_diameter_of_nothing_breaks_no_check():
    nothing = [c for c in pump(0.8, 0.0) + pump(1.0, 0.25) if c.quantity == "head"]
    assert codes(nothing) == set()


def test_the_finding_names_curve_number_and_cause():
    spoilt = spoil(pump(), "shaft_power", value_si=lambda v: v * 1.341)
    (finding,) = check(spoilt, ())
    assert finding.where.curve == "shaft_power"
    assert "0.746" in finding.message
    assert "kW and hp" in finding.message
    assert finding.remedy


def test_an_uncertain_reading_raises_no_alarm():
    spoilt = spoil(pump(share=0.03), "shaft_power", value_si=lambda v: v * 1.02)
    assert codes(spoilt) == set()


def test_another_liquid_is_no_fault_once_stated():
    brine = spoil(pump(), "shaft_power", value_si=lambda v: v * 1.2)
    assert "check.power-identity" in codes(brine)
    assert codes(brine, pumps=[Pump("1", density_si=1.2 * RHO_WATER)]) == set()


def test_overall_efficiency_never_pairs_with_shaft_power():
    other = [
        replace(c, quantity="overall_efficiency") if c.quantity == "efficiency" else c
        for c in pump()
    ]
    halved = spoil(other, "overall_efficiency", value_si=lambda v: v * 0.9)
    assert codes(halved) == set()


@pytest.mark.parametrize(
    ("quantity", "change", "code"),
    [
        ("head", lambda v: v[::-1], "check.head-rises"),
        ("npsh_required", lambda v: v[::-1], "check.npsh-falls"),
        ("efficiency", lambda v: v * 1.4, "check.efficiency-over-100"),
        ("efficiency", lambda v: np.linspace(0.8, 0.3, len(v)), "check.efficiency-falls"),
        ("head", lambda v: v - 40, "check.negative"),
    ],
)
def test_a_course_that_does_not_fit_its_quantity(quantity, change, code):
    assert code in codes(spoil(pump(), quantity, value_si=change))


def test_a_drooping_head_is_said_but_no_warning():
    drooping = spoil(pump(), "head", value_si=lambda v: v - 6 * np.exp(-FLOW / 0.005))
    (finding,) = [f for f in check(drooping, ()) if f.code == "check.unstable"]
    assert finding.severity == "info"


def test_swapped_diameters_are_named():
    family = [c for k, d in ((0.8, 0.2), (0.9, 0.25), (1.0, 0.225)) for c in pump(k, d)]
    heads = [c for c in family if c.quantity == "head"]
    assert codes(heads) == {"check.family"}


def test_speeds_scale_with_the_square():
    heads = [replace(pump(k)[0], speed_si=48.3 * k) for k in (0.7, 0.85, 1.0)]
    assert codes(heads) == set()
    wrong = [heads[0], replace(heads[1], speed_si=48.3 * 0.95), heads[2]]
    assert codes(wrong) == {"check.family"}
