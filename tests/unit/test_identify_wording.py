"""What a label can mean, and what the page says of the pump."""

import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from curvefit.identify.pumps import read_pump, speed_in
from curvefit.identify.wording import meanings, quantity_named
from curvefit.records import Word

BOX = np.array([[0, 0], [10, 0], [10, 5], [0, 5.0]])


@pytest.mark.parametrize(
    ("text", "quantity"),
    [
        ("H", "head"), ("Q-H", "head"), ("Head", "head"), ("Förderhöhe", "head"),
        ("hauteur", "head"), ("Prevalenza", "head"), ("Altura", "head"), ("TDH", "head"),
        ("η", "efficiency"), ("Eff.", "efficiency"), ("η [%]", "efficiency"),
        ("Wirkungsgrad", "efficiency"), ("rendement", "efficiency"), ("Rendimiento", "efficiency"),
        ("Eficiência", "efficiency"), ("η ges", "overall_efficiency"),
        ("Overall efficiency", "overall_efficiency"),
        ("P2", "shaft_power"), ("BHP", "shaft_power"), ("P (kW)", "shaft_power"),
        ("Leistung", "shaft_power"), ("Puissance", "shaft_power"), ("Potenza", "shaft_power"),
        ("P1", "input_power"), ("Power input", "input_power"),
        ("NPSH", "npsh_required"), ("NPSHr", "npsh_required"), ("N.P.S.H.", "npsh_required"),
        ("NPSH3", "npsh_required"), ("Δp", "differential_pressure"),
        ("Fig. 3", None), ("210", None), ("Ø210", None), ("max.", None), ("duty point", None),
    ],
)  # fmt: skip
def test_names_of_quantities(text, quantity):
    assert quantity_named(text) == quantity


@pytest.mark.parametrize(
    ("text", "kind", "value", "unit"),
    [
        ("Ø210", "diameter", 0.210, "mm"), ("ø 210", "diameter", 0.210, "mm"),
        ("D2 = 210", "diameter", 0.210, "mm"), ("210 mm", "diameter", 0.210, "mm"),
        ("8404", "diameter", 0.404, "mm"), ("O404", "diameter", 0.404, "mm"),
        ("0404", "diameter", 0.404, "mm"), ("@264", "diameter", 0.264, "mm"),
        ("Ø21O", "diameter", 0.210, "mm"), ("209/195", "diameter", 0.209, "mm"),
        ('8 1/2"', "diameter", 8.5 * 0.0254, "[in_i]"), ("8½", "diameter", 8.5 * 0.0254, "[in_i]"),
        ("8.5 in", "diameter", 8.5 * 0.0254, "[in_i]"),
        ('10-3/4"', "diameter", 10.75 * 0.0254, "[in_i]"),
        ("2900 rpm", "speed", 2900 / 60, "/min"), ("n = 1450 min-1", "speed", 1450 / 60, "/min"),
        ("1450 U/min", "speed", 1450 / 60, "/min"), ("50 Hz", "speed", 50.0, "Hz"),
        ("70 %", "percent", 0.70, "%"), ("7096", "percent", 0.70, "%"),
        ("η=72,5%", "percent", 0.725, "%"),
        ("3 stages", "stages", 3.0, ""), ("4-stufig", "stages", 4.0, ""),
        ("15 kW", "power", 15000.0, "kW"), ("3 m", "length", 3.0, "m"),
        ("10 ft", "length", 3.048, "[ft_i]"),
    ],
)  # fmt: skip
def test_first_reading_of_a_label(text, kind, value, unit):
    first = meanings(text)[0]
    assert first.kind == kind
    assert first.value == pytest.approx(value)
    assert first.unit == unit


@pytest.mark.parametrize("text", ["A", "B2", "IV"])
def test_letters_carry_no_number(text):
    assert {m.kind for m in meanings(text)} == {"letter"}
    assert all(m.value is None for m in meanings(text))


@pytest.mark.parametrize("text", ["", " ", "CM 80-200", "see page 12 of it", "12.5.2024"])
def test_texts_that_say_nothing_of_a_line(text):
    assert not [m for m in meanings(text) if m.plain]


def test_a_bare_number_is_never_plain():
    assert not any(m.plain for m in meanings("210"))


@pytest.mark.parametrize(
    ("text", "rpm"),
    [
        ("n = 2900 rpm", 2900), ("2900 1/min", 2900), ("3550 RPM", 3550), ("1450 U/min", 1450),
        ("Drehzahl: 1 450 min-1", 1450), ("2.900 giri/min", 2900), ("n=1760", 1760),
        ("1475 l/min", 1475), ("640 l/min", None), ("50 Hz", None), ("Pump 2900", None),
    ],
)  # fmt: skip
def test_speeds(text, rpm):
    found = speed_in(text)
    assert (None if found is None else round(found * 60, 3)) == rpm


def pump(*texts):
    return read_pump([Word(t, BOX) for t in texts])


def test_what_a_page_says_of_its_pump():
    read = pump("Model: KX 80-200", "n = 1450 rpm", "3 stages", "double suction", "ρ = 870 kg/m³")
    assert read.name == "KX 80-200"
    assert read.speed_si == pytest.approx(1450 / 60)
    assert (read.speed_basis, read.stages, read.suction_sides) == ("printed", 3, 2)
    assert read.density_si == 870.0


def test_a_frequency_and_poles_give_a_synchronous_speed():
    read = pump("50 Hz, 4 poles")
    assert read.speed_si == pytest.approx(25.0)
    assert read.speed_basis == "synchronous"


def test_a_frequency_alone_gives_no_speed():
    assert pump("50 Hz").speed_si is None


def test_two_speeds_on_a_page_are_no_rated_speed():
    assert pump("2900 rpm", "1450 rpm").speed_si is None


@pytest.mark.parametrize(
    ("text", "density"), [("SG = 1.2", 1200.0), ("ρ = 1,05 kg/dm³", 1050.0), ("SG = 9.9", None)]
)
def test_densities(text, density):
    assert pump(text).density_si == density


@given(st.text(alphabet="0123456789.,/-%\"' ØDHnPkWz=", max_size=9))
@example("00/11")
@example("0/0")
def test_no_text_breaks_the_reading_and_nothing_is_named_by_a_zero(text):
    assert all(m.value is None or m.value > 0 for m in meanings(text))
