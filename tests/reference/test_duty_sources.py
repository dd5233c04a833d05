"""The duty-point check against sources outside the project, each named beside its check."""

from fractions import Fraction

import numpy as np
import pytest

from curvefit.duty.crossing import crossings
from curvefit.duty.draws import draw_duty
from curvefit.duty.liquid import Liquid, atmosphere, water
from curvefit.duty.losses import FITTINGS, Fitting, Pipe, k_of_type
from curvefit.duty.machine import Arrangement, Line
from curvefit.duty.point import minimum_speed_ratio
from curvefit.duty.system import Suction, System
from curvefit.duty.wanted import diameter_for, speed_for
from curvefit.units import parse, parse_quantity

PLAIN = Liquid("water", 1000.0, 1.0034e-6, 2339.0)
GPM, CFS, FT = (parse(u).factor for u in ("US gpm", "cfs", "ft"))


def head_line(function, low, high):
    return Line("head", lambda q: np.asarray(function(q)), {}, (low, high))


# --- water ------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("celsius", "density", "viscosity", "pressure"),
    [  # IAPWS-95, R12-08 at 0.101325 MPa, computed with the libraries iapws and CoolProp
        (5, 999.96663, 1.518224e-6, 872.5751),
        (20, 998.20715, 1.003395e-6, 2339.3182),
        (60, 983.19582, 0.474000e-6, 19946.4343),
        (90, 965.30959, 0.325466e-6, 70181.7658),
    ],
)
def test_water_is_that_of_iapws(celsius, density, viscosity, pressure):
    found = water(celsius + 273.15)
    assert found.density == pytest.approx(density, rel=2e-7)
    assert found.viscosity == pytest.approx(viscosity, rel=2e-6)
    assert found.vapour_pressure == pytest.approx(pressure, rel=1e-6)


def test_water_against_an_independent_library():
    iapws = pytest.importorskip("iapws")
    for celsius in (10.0, 40.0, 80.0):
        theirs = iapws.IAPWS95(T=celsius + 273.15, P=0.101325)
        ours = water(celsius + 273.15)
        assert ours.density == pytest.approx(theirs.rho, rel=1e-6)
        assert ours.viscosity == pytest.approx(theirs.nu, rel=1e-5)


def test_atmosphere_of_geometric_altitude():
    # US Standard Atmosphere 1976, geometric altitude (ISO 2533, geopotential: 89874.56 Pa)
    assert atmosphere(1000.0) == pytest.approx(89876.285, abs=0.01)
    assert atmosphere(0.0) == pytest.approx(101325.0)


# --- friction and fittings --------------------------------------------------------------------


@pytest.mark.parametrize(
    ("reynolds", "roughness", "f"),
    [  # Colebrook's equation solved to 1e-15 by the library fluids
        (4000, 1e-4, 0.0400084312),
        (1e5, 1e-3, 0.0221745359),
        (1e6, 0, 0.0116450410),
        (1e8, 0.05, 0.0715509041),
        (1000, 1e-3, 0.064),  # laminar: 64/Re
    ],
)
def test_friction_factor(reynolds, roughness, f):
    pipe = Pipe("p", 10.0, 0.1, roughness=roughness * 0.1)
    flow = reynolds * np.pi * 0.1 * PLAIN.viscosity / 4
    assert pipe.factor(np.array([flow]), PLAIN)[0] == pytest.approx(f, rel=1e-8)


def test_friction_factor_has_no_jump_in_transition():
    pipe = Pipe("p", 10.0, 0.1, roughness=1e-4)
    flow = np.linspace(1500, 5000, 3501) * np.pi * 0.1 * PLAIN.viscosity / 4
    assert np.abs(np.diff(pipe.factor(flow, PLAIN))).max() < 1e-4


def test_darcy_weisbach_worked():
    # h = 8 f L/(π² g D⁵) Q² computed independently: f = 0.0195100290, h = 1.6126031 m
    pipe = Pipe("p", 100.0, 0.1, roughness=4.5e-5)
    assert pipe.loss(np.array([0.01]), PLAIN)[0] == pytest.approx(1.6126031, rel=1e-7)


def test_hazen_williams_is_its_velocity_form():
    # the published form V = 0.8492 C R^0.63 S^0.54 (SI); both forms round their constants
    flow, bore, c = 0.05, 0.2, 140.0
    slope = Pipe("p", 100.0, bore, hazen_williams_c=c).loss(np.array([flow]), PLAIN)[0] / 100.0
    velocity = 0.8492 * c * (bore / 4) ** 0.63 * slope**0.54
    assert velocity == pytest.approx(4 * flow / (np.pi * bore**2), rel=1e-3)


@pytest.mark.parametrize(
    ("kind", "k"),
    [  # Crane TP-410 for a bore of 0.1 m (fT = 0.0162885), as the library fluids computes them
        ("entrance_sharp", 0.5),
        ("entrance_rounded", 0.04),
        ("exit", 1.0),
        ("bend_90", 0.229023),
        ("mitre_90", 0.977308),
        ("gate_valve", 0.130308),
        ("globe_valve", 5.538076),
        ("swing_check_valve", 1.628846),
        ("ball_valve", 0.048865),
        ("foot_valve", 6.841153),
    ],
)
def test_fitting_types(kind, k):
    assert k_of_type(kind, 0.1) == pytest.approx(k, rel=2e-5)


def test_sudden_changes_of_bore():
    # Borda–Carnot (1 − β²)² on the smaller bore; Rennels 0.530127 for 1 → 0.4
    assert k_of_type("sudden_expansion", 0.5, 1.0) == pytest.approx(0.5625)
    assert k_of_type("sudden_contraction", 0.4, 1.0) == pytest.approx(0.530127, rel=2e-6)


def test_every_fitting_type_has_a_coefficient():
    for kind in FITTINGS:
        assert 0 < k_of_type(kind, 0.1, 0.15) < 20, kind


# --- duty points ------------------------------------------------------------------------------


def meet(pump, low, high, system):
    return crossings(pump, system, low, high)


def test_cengel_cimbala_parabolas():
    # Çengel & Cimbala, Fluid Mechanics, ch. 14: 7.43 L/min, 4.96 m
    (found,) = meet(lambda v: 7.46 - 0.0453 * v**2, 0, 12, lambda v: 3.52 + 0.0261 * v**2)
    assert found.flow == pytest.approx(7.42846, rel=1e-5)
    assert found.head == pytest.approx(4.96025, rel=1e-5)
    assert found.stable


def test_munson_example_12_4():
    # Munson, Young & Okiishi, Example 12.4: about 1600 gpm and 66.5 ft, read off a graph (1.5 %)
    flow = np.array([0, 400, 800, 1400, 1800, 2200, 2300]) * GPM
    head = np.array([88, 86, 81, 70, 60, 46, 40]) * FT
    pipe = Pipe("6 in", 200 * FT, 0.5 * FT, friction_factor=0.02)
    minor = Fitting("minor", 0.5 + 1.5 + 1.0, 0.5 * FT)
    system = System(10 * FT, PLAIN, discharge_parts=(pipe, minor))
    (found,) = meet(lambda q: np.interp(q, flow, head), 0, flow[-1], system.head)
    assert found.flow / GPM == pytest.approx(1600, rel=0.015)
    assert found.head / FT == pytest.approx(66.5, rel=0.02)
    # linear interpolation between the printed points, computed independently (g = 32.2 ft/s²)
    assert found.flow / GPM == pytest.approx(1586.3, rel=2e-3)


@pytest.mark.parametrize(
    ("parallel", "series", "flow", "head"),
    [(1, 1, 1.27204, 332.638), (1, 2, 2.57515, 464.743), (2, 1, 1.54670, 353.039)],
)
def test_two_pumps(parallel, series, flow, head):
    # textbook problem: H = 365 − 20 Q² (ft, ft³/s), lift 290 ft, 10 in × 90 ft f 0.022 and
    # 8 in × 4900 ft f 0.028; answers computed with K = 26.3508
    line = head_line(lambda q: (365 - 20 * (q / CFS) ** 2) * FT, 0.0, 4.2 * CFS)
    pipes = (
        Pipe("10 in", 90 * FT, 10 / 12 * FT, friction_factor=0.022),
        Pipe("8 in", 4900 * FT, 8 / 12 * FT, friction_factor=0.028),
    )
    system = System(290 * FT, PLAIN, discharge_parts=pipes)
    both = line.arranged(Arrangement(parallel, series))
    (found,) = meet(both.value, *both.range, system.head)
    assert found.flow / CFS == pytest.approx(flow, rel=1e-3)
    assert found.head / FT == pytest.approx(head, rel=1e-3)


def test_variable_speed_with_static_head():
    # H = 60 − 0.006 Q², system 20 + 0.004 Q² (m, any flow unit): closed forms
    line = head_line(lambda q: 60 - 0.006 * q**2, 0.0, 100.0)
    system = System(20.0, PLAIN, k=0.004)
    for ratio, flow, head in ((1, 63.24555, 36), (0.9, 53.47897, 31.44), (0.7, 30.65942, 23.76)):
        slow = line.arranged(Arrangement(speed_ratio=ratio))
        (found,) = meet(slow.value, *slow.range, system.head)
        assert (found.flow, found.head) == pytest.approx((flow, head), rel=1e-6)
    assert minimum_speed_ratio(line, system) == pytest.approx(0.5773503, rel=1e-7)
    assert speed_for(line, system, flow=50.0) == pytest.approx(0.8660254, rel=1e-7)
    assert speed_for(line, system, wanted_head=30.0) == pytest.approx(0.8660254, rel=1e-7)


def test_wanted_diameter_of_an_exact_family():
    # H = (D/D0)² (60 − 0.006 (Q D0/D)²): at Q = 50 the system asks 30 m, closed form
    def head_at(d):
        r = d / 0.25
        return head_line(lambda q: r**2 * (60 - 0.006 * (q / r) ** 2), 0.0, 95.0 * r)

    system = System(20.0, PLAIN, k=0.004)
    expected = 0.25 * np.sqrt((30 + 0.006 * 50**2) / 60)
    found = diameter_for(head_at, (0.2, 0.25), system, flow=50.0)
    assert found == pytest.approx(expected, rel=1e-9)
    assert diameter_for(head_at, (0.2, 0.25), system, wanted_head=30.0) == pytest.approx(expected)


def test_series_and_parallel_of_a_parabola():
    # n in series: na − nbQ²; n in parallel: a − (b/n²)Q² (common textbook identity)
    line, q = head_line(lambda q: 40 - 3.0 * q**2, 0.0, 3.0), np.array([0.5, 1.0, 2.0])
    np.testing.assert_allclose(line.arranged(Arrangement(1, 3)).value(q), 3 * (40 - 3 * q**2))
    np.testing.assert_allclose(line.arranged(Arrangement(2, 1)).value(q), 40 - 0.75 * q**2)


def test_drooping_curve_has_an_unstable_crossing():
    pump = lambda q: 30 + 4 * q - q**2  # noqa: E731
    low, high = meet(pump, 0, 8, lambda q: 32.0 + 0.1 * q**2)
    assert not low.stable
    assert high.stable


# --- suction ----------------------------------------------------------------------------------


def test_crane_npsh_available():
    # Crane TP-410, Example 7-32: tank at 5 psig, suction lift 25 ft, losses 6 ft, 62.364 lb/ft³,
    # vapour pressure 0.256 psi: 13.89 ft
    psi, density = parse("psi").factor, 62.364 * parse("lb/ft3").factor
    liquid = Liquid("water", density, 1e-6, 0.256 * psi)
    suction = Suction(-25 * FT, (5 + 14.696) * psi)
    bore = 0.1
    k = 6 * FT / ((4 * 0.01 / (np.pi * bore**2)) ** 2 / (2 * 9.80665))
    system = System(0.0, liquid, suction_parts=(Fitting("all", k, bore),), suction=suction)
    assert system.npsh_available(np.array([0.01]))[0] / FT == pytest.approx(13.8873, abs=0.01)


# --- uncertainty ------------------------------------------------------------------------------


def test_jcgm_101_additive_normals():
    # JCGM 101:2008, 9.2.2: the sum of four N(0, 1) has u = 2.00 and 95 % interval ±3.92;
    # here the four are causes of the head where pump and system meet at a slope of −1
    causes = {str(i): (lambda q: np.ones_like(q)) for i in range(4)}
    line = Line("head", lambda q: 200.0 - q, causes, (1.0, 400.0))
    system = System(100.0, PLAIN, k=0.0)
    (crossing,) = crossings(line.value, system.head, 1.0, 400.0)
    drawn = draw_duty(crossing, {"head": line}, system, np.random.default_rng(3), 200_000)
    interval = drawn.interval("flow", crossing.flow)
    assert drawn.values["flow"].std() == pytest.approx(2.00, rel=0.01)
    assert interval.low - crossing.flow == pytest.approx(-3.92, rel=0.015)
    assert interval.high - crossing.flow == pytest.approx(3.92, rel=0.015)


def test_stated_uncertainties_propagate_to_first_order():
    line = head_line(lambda q: 60 - 0.006 * q**2, 0.0, 100.0)
    system = System(20.0, PLAIN, k=0.004, u_losses=0.05, u_static=0.3)
    (crossing,) = crossings(line.value, system.head, 0.0, 100.0)
    drawn = draw_duty(crossing, {"head": line}, system, np.random.default_rng(3), 200_000)
    slope = 2 * (0.006 + 0.004) * crossing.flow
    expected = np.hypot(0.05 * 16.0, 0.3) / slope
    assert drawn.values["flow"].std() == pytest.approx(expected, rel=0.02)


def test_quantities_in_exact_arithmetic():
    gallon = 231 * Fraction("0.0254") ** 3
    assert parse_quantity("100 US gpm", "flow") == pytest.approx(
        float(100 * gallon / 60), rel=1e-14
    )
