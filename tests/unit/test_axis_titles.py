"""Titles of axes in the words of the trade."""

from __future__ import annotations

import pytest

from curvefit.calibrate.titles import read_title


@pytest.mark.parametrize(
    ("text", "quantity", "unit"),
    [
        ("Head (m)", "head", "m"),
        ("H [m]", "head", "m"),
        ("Total head in feet", "head", "[ft_i]"),
        ("Head - metres", "head", "m"),
        ("TDH, ft", "head", "[ft_i]"),
        ("Förderhöhe H [m]", "head", "m"),
        ("Hauteur manométrique totale HMT (m)", "head", "m"),
        ("Altura manométrica (m)", "head", "m"),
        ("Prevalenza H (m)", "head", "m"),
        ("Head [bar]", "differential_pressure", "bar"),
        ("Δp [kPa]", "differential_pressure", "kPa"),
        ("Flow rate in l/s", "flow", "L/s"),
        ("Q [1/s]", "flow", "L/s"),
        ("Q [/s]", "flow", "L/s"),
        ("Q [m²/h]", "flow", "m3/h"),
        ("Q [m'/h]", "flow", "m3/h"),
        ("Débit (m³/h)", "flow", "m3/h"),
        ("Caudal Q, l/min", "flow", "L/min"),
        ("Vazão (m3/h)", "flow", "m3/h"),
        ("Capacity - US GPM", "flow", "[gal_us]/min"),
        ("Q, US gal/min", "flow", "[gal_us]/min"),
        ("Flow (gpm (US))", "flow", "[gal_us]/min"),
        ("Flow rate (IGPM)", "flow", "[gal_br]/min"),
        ("P2/kW", "shaft_power", "kW"),
        ("P1 [W]", "input_power", "W"),
        ("Leistungsbedarf P [kW]", "shaft_power", "kW"),
        ("Potenza assorbita (kW)", "shaft_power", "kW"),
        ("BHP", "shaft_power", "[HP]"),
        ("NPSHr [m]", "npsh_required", "m"),
        ("NPSH3 / m", "npsh_required", "m"),
        ("NPSH required, ft", "npsh_required", "[ft_i]"),
        ("η [%]", "efficiency", "%"),
        ("ŋ [9%]", "efficiency", "%"),
        ("n [%]", "efficiency", "%"),
        ("Wirkungsgrad (%)", "efficiency", "%"),
        ("Overall efficiency, %", "overall_efficiency", "%"),
        ("Efficlency (%)", "efficiency", "%"),
    ],
)
def test_quantity_and_unit(text, quantity, unit):
    title = read_title(text)
    assert (title.quantity, title.unit) == (quantity, unit)


@pytest.mark.parametrize(
    "text", ["Ø 210 mm", "2900 rpm", "n = 2950 1/min", "Rev. 3 / 2021", "Pump 80-200", "A", "50 Hz"]
)
def test_other_words_name_no_axis(text):
    assert read_title(text).strength == 0


@pytest.mark.parametrize(
    ("text", "factor"),
    [
        ("Q [1000 m³/h]", 1000), ("Q ×100 US gpm", 100), ("Q (m³/h x 10³)", 1000),
        ("Power, PS", 0.73549875), ("Q [m³/h]", 1),
    ],
)  # fmt: skip
def test_factor_to_the_unit(text, factor):
    assert read_title(text).factor == pytest.approx(factor)
