"""Affinity laws and specific speeds against published examples; the source stands beside each."""

import numpy as np
import pytest

from curvefit.laws import (
    NQ_TO_TYPE_NUMBER,
    NQ_TO_US,
    at_speed_ratio,
    efficiency,
    hydraulic_power,
    npsh_available,
    shaft_power,
    specific_speed,
    suction_specific_speed,
    type_number,
    us_specific_speed,
)
from curvefit.models import at_speed, evaluate
from curvefit.units import to_si

GPM, FT, HP = "[gal_us]/min", "[ft_i]", "[HP]"


def test_crane_example_of_another_speed():
    """Crane TP-410 (2009), example 7-33: 400 gpm, 126 ft, 17.5 hp at 3500 → 1700 1/min."""
    q, h, p = at_speed_ratio(400.0, 126.0, 17.5, 1700 / 3500)
    assert q == pytest.approx(194.2857, rel=1e-6)
    assert h == pytest.approx(29.7257, rel=1e-5)
    assert p == pytest.approx(2.00531, rel=1e-5)


def test_doe_handbook_example_of_another_speed():
    """DOE-HDBK-1012/3-92, HT-03 p. 50: 400 gpm (→ 800 printed), 48 ft, 45 kW; 1800 → 3600."""
    assert at_speed_ratio(400.0, 48.0, 45.0, 2.0) == (800.0, 192.0, 360.0)


def test_fox_and_mcdonald_specific_speed():
    """Fox & McDonald, example 10.6: 300 gpm, 21.9 ft, 1170 1/min → N_s 2000 (2001.8 computed)."""
    flow, head, speed = to_si(300.0, GPM), to_si(21.9, FT), 1170 / 60
    assert us_specific_speed(speed, flow, head) == pytest.approx(2001.8, abs=0.1)
    # the printed 0.7323 takes g = 9.81 m/s²
    assert type_number(speed, flow, head) * (9.80665 / 9.81) ** 0.75 == pytest.approx(
        0.7323, abs=5e-5
    )
    assert specific_speed(speed, flow, head) == pytest.approx(38.760, abs=5e-4)


def test_fox_and_mcdonald_curve_at_another_speed():
    """Fox & McDonald, example 10.7: shut-off 25 ft and (300 gpm, 21.9 ft) at 1170 → 1750 1/min."""
    drop = (25.0 - 21.9) / 300.0**2
    moved = at_speed([25.0, 0.0, -drop], 1750 / 1170, "head")
    assert moved[0] == pytest.approx(55.9299, abs=1e-4)
    assert moved[2] == pytest.approx(-3.4444e-5, rel=1e-4)
    assert pytest.approx(448.718, abs=1e-3) == 300 * 1750 / 1170
    assert evaluate(moved, 300 * 1750 / 1170) == pytest.approx(48.9946, abs=1e-4)


def test_specific_speed_agrees_with_fluids():
    """The `fluids` library, whose example cites ANSI/HI 1.3: 22.50823182748925."""
    import fluids

    ours = specific_speed(3550 / 60, 0.0402, 100.0)
    assert ours == pytest.approx(22.50823182748925, rel=1e-14)
    # that library takes 1/min and gives the metric number
    assert ours == pytest.approx(fluids.specific_speed(0.0402, 100.0, 3550.0), rel=1e-12)


def test_conversions_between_specific_speeds():
    """Gülich, *Centrifugal Pumps*: 51.64–51.65; with g_n the type number is n_q / 52.919."""
    assert pytest.approx(51.6452379, rel=1e-8) == NQ_TO_US
    assert pytest.approx(52.91903, rel=1e-6) == 1 / NQ_TO_TYPE_NUMBER
    assert pytest.approx(2733.016, rel=1e-6) == NQ_TO_US / NQ_TO_TYPE_NUMBER


def test_suction_specific_speed_takes_the_flow_of_one_eye():
    """A teaching page: 3560 1/min, 800 gpm double suction, NPSHr 18 ft → 8148 printed."""
    nss = suction_specific_speed(3560 / 60, to_si(800.0, GPM) / 2, to_si(18.0, FT)) * NQ_TO_US
    assert nss == pytest.approx(8148, abs=1)


def test_power_identity():
    """Computed with IAPWS-95 water at 20 °C: 100 m³/h, 32 m, η 0.75 → 11.601859 kW."""
    p = shaft_power(100 / 3600, 32.0, 0.75, 998.20715)
    assert p == pytest.approx(11601.859, rel=1e-7)
    assert efficiency(100 / 3600, 32.0, p, 998.20715) == pytest.approx(0.75)


def test_crane_example_of_shaft_power():
    """Crane TP-410, example 7-34: 700 gpm, 428 ft, 62.364 lb/ft³, η 0.707 → 107.056 hp."""
    rho = to_si(62.364, "[lb_av]/[ft_i]3")
    power = hydraulic_power(to_si(700.0, GPM), to_si(428.0, FT), rho) / 0.707
    assert power / to_si(1.0, HP) == pytest.approx(107.056, rel=1e-4)


def test_npsh_available_of_an_open_vessel():
    """Definition, by hand: 101325 Pa, water at 20 °C (p_v 2339.3 Pa, IAPWS-95), 2 m above."""
    expected = (101325 - 2339.3) / (998.207 * 9.80665) + 2.0 - 0.5
    assert npsh_available(101325.0, 2.0, 0.5, 2339.3, 998.207) == pytest.approx(expected)
    assert expected == pytest.approx(11.612, abs=1e-3)


@pytest.mark.parametrize(
    ("quantity", "power"), [("head", 2), ("shaft_power", 3), ("efficiency", 0)]
)
def test_a_polynomial_at_another_speed_is_the_affinity_law(quantity, power):
    coefficients, q, r = [30.0, 4.0, -700.0, 9.0], np.linspace(0, 0.2, 9), 0.83
    moved = evaluate(at_speed(coefficients, r, quantity), q * r)
    np.testing.assert_allclose(moved, evaluate(coefficients, q) * r**power, rtol=1e-13)
